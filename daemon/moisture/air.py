"""Moist air at a shop's temperatures and line pressures: what it can hold and what it holds.

SI, absolute pressure, numpy arrays (broadcast against each other) or plain floats; all floats in,
a float out. NaN passes through to NaN. A value outside a function's range is a RangeError that
names it, for the whole call. The `..._unchecked` functions take arrays of one or more dimensions,
check nothing and serve the model's inner loop: outside the range they extrapolate.

Range: 173.15 to 373.15 K, above 0 to 2 MPa. Against CoolProp's real-gas moist air (0.8 to 16 bar)
a saturated humidity ratio is within 0.19 % above 0 degC, 0.62 % down to -40, 1.43 % down to -70.
"""

from __future__ import annotations

from typing import overload

import numpy as np

from daemon.errors import RangeError
from daemon.moisture import bounds, hardy
from daemon.moisture.bounds import Values, as_given
from daemon.moisture.density import (
    REFERENCE_DRY_AIR_KG_PER_M3,
    WATER_TO_DRY_AIR,
    compressibility,
    compressibility_unchecked,
    dry_air_density,
    dry_air_density_unchecked,
    joule_thomson_drop,
    mole_fraction,
    mole_fraction_unchecked,
    vapor_concentration,
    vapor_concentration_unchecked,
)
from daemon.moisture.hardy import HIGHEST_K, TRIPLE_POINT_K, Array

__all__ = [
    "REFERENCE_DRY_AIR_KG_PER_M3",
    "TRIPLE_POINT_K",
    "WATER_TO_DRY_AIR",
    "compressibility",
    "compressibility_unchecked",
    "dew_point",
    "dew_point_over_water",
    "dew_point_unchecked",
    "dry_air_density",
    "dry_air_density_unchecked",
    "enhancement_factor",
    "humidity_ratio",
    "humidity_ratio_unchecked",
    "joule_thomson_drop",
    "mole_fraction",
    "mole_fraction_unchecked",
    "saturated_humidity_ratio",
    "saturated_humidity_ratio_unchecked",
    "saturation_vapor_pressure",
    "saturation_vapor_pressure_unchecked",
    "vapor_concentration",
    "vapor_concentration_unchecked",
]


@overload
def saturation_vapor_pressure(temperature_k: float) -> float: ...
@overload
def saturation_vapor_pressure(temperature_k: Array) -> Array: ...
def saturation_vapor_pressure(temperature_k: Values) -> Values:
    """Pressure of vapor in equilibrium with pure liquid water, or ice at and below 273.16 K.

    Parameters
    ----------
    temperature_k : float or array of any shape
        K, 173.15 to 373.15.

    Returns
    -------
    float or array of the same shape
        Pa, without air: air at pressure holds `enhancement_factor` times as much.

    Raises
    ------
    RangeError
        A temperature outside the range.

    Notes
    -----
    Hardy (1998), ITS-90, water and ice. Within 0.01 % of IAPWS-95 from 0 to 100 degC and 0.12 % of
    IAPWS R14-08 (ice) from -70 to 0 degC.
    """
    t = bounds.temperature(temperature_k)
    return as_given(saturation_vapor_pressure_unchecked(t), temperature_k)


def saturation_vapor_pressure_unchecked(temperature_k: Array) -> Array:
    """`saturation_vapor_pressure` for arrays of one or more dimensions, without checks."""
    return hardy.by_phase(
        lambda phase, t, _: hardy.pressure(phase, t), temperature_k, temperature_k
    )


@overload
def enhancement_factor(temperature_k: float, pressure_pa: float) -> float: ...
@overload
def enhancement_factor(temperature_k: Array, pressure_pa: Values) -> Array: ...
@overload
def enhancement_factor(temperature_k: float, pressure_pa: Array) -> Array: ...
def enhancement_factor(temperature_k: Values, pressure_pa: Values) -> Values:
    """How much more vapor air at a pressure holds than the pure vapor pressure says, `f`.

    Parameters
    ----------
    temperature_k, pressure_pa : float or array
        K, 173.15 to 373.15; Pa absolute, above 0 to 2 MPa.

    Returns
    -------
    float or array
        f in x = f e / P, without unit, 1.00 to 1.25; 1 where water would boil (e >= P). Over ice at
        and below 273.16 K, where it steps (by 0.1 % at 8 bar, 0.2 % at 16 bar).

    Raises
    ------
    RangeError
        A temperature or pressure outside the range.

    Notes
    -----
    Hardy (1998): f = exp[a (1 - e/P) + b (P/e - 1)], a and ln b cubic in temperature.
    """
    t, p = bounds.temperature(temperature_k), bounds.pressure(pressure_pa)
    return as_given(hardy.by_phase(_enhancement, t, p), temperature_k, pressure_pa)


