"""Drains that empty themselves: what they leave while they work, and the chance that one is stuck.

Contents are always those of a working drain; the chance that it does not work is stated apart, and
grows with the time since somebody or something last saw it working.
"""

from __future__ import annotations

from dataclasses import dataclass
from statistics import NormalDist

import numpy as np
import numpy.typing as npt

from daemon.moisture.description import DrainKind, Emptying, Fixed, Trap
from daemon.moisture.ensemble import Array

Times = int | npt.NDArray[np.int64]

SELF_EMPTYING: tuple[DrainKind, ...] = ("float", "timer", "level", "pressure-off")
LEFT_ALONE: tuple[DrainKind, ...] = ("petcock", "none")

STUCK_A_YEAR = 0.1  # of the drains that work, those that stick within a year; practice
YEAR_US = 365.25 * 86_400e6

# What the kinds do where nothing else is said: shares of the trap's capacity, kg/s of water.
# Estimates: a float valve's seat of 1 mm, a level drain's of 2 mm, a timer's valve of 3 mm.
_OPENS_AT = {"float": (0.3, 0.1), "level": (0.35, 0.1)}
_CLOSES_AT = {"level": 0.1}
_PASSES = {"float": 0.2 / 60.0, "level": 1.0 / 60.0, "timer": 6.0 / 60.0}
PASSES_GIVE_OR_TAKE = 0.5  # of the value
TIMER_PERIOD_S, TIMER_OPEN_S = 1800.0, 5.0  # common practice, no source
MOST_OF_CAPACITY = 0.9  # at which a float or level drain opens at the latest

# A line counts as let down below this; a pressure-off drain opens there.
LET_DOWN_PA = 0.5e5
# A tank that stands without pressure for an hour was let down through its drain, most say:
# common practice, no source. The share of members that believe it.
EMPTY_PA, EMPTY_AFTER_US, LET_DOWN_SHARE = 0.1e5, 3_600_000_000, 0.8
# But not where the last bar took longer than an open drain takes (a 4 mm valve empties 500 L of it
# in some 3 minutes): it went through a leak, as in many a shop by night, and the water stayed.
LOW_PA, LETS_DOWN_WITHIN_US = 1.0e5, 600_000_000
_LET_DOWN_BELOW = NormalDist().inv_cdf(LET_DOWN_SHARE)


def usual(kind: DrainKind, capacity_kg: float) -> Emptying:
    """How a drain of this kind empties itself where the site file does not say."""
    share, width = _OPENS_AT.get(kind, (0.0, 0.0))
    passes = _PASSES.get(kind, 0.0)
    timer = kind == "timer"
    return Emptying(
        opens_at=Fixed(share * capacity_kg, width * capacity_kg),
        closes_at_kg=_CLOSES_AT.get(kind, 0.0) * capacity_kg,
        passes=Fixed(passes, PASSES_GIVE_OR_TAKE * passes),
        period_s=TIMER_PERIOD_S if timer else 0.0,
        open_s=TIMER_OPEN_S if timer else 0.0,
    )


def emptying_of(trap: Trap) -> Emptying:
    """How a trap's drain empties itself: as described, else as is usual."""
    return trap.emptying or usual(trap.drain, trap.capacity.value)


def chance_stuck(seen_working_us: int, now_us: int) -> float:
    """The chance that a drain is stuck, from when it was last seen working.

    A tenth of the drains a year (common practice, no source): 1 - 0.9^years, 0 when just seen.
    """
    years = max(now_us - seen_working_us, 0) / YEAR_US
    return float(1.0 - (1.0 - STUCK_A_YEAR) ** years)


def blows(phase: Array, period_s: float, from_us: Times, to_us: Times) -> Array:
    """How often a timer blows in (from, to], per member: nobody knows when its clock began.

    `phase` is standard normal; its place in the distribution is the place in the period.
    """
    place = _normal_cdf(phase)
    count: Array = np.floor(to_us / 1e6 / period_s - place) - np.floor(
        from_us / 1e6 / period_s - place
    )
    return count


def _normal_cdf(values: Array) -> Array:
    """Cumulative normal distribution (Abramowitz and Stegun 26.2.17, within 7.5e-8)."""
    t = 1.0 / (1.0 + 0.2316419 * np.abs(values))
    tail = np.exp(-0.5 * values * values) / np.sqrt(2.0 * np.pi)
    poly = t * (
        0.319381530 + t * (-0.356563782 + t * (1.781477937 + t * (-1.821255978 + t * 1.330274429)))
    )
    upper = tail * poly
    result: Array = np.where(values >= 0.0, 1.0 - upper, upper)
    return result


@dataclass(slots=True)
class Opening:
    """What one drain can do in one step. Arrays are (members,), kg."""

    kind: DrainKind
    opens_at: Array
    closes_at_kg: float
    most: Array  # of water, in this step
    opened: Array  # 1 where it stands open: a level drain's memory, a line that is let down
    limited: float = 0.0  # the share of members in which it could not pass all; set by `left`

    def left(self, held: Array) -> Array:
        """What a trap that holds `held` is left with by a working drain."""
        if self.kind == "float":
            left = np.maximum(held - self.most, np.minimum(held, self.opens_at))
            behind = left > np.maximum(self.opens_at, 1e-9) * 1.0001
        elif self.kind == "level":
            self.opened = np.where(held >= self.opens_at, 1.0, self.opened)
            left = np.where(
                self.opened > 0.0,
                np.maximum(held - self.most, np.minimum(held, self.closes_at_kg)),
                held,
            )
            self.opened = np.where(left > self.closes_at_kg, self.opened, 0.0)
            behind = left > self.opens_at
        elif self.kind == "timer":
            left = np.maximum(held - self.most, 0.0)
            behind = (self.most > 0.0) & (left > 0.0)
        else:
            left = np.where(self.opened > 0.0, np.minimum(held, self.closes_at_kg), held)
            behind = np.zeros(held.shape, dtype=bool)
        self.limited = float(np.count_nonzero(behind) / behind.size)
        settled: Array = left
        return settled


def lets_down(unknown: Array) -> Array:
    """1 for the members that take a tank without pressure to have been let down by its drain."""
    believed: Array = (unknown < _LET_DOWN_BELOW).astype(np.float64)
    return believed
