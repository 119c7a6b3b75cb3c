"""What is known of a plant, and what is being followed of it: plain records.

`byproducts` fills them; the state carries them from tick to tick.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from daemon.moisture.ensemble import Array
from daemon.moisture.leaks import decay_constant

TURNS_AVERAGED = 10.0  # measurements of a leak or of delivered air that count
STEADY_PER_S = 2.0 / 293.15 / 3600.0  # what 2 K an hour would make of a decay constant


@dataclass(frozen=True, slots=True)
class Sample:
    """The stock of dry air in all receivers at one time."""

    time_us: int
    kg: Array  # (members,)


@dataclass(frozen=True, slots=True)
class Phase:
    """A stretch of closed hours in which the compressor ran, or rested, all along."""

    running: bool
    first: Sample
    settled: Sample | None = None  # two hours on
    hour: Sample | None = None  # the last full hour since
    slowest_per_s: float = math.inf  # decay constants of single hours
    fastest_per_s: float = 0.0

    def noted(self, now: Sample) -> Phase:
        """With one more whole hour of rest, from the last full hour or the settled tank on."""
        since = self.hour or self.settled or self.first
        constant = float(decay(since, now).mean())
        return replace(
            self,
            hour=now,
            slowest_per_s=min(self.slowest_per_s, constant),
            fastest_per_s=max(self.fastest_per_s, constant),
        )

    @property
    def steady(self) -> bool:
        """Whether the air went evenly, as a leak takes it, and not by fits and starts."""
        return self.fastest_per_s <= 2.0 * max(self.slowest_per_s, 0.0) + STEADY_PER_S


@dataclass(frozen=True, slots=True)
class Figure:
    """Something measured: what each member makes of it, over so many measurements."""

    value: Array  # (members,)
    at_us: int
    count: float

    def told(self, value: Array, at_us: int) -> Figure:
        """With one more measurement; the last ten or so count."""
        count = self.count + 1.0
        share = 1.0 / min(count, TURNS_AVERAGED)
        return Figure(self.value + share * (value - self.value), at_us, count)


@dataclass(frozen=True, slots=True)
class Plant:
    """What is carried from tick to tick."""

    closed_us: int = -1  # since when the shop has been closed, -1 while it works
    phase: Phase | None = None
    decay_per_s: Array | None = None  # of the last let-down since the shop closed, (members,)
    turn_us: int = -1  # when the compressor last started, for a line without a gauge
    turn_on_s: float = 0.0  # how long it has run since
    leak_kg_per_s: Figure | None = None  # at the middle of the switch's span
    delivered_kg_per_s: Figure | None = None
    rated_kg_per_s: Array | None = None  # at the intake's air when that was measured, (members,)
    leak_high: float = 0.0  # the share of members that find the leak above its limit
    weak: float = 0.0  # ... and the delivered air well below the rated
    busy: float = 0.0  # the duty of working hours, over the last few
    busy_h: float = 0.0  # how many were seen


def told(figure: Figure | None, value: Array, at_us: int) -> Figure:
    """A figure with one more measurement; the first makes it."""
    return Figure(value, at_us, 1.0) if figure is None else figure.told(value, at_us)


def decay(first: Sample, last: Sample) -> Array:
    """The share of the stock lost per second, 1/s, (members,)."""
    seconds = (last.time_us - first.time_us) / 1e6
    constant: Array = np.asarray(decay_constant(first.kg, last.kg, seconds))
    return constant
