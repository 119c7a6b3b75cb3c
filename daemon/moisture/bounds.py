"""Within what the formulas of moist air hold: the checks at their public face."""

from __future__ import annotations

import numpy as np

from daemon.errors import RangeError
from daemon.moisture.hardy import HIGHEST_K, LOWEST_K, Array

HIGHEST_PRESSURE_PA = 2.0e6

Values = float | Array


def temperature(value: Values, name: str = "temperature_k") -> Array:
    """An array of at least one dimension, K, within the formulas' range; NaN passes."""
    return _within(
        value, name, LOWEST_K, HIGHEST_K, "K", "-100 to 100 degC; give kelvin, not degrees"
    )


def pressure(value: Values, name: str = "pressure_pa") -> Array:
    """An array of at least one dimension, Pa absolute, above 0 to 2 MPa; NaN passes."""
    least = np.finfo(np.float64).tiny  # above zero
    hint = "0 to 2 MPa; give pascal absolute, not gauge"
    return _within(value, name, least, HIGHEST_PRESSURE_PA, "Pa", hint)


def relative_humidity(value: Values) -> Array:
    """An array of at least one dimension, fraction of saturation over water; NaN passes."""
    return _within(value, "relative_humidity", 0.0, 1.0, "", "a fraction 0 to 1, not percent")


def humidity_ratio(value: Values) -> Array:
    """An array of at least one dimension, kg/kg, 0 to infinity; NaN passes."""
    return _within(value, "humidity_ratio", 0.0, np.inf, "kg/kg", "0 or more")


def mole_fraction(value: Values) -> Array:
    """An array of at least one dimension, 0 to 1; NaN passes."""
    return _within(value, "mole_fraction", 0.0, 1.0, "", "0 to 1")


def as_given(result: Array, *arguments: Values) -> Values:
    """A float where every argument was one (or an array without dimensions), else the array."""
    if all(np.ndim(argument) == 0 for argument in arguments):
        return float(result[0])
    return result


def _within(value: Values, name: str, least: float, greatest: float, unit: str, hint: str) -> Array:
    array = np.atleast_1d(np.asarray(value, dtype=np.float64))
    outside = (array < least) | (array > greatest)
    if outside.any():
        worst = f"{array[outside][0]:g} {unit}".rstrip()
        count = f" ({outside.sum()} of {array.size} values)" if array.size > 1 else ""
        raise RangeError(f"{name}: {worst} is out of range{count}; it must be {hint}")
    return array
