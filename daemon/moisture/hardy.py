"""Saturated moist air after Hardy (1998), forward and inverse, without checks.

B. Hardy, "ITS-90 formulations for vapor pressure, frostpoint temperature, dewpoint temperature, and
enhancement factors in the range -100 to +100 C", Papers and Abstracts of the Third International
Symposium on Humidity and Moisture, NPL, 1998.

Arrays of one or more dimensions in, arrays out: K, Pa, mole fractions. Every element is computed
by itself, so that a value does not depend on its neighbours. `air` is the checked public face.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

TRIPLE_POINT_K = 273.16  # water's, ITS-90: ice at and below, liquid above
LOWEST_K = 173.15
HIGHEST_K = 373.15

# Three steps reach rounding from any start in the range (two leave 2e-10 K); a fixed number keeps
# every element's result independent of the other elements.
_NEWTON_STEPS = 3

# A mole fraction of saturation at the triple point itself, rounded on its way, is still frost's.
_ROUNDING = 1e-14


@dataclass(frozen=True, slots=True)
class Phase:
    """Liquid water or ice: its vapor pressure and the coefficients of its enhancement factor."""

    log_pressure: Callable[[Array], Array]  # ln(Pa) at K
    log_pressure_slope: Callable[[Array], Array]  # its derivative, 1/K
    a: tuple[float, ...]
    b: tuple[float, ...]
    magnus: tuple[float, float]  # ln(e / 611.2 Pa) = first t / (second + t), t in degC: a start


def polynomial(coefficients: Sequence[float], x: Array) -> Array:
    """Lowest power first, by Horner's rule, in one new array."""
    y = coefficients[-1] * x
    for coefficient in coefficients[-2:0:-1]:
        y += coefficient
        y *= x
    y += coefficients[0]
    return y


def _slope(coefficients: Sequence[float], x: Array) -> Array:
    """Derivative of `polynomial`."""
    return polynomial([power * c for power, c in enumerate(coefficients)][1:], x)


_WATER_E = (19.54263612, -2.737830188e-2, 1.6261698e-5, 7.0229056e-10, -1.8680009e-13)
_ICE_E = (22.32870244, 1.39387003e-2, -3.4262402e-5, 2.7040955e-8)


def _log_e_water(t: Array) -> Array:
    inverse = 1.0 / t
    y = -2.8365744e3 * inverse
    y -= 6.028076559e3
    y *= inverse
    y += polynomial(_WATER_E, t)
    y += 2.7150305 * np.log(t)
    return y


def _log_e_water_slope(t: Array) -> Array:
    inverse = 1.0 / t
    y = ((2.0 * 2.8365744e3 * inverse + 6.028076559e3) * inverse + 2.7150305) * inverse
    return y + _slope(_WATER_E, t)


def _log_e_ice(t: Array) -> Array:
    y = -5.8666426e3 / t
    y += polynomial(_ICE_E, t)
    y += 0.67063522 * np.log(t)
    return y


def _log_e_ice_slope(t: Array) -> Array:
    inverse = 1.0 / t
    return (5.8666426e3 * inverse + 0.67063522) * inverse + _slope(_ICE_E, t)


WATER = Phase(
    log_pressure=_log_e_water,
    log_pressure_slope=_log_e_water_slope,
    a=(-1.6302041e-1, 1.8071570e-3, -6.7703064e-6, 8.5813609e-9),
    b=(-5.9890467e1, 3.4378043e-1, -7.7326396e-4, 6.3405286e-7),
    magnus=(17.62, 243.12),
)
ICE = Phase(
    log_pressure=_log_e_ice,
    log_pressure_slope=_log_e_ice_slope,
    a=(-6.0190570e-2, 7.3984060e-4, -3.0897838e-6, 4.3669918e-9),
    b=(-9.4868712e1, 7.2392075e-1, -2.1963437e-3, 2.4668279e-6),
    magnus=(22.46, 272.62),
)


def _coefficients(phase: Phase, t: Array) -> tuple[Array, Array]:
    """The two coefficients a and b of the enhancement factor."""
    b = polynomial(phase.b, t)
    np.exp(b, out=b)
    return polynomial(phase.a, t), b


def _log_enhancement_of(a: Array, b: Array, share: Array) -> Array:
    """ln f = a (1 - e/P) + b (P/e - 1), with `share` = e/P."""
    y = b * (1.0 / share - 1.0)
    y += a * (1.0 - share)
    return y


def log_enhancement(phase: Phase, t: Array, share: Array) -> Array:
    """ln f of the enhancement factor f, with `share` = e/P."""
    return _log_enhancement_of(*_coefficients(phase, t), share)


