"""Every member of the ensemble run forward, hour by hour, through days that are only foreseen.

An hour's step is the model's own: the same conditions, the same water step, with the hour's mean
duty and the hour's air. The receivers' stock is taken as unchanged over an hour, which it nearly
is. Hours without flow are taken together, as cold as the coldest of them, since all that happens
in them is that the tank sheds what it can no longer hold.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from daemon.clock import HOUR_US
from daemon.moisture import air, flow
from daemon.moisture.conditions import COLDEST_K, HOTTEST_K, Conditions, Evaluation, Held
from daemon.moisture.ensemble import Array
from daemon.moisture.fitting_state import Moment
from daemon.moisture.model import Model, State
from daemon.moisture.outlook import Outlook


@dataclass(frozen=True, slots=True)
class Stretch:
    """An hour or less with flow, or longer without, that is still to come."""

    from_us: int
    until_us: int
    duty: Array  # (members,); all zero where nothing flows
    is_open: bool  # whether the shop works, in any part of it


def stretches(
    hours_us: Sequence[tuple[int, int]], is_open: Sequence[bool], duty: Array
) -> list[Stretch]:
    """Hours one by one, but those without flow together. `duty` is (hours, members)."""
    found: list[Stretch] = []
    for (begins, ends), works, own in zip(hours_us, is_open, duty, strict=True):
        last = found[-1] if found else None
        if last is not None and not own.any() and not last.duty.any() and works == last.is_open:
            found[-1] = replace(last, until_us=ends)
        else:
            found.append(Stretch(begins, ends, own, works))
    return found


class Ahead:
    """Steps of one model through an outlook."""

    def __init__(self, model: Model, outlook: Outlook) -> None:
        self._model, self._plan, self._outlook = model, model.plan, outlook

    def step(self, state: State, stretch: Stretch) -> State:
        """The state at the end of one stretch."""
        model, parameters = self._model, state.parameters
        dt_s = (stretch.until_us - stretch.from_us) / 1e6
        idle = not stretch.duty.any()
        at_us = self._coldest_us(stretch) if idle else stretch.from_us
        duty, mean_duty = self._follow(state.duty, stretch.duty, dt_s)
        drying = model.fittings.drying
        fitted = drying.foreseen(state.fittings, stretch.is_open, stretch.from_us)
        held = self._outlook.held(at_us)
        now = self._conditions(state, held, at_us, mean_duty)
        now = model.fittings.warmed(fitted, parameters.fittings, self._warmer(now, at_us, idle))
        saturated = air.saturated_humidity_ratio_unchecked(now.temperature_k, now.pressure_pa)
        intake = np.minimum(self._outlook.ratio(at_us), saturated[0])
        density: Array = air.dry_air_density(now.temperature_k[0], now.pressure_pa[0], intake)
        drawn = stretch.duty * dt_s * parameters.delivered_m3_per_s * density
        purging = drying.purged_share(fitted, parameters.fittings)
        # the stock stands still: what is drawn in is used
        after, moved = flow.move(self._plan, state.air, drawn, state.air.measured, purging)
        span = (stretch.from_us, stretch.until_us)
        moment = Moment(now, saturated, moved, held, state.offsets, *span)
        lying = replace(state, fittings=fitted)
        water, ledger, fitted = model.water_moved(lying, state.air.stored, intake, moment)
        return replace(
            state,
            time_us=stretch.until_us,
            duty=duty,
            air=after,
            water=water,
            ledger=ledger,
            conditions=now,
            saturated=saturated,
            fittings=fitted,
        )

    def _coldest_us(self, stretch: Stretch) -> int:
        hours = range(stretch.from_us, stretch.until_us, HOUR_US)
        return min(hours, key=lambda at_us: (self._outlook.temperature_k(at_us), at_us))

    def _follow(self, before: Array, duty: Array, dt_s: float) -> tuple[Array, Array]:
        """The filtered duty behind temperatures that follow it: at the end, and on average."""
        after, mean = before.copy(), before.copy()
        for i, constant_s in self._model.lagging:
            left = math.exp(-dt_s / constant_s)
            gone = before[i] - duty
            after[i] = duty + gone * left
            mean[i] = duty + gone * ((1.0 - left) * constant_s / dt_s)
        return after, mean

    def _conditions(
        self, state: State, held: Mapping[str, Held], at_us: int, duty: Array
    ) -> Conditions:
        lapses = dict(state.lapses)
        return Evaluation(self._plan, held, state.offsets, duty, at_us, lapses).conditions()

    def _warmer(self, now: Conditions, at_us: int, idle: bool) -> Conditions:
        """With the spread of the days ahead."""
        temperature = now.temperature_k + self._outlook.warmer_k(at_us)
        if idle:  # a tank at rest takes the temperature of its room
            rows = list(self._plan.receivers)
            temperature[rows] = np.minimum(temperature[rows], temperature[0])
        return replace(now, temperature_k=np.clip(temperature, COLDEST_K, HOTTEST_K))
