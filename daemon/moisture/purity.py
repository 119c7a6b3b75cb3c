"""ISO 8573-1 humidity and liquid water classes, as far as an interval supports one.

A class is assigned only by a test after ISO 8573-3; this says in which class's range an estimate
lies. Classes 1 to 6 are limits of the pressure dew point and hold for air without liquid water;
classes 7 to 9 and X are limits of liquid water, so that air with liquid is 7 or beyond, never 6.
The standard's text was not seen: the limits are from memory.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

# Class: pressure dew point at most, K (-70, -40, -20, +3, +7, +10 degC).
DEW_POINT_AT_MOST_K: tuple[tuple[str, float], ...] = (
    ("1", 203.15),
    ("2", 233.15),
    ("3", 253.15),
    ("4", 276.15),
    ("5", 280.15),
    ("6", 283.15),
)
# Class: liquid water at most, kg per reference m3 (0.5, 5, 10 g/m3); X is more than that.
LIQUID_AT_MOST_KG_PER_M3: tuple[tuple[str, float], ...] = (("7", 5e-4), ("8", 5e-3), ("9", 1e-2))
BEYOND = "X"
LEAST_LIQUID_KG_PER_M3 = 1e-6  # less than a milligram in a cubic metre: not told from none
CANNOT_TELL = "cannot tell"


def humidity_class(
    dew_point_k: tuple[float, float], liquid_kg_per_m3: tuple[float, float]
) -> str | None:
    """The class that an interval supports, "1" to "9" or "X"; None when it supports none.

    Parameters
    ----------
    dew_point_k : (low, high)
        Pressure dew point, K (the frost point at and below 0 degC); NaN where it is not known.
    liquid_kg_per_m3 : (low, high)
        Liquid water, kg per reference m3 of dry air; NaN where it is not known.

    Notes
    -----
    Limits are upper ones, so air of a class is also in the range of the next. What the wet end of
    the interval meets is supported; "more than 10 g/m3" is only where the dry end says so too.
    """
    wettest_k, (least, most) = dew_point_k[1], liquid_kg_per_m3
    if math.isnan(most) or math.isnan(least):
        return None
    if most <= LEAST_LIQUID_KG_PER_M3:
        if math.isnan(wettest_k):
            return None
        by_dew_point = _first(DEW_POINT_AT_MOST_K, wettest_k)
        if by_dew_point is not None:
            return by_dew_point
    by_liquid = _first(LIQUID_AT_MOST_KG_PER_M3, most)
    if by_liquid is None and least > LIQUID_AT_MOST_KG_PER_M3[-1][1]:
        return BEYOND
    return by_liquid


def class_words(supported: str | None) -> str:
    """ "in the range of class 4 (estimate, humidity only)", or "cannot tell"."""
    if supported is None:
        return CANNOT_TELL
    return f"in the range of class {supported} (estimate, humidity only)"


def _first(limits: Sequence[tuple[str, float]], value: float) -> str | None:
    return next((name for name, limit in limits if value <= limit), None)