def _log_fraction(phase: Phase, t: Array, p: Array) -> tuple[Array, Array]:
    """ln(f e) of air saturated over one phase, and its derivative at constant pressure, 1/K."""
    log_e, e_slope = phase.log_pressure(t), phase.log_pressure_slope(t)
    share = np.exp(log_e) / p
    a, b = _coefficients(phase, t)
    over_a = _slope(phase.a, t) * (1.0 - share) - a * share * e_slope
    over_b = b * (_slope(phase.b, t) * (1.0 / share - 1.0) - e_slope / share)
    log_e += _log_enhancement_of(a, b, share)
    return log_e, e_slope + (over_a + over_b)


def pressure(phase: Phase, t: Array) -> Array:
    """Saturation vapor pressure e of the pure phase, Pa."""
    y = phase.log_pressure(t)
    np.exp(y, out=y)
    return y


def mole_fraction_of(phase: Phase, t: Array, p: Array) -> Array:
    """Mole fraction of vapor in air saturated over one phase, x = f e / P; 1 where e >= P."""
    return _fraction(pressure(phase, t), *_coefficients(phase, t), p)


def _fraction(e: Array, a: Array, b: Array, p: Array) -> Array:
    share = e / p
    np.minimum(share, 1.0, out=share)
    enhancement = _log_enhancement_of(a, b, share)
    np.exp(enhancement, out=enhancement)
    enhancement *= share
    return enhancement


@lru_cache(maxsize=4)
def _saturated_at(phase: Phase, kelvin: float) -> tuple[Array, Array, Array]:
    """e, a and b at one of the ends of the range, shape (1,) each."""
    t = np.full(1, kelvin)
    return pressure(phase, t), *_coefficients(phase, t)


def by_phase(function: Callable[[Phase, Array, Array], Array], t: Array, p: Array) -> Array:
    """`function` over ice at and below 273.16 K, over water above; each only where it is needed."""
    warm = t > TRIPLE_POINT_K
    if warm.all():
        return function(WATER, t, p)
    if not warm.any():  # NaN goes this way and stays NaN
        return function(ICE, t, p)
    t, p, warm = np.broadcast_arrays(t, p, warm)
    cold = ~warm
    result = np.empty(t.shape)
    result[warm] = function(WATER, t[warm], p[warm])
    result[cold] = function(ICE, t[cold], p[cold])
    return result


def saturated_mole_fraction(t: Array, p: Array) -> Array:
    """Of air saturated over ice at and below 273.16 K, over water above."""
    return by_phase(mole_fraction_of, t, p)


def water_over_ice(t: Array) -> Array:
    """e over liquid water by e over ice at and below 273.16 K; 1 above, where there is no ice."""
    cold = t <= TRIPLE_POINT_K
    ratio = np.ones(t.shape)
    if cold.any():
        below = t[cold]
        ratio[cold] = np.exp(_log_e_water(below) - _log_e_ice(below))
    return ratio


def _inverted(phase: Phase, x: Array, p: Array, over_water: bool) -> Array:
    """Temperature at which air saturated over `phase` has the mole fraction `x`."""
    target = np.log(x * p)
    slope, offset = phase.magnus
    start = target - np.log(611.2)
    inverse = 1.0 / (273.15 + offset * start / (slope - start))
    for _ in range(_NEWTON_STEPS):
        t = 1.0 / inverse
        value, gradient = _log_fraction(phase, t, p)
        if over_water and phase is ICE:
            value += _log_e_water(t) - _log_e_ice(t)
            gradient += _log_e_water_slope(t) - _log_e_ice_slope(t)
        # d/d(1/T) = -T^2 d/dT
        inverse += (value - target) / (gradient * t * t)
    result: Array = 1.0 / inverse
    return result


def saturation_temperature(x: Array, p: Array, over_water: bool = False) -> Array:
    """Inverse of `saturated_mole_fraction`, held within 173.15 to 373.15 K.

    Over ice at and below 273.16 K unless `over_water`. Where both phases have a solution (`f` steps
    down by 0.1 % there at 8 bar) the colder is taken, so that the result rises with `x`.
    """
    x, p = np.broadcast_arrays(x, p)
    dry_end = _fraction(*_saturated_at(ICE, LOWEST_K), p)
    frozen_end = _fraction(*_saturated_at(ICE, TRIPLE_POINT_K), p)
    if over_water:
        dry_end *= water_over_ice(np.full(1, LOWEST_K))
        frozen_end *= water_over_ice(np.full(1, TRIPLE_POINT_K))
    held = np.clip(x, dry_end, _fraction(*_saturated_at(WATER, HIGHEST_K), p))
    cold = held <= frozen_end * (1.0 + _ROUNDING)
    result = np.empty(held.shape)
    for phase, chosen in ((ICE, cold), (WATER, ~cold)):
        if chosen.any():
            result[chosen] = _inverted(phase, held[chosen], p[chosen], over_water)
    np.minimum(result, TRIPLE_POINT_K, out=result, where=cold)
    np.clip(result, LOWEST_K, HIGHEST_K, out=result)
    return result
