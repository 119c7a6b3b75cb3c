"""Drains that empty themselves, and tanks that are let down, over several ticks."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from daemon.moisture import drains
from daemon.moisture.along_course import Ints
from daemon.moisture.conditions import Conditions
from daemon.moisture.drains import Opening
from daemon.moisture.ensemble import Array
from daemon.moisture.fitting_state import FittingState
from daemon.moisture.fittings import Fittings
from daemon.moisture.model import Model, State


@dataclass(slots=True)
class DrainAlong:
    """One drain. What is (ticks, members) of its opening is taken tick by tick."""

    opening: Opening
    ticks: int
    passed: Array = field(init=False)  # kg in each tick
    opened: list[Array] = field(default_factory=list)  # after each tick
    limited: list[float] = field(default_factory=list)
    _most: Array = field(init=False)
    _open: Array = field(init=False)

    def __post_init__(self) -> None:
        self._most, self._open = self.opening.most, self.opening.opened
        self.passed = np.empty((self.ticks, self.opening.opens_at.size))

    def left(self, row: int, held: Array) -> Array:
        """What a trap that holds this much is left with; ticks are asked for in order."""
        if self._most.ndim == 2:
            self.opening.most = self._most[row]
        if self._open.ndim == 2:
            self.opening.opened = self._open[row]
        left = self.opening.left(held)
        np.subtract(held, left, out=self.passed[row])
        self.opened.append(self.opening.opened)
        # a timer that does not blow tells nothing
        quiet = self.opening.kind == "timer" and not self.opening.most.any()
        self.limited.append(-1.0 if quiet else self.opening.limited)
        return left


def drains_along(
    model: Model, state: State, now: Conditions, times_us: Ints
) -> Mapping[int, DrainAlong]:
    """What can leave the traps of stations by themselves, by station, at ticks with these
    conditions. Tanks that are let down are so at all of them, or at none."""
    fittings, fitted, drawn = model.fittings, state.fittings, state.parameters.fittings
    to_us = times_us[:, None]
    found = {
        i: fittings.opening(
            row,
            i,
            fitted,
            drawn,
            now.pressure_pa,
            (to_us - model.period_us, to_us),
            model.period_us / 1e6,
        )
        for row, i in enumerate(fittings.drains)
    }
    found |= fittings.let_down(fitted, drawn, int(times_us[0]))
    return {i: DrainAlong(opening, len(times_us)) for i, opening in found.items()}


def fitted_after(
    fittings: Fittings, before: FittingState, along: Mapping[int, DrainAlong], row: int
) -> tuple[Array, tuple[float, ...]]:
    """`FittingState.draining` and `limited` after one tick."""
    if not fittings.drains:
        return before.draining, before.limited
    of = [along[i] for i in fittings.drains]
    limited = []
    for one, was in zip(of, before.limited, strict=True):
        told = [each for each in one.limited[: row + 1] if each >= 0.0]
        limited.append(told[-1] if told else was)
    return np.array([one.opened[row] for one in of]), tuple(limited)


def let_down_from(state: FittingState, times_us: Ints) -> int:
    """The first tick in which another tank counts as let down than in the first of them."""
    good = len(times_us)
    for since_us in state.empty_since_us:
        acts = (times_us - since_us >= drains.EMPTY_AFTER_US) & (since_us >= 0)
        other = acts != acts[0]
        good = min(good, int(other.argmax()) if other.any() else good)
    return good
