"""The surface margin in the hours ahead: flash-off and cure must not end in condensation.

Today is taken to go as yesterday went from the same hour on, with a spread that grows to that of
one day against the next. A surface may cool with the room's air, but is not counted on to warm with
it: on a morning that turns mild it is the cold part that sweats.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from daemon.clock import HOUR_US
from daemon.moisture import air
from daemon.moisture.ensemble import Array
from daemon.outlet_record import HOURS_KEPT

HOURS_AHEAD = 12
# One day's margin against the day before at the same hour, standard deviation; twice as much where
# yesterday is not known. Estimates, no source.
DAY_TO_DAY_K, UNKNOWN_DAY_K = 2.0, 4.0
GROWS_OVER_H = 24.0


def with_dew_points(past: Array, pressure_pa: float) -> Array:
    """`OutletRecord.past` with dew points, K, in place of humidity ratios."""
    known = np.isfinite(past[:, 1])
    found = np.full_like(past, np.nan)
    found[:, 0] = past[:, 0]
    if known.any():
        ratio = past[known, 1]
        found[known, 1] = air.dew_point_unchecked(ratio, np.full_like(ratio, pressure_pa))
    return found


def foresee(past: Array, now_us: int, margin_k: Array, place: Array, hours: Sequence[int]) -> Array:
    """The surface margin some hours ahead, (hours, members), K.

    Parameters
    ----------
    past : air temperature and dew point at the last full hours, K, in the rows of
        `OutletRecord.past`.
    margin_k : the margin now, (members,).
    place : each member's standing place in what is not known, standard normal, (members,).
    hours : whole hours ahead, 1 to 23.
    """
    then = [_yesterday(past, now_us, hour) for hour in hours]
    base = _yesterday(past, now_us, 0)
    found = []
    for hour, values in zip(hours, then, strict=True):
        change = values - base
        known = bool(np.isfinite(change).all())
        fall_k = min(float(change[0]), 0.0) - float(change[1]) if known else 0.0
        day_k = DAY_TO_DAY_K if known else UNKNOWN_DAY_K
        sd = day_k * math.sqrt(-math.expm1(-2.0 * hour / GROWS_OVER_H))
        found.append(margin_k + fall_k + sd * place)
    return np.array(found)


def _yesterday(past: Array, now_us: int, ahead_h: int) -> Array:
    """Yesterday's air at this time of day and some hours on, between its two full hours."""
    hour, within_us = divmod(now_us, HOUR_US)
    before: Array = past[(hour - 24 + ahead_h) % HOURS_KEPT]
    if within_us == 0:
        return before
    after = past[(hour - 23 + ahead_h) % HOURS_KEPT]
    share = within_us / HOUR_US
    between: Array = before + (after - before) * share
    return between