@overload
def saturated_humidity_ratio(temperature_k: float, pressure_pa: float) -> float: ...
@overload
def saturated_humidity_ratio(temperature_k: Array, pressure_pa: Values) -> Array: ...
@overload
def saturated_humidity_ratio(temperature_k: float, pressure_pa: Array) -> Array: ...
def saturated_humidity_ratio(temperature_k: Values, pressure_pa: Values) -> Values:
    """The most vapor that air can hold, over ice at and below 273.16 K.

    Parameters
    ----------
    temperature_k, pressure_pa : float or array
        K, 173.15 to 373.15; Pa absolute, above 0 to 2 MPa.

    Returns
    -------
    float or array
        kg of vapor per kg of dry air; infinite where water boils (its vapor pressure reaches the
        pressure), for then there need be no air at all.

    Raises
    ------
    RangeError
        A temperature or pressure outside the range.

    Notes
    -----
    W = 0.621945 x / (1 - x), x = f e / P (Hardy 1998). Against CoolProp (ASHRAE RP-1485) within
    0.10 / 0.36 / 0.84 % to 9.5 bar and 0.19 / 0.62 / 1.43 % to 16 bar above 0, from -40 to 0 and
    from -70 to -40 degC. At 273.16 K it steps down by 0.1 % (8 bar) on warming: ice holds the
    enhancement factor a little higher.
    """
    t, p = bounds.temperature(temperature_k), bounds.pressure(pressure_pa)
    return as_given(saturated_humidity_ratio_unchecked(t, p), temperature_k, pressure_pa)


def saturated_humidity_ratio_unchecked(temperature_k: Array, pressure_pa: Array) -> Array:
    """`saturated_humidity_ratio` for arrays of one or more dimensions, without checks."""
    return ratio_of_fraction(hardy.saturated_mole_fraction(temperature_k, pressure_pa))


@overload
def humidity_ratio(temperature_k: float, pressure_pa: float, relative_humidity: float) -> float: ...
@overload
def humidity_ratio(
    temperature_k: Array, pressure_pa: Values, relative_humidity: Values
) -> Array: ...
@overload
def humidity_ratio(
    temperature_k: Values, pressure_pa: Array, relative_humidity: Values
) -> Array: ...
@overload
def humidity_ratio(
    temperature_k: Values, pressure_pa: Values, relative_humidity: Array
) -> Array: ...
def humidity_ratio(temperature_k: Values, pressure_pa: Values, relative_humidity: Values) -> Values:
    """The vapor in air whose relative humidity is known, over liquid water below 0 degC too.

    Parameters
    ----------
    temperature_k, pressure_pa : float or array
        K, 173.15 to 373.15; Pa absolute, above 0 to 2 MPa.
    relative_humidity : float or array
        Fraction of saturation over liquid water, 0 to 1, as humidity sensors state it at any
        temperature. Over ice the same air has a greater one: by a tenth of itself at -10 degC.

    Returns
    -------
    float or array
        kg of vapor per kg of dry air; below 0 degC it may exceed `saturated_humidity_ratio`, which
        is over ice.

    Raises
    ------
    RangeError
        A temperature, pressure or relative humidity outside the range (percent, by mistake).

    Notes
    -----
    x = RH f e_water / P. At and below 273.16 K `f` is the one over ice: between the phases it
    differs by 0.01 % at 1 bar and 0.1 % at 8 bar.
    """
    t, p = bounds.temperature(temperature_k), bounds.pressure(pressure_pa)
    rh = bounds.relative_humidity(relative_humidity)
    ratio = humidity_ratio_unchecked(t, p, rh)
    return as_given(ratio, temperature_k, pressure_pa, relative_humidity)


def humidity_ratio_unchecked(t: Array, pressure_pa: Array, relative_humidity: Array) -> Array:
    """`humidity_ratio` for arrays of one or more dimensions, without checks."""
    x = hardy.saturated_mole_fraction(t, pressure_pa) * hardy.water_over_ice(t)
    return ratio_of_fraction(x * relative_humidity)


@overload
def dew_point(humidity_ratio: float, pressure_pa: float) -> float: ...
@overload
def dew_point(humidity_ratio: Array, pressure_pa: Values) -> Array: ...
@overload
def dew_point(humidity_ratio: float, pressure_pa: Array) -> Array: ...
def dew_point(humidity_ratio: Values, pressure_pa: Values) -> Values:
    """Temperature at which water begins to drop out at this pressure; at and below 273.16 K frost.

    Parameters
    ----------
    humidity_ratio : float or array
        kg of vapor per kg of dry air, 0 or more.
    pressure_pa : float or array
        Pa absolute, above 0 to 2 MPa.

    Returns
    -------
    float or array
        K; the frost point at and below 273.16 K. Air drier than the range reaches, 0 included,
        gives 173.15 K, to be read "at or below -100 degC".

    Raises
    ------
    RangeError
        A negative humidity ratio, a pressure outside the range, or a dew point above 373.15 K.

    Notes
    -----
    The inverse of `saturated_humidity_ratio` to rounding (Newton's method in 1/T). Where that steps
    at 273.16 K two temperatures within 0.03 K have one humidity ratio: the colder is given.
    Against CoolProp, from atmosphere to 16 bar, within 0.016 / 0.044 / 0.06 K above 0, from -40 to
    0 and from -70 to -40 degC.
    """
    return _dew_point(humidity_ratio, pressure_pa, over_water=False)


@overload
def dew_point_over_water(humidity_ratio: float, pressure_pa: float) -> float: ...
@overload
def dew_point_over_water(humidity_ratio: Array, pressure_pa: Values) -> Array: ...
@overload
def dew_point_over_water(humidity_ratio: float, pressure_pa: Array) -> Array: ...
def dew_point_over_water(humidity_ratio: Values, pressure_pa: Values) -> Values:
    """Dew point over liquid water below 0 degC too, as weather services and some meters state it.

    Parameters, result, errors and source as for `dew_point`; below 0 degC this is the lower number
    of the two (a frost point of -20 degC is a dew point of -22.2 degC). It is the inverse of
    `humidity_ratio` at a relative humidity of 1.
    """
    return _dew_point(humidity_ratio, pressure_pa, over_water=True)


def dew_point_unchecked(
    humidity_ratio: Array, pressure_pa: Array, over_water: bool = False
) -> Array:
    """Both dew points for arrays, without checks; held to 173.15 to 373.15 K at either end."""
    fraction = mole_fraction_unchecked(humidity_ratio)
    return hardy.saturation_temperature(fraction, pressure_pa, over_water)


def ratio_of_fraction(x: Array) -> Array:
    """Humidity ratio of moist air with a mole fraction of vapor, kg/kg, without checks."""
    with np.errstate(divide="ignore"):
        ratio: Array = WATER_TO_DRY_AIR * x / (1.0 - x)
    return ratio


def _enhancement(phase: hardy.Phase, t: Array, p: Array) -> Array:
    share = np.minimum(hardy.pressure(phase, t) / p, 1.0)
    factor: Array = np.exp(hardy.log_enhancement(phase, t, share))
    return factor


def _dew_point(humidity_ratio: Values, pressure_pa: Values, over_water: bool) -> Values:
    w, p = bounds.humidity_ratio(humidity_ratio), bounds.pressure(pressure_pa)
    hottest = saturated_humidity_ratio_unchecked(np.full(1, HIGHEST_K), p)
    too_wet = w > hottest
    if too_wet.any():
        worst = float(np.broadcast_to(w, too_wet.shape)[too_wet][0])
        raise RangeError(
            f"humidity_ratio: {worst:g} kg/kg has its dew point above {HIGHEST_K} K (100 degC) "
            "at this pressure, beyond the formula; check the humidity and the pressure"
        )
    return as_given(dew_point_unchecked(w, p, over_water), humidity_ratio, pressure_pa)
