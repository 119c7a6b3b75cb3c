"""What moist air is made of and how dense it is, and how it cools when its pressure falls.

The compressibility factor is that of CIPM-2007: A. Picard, R. S. Davis, M. Glaeser and K. Fujii,
"Revised formula for the density of moist air (CIPM-2007)", Metrologia 45 (2008) 149-155,
appendix A.
"""

from __future__ import annotations

from typing import overload

import numpy as np

from daemon.moisture import bounds
from daemon.moisture.bounds import Values, as_given
from daemon.moisture.hardy import Array

GAS_CONSTANT = 8.314462618  # J/(mol K), exact in the SI of 2019
WATER_KG_PER_MOL = 0.018015268  # IAPWS-95
WATER_TO_DRY_AIR = 0.621945  # ratio of molar masses, ASHRAE RP-1485
DRY_AIR_KG_PER_MOL = WATER_KG_PER_MOL / WATER_TO_DRY_AIR


@overload
def mole_fraction(humidity_ratio: float) -> float: ...
@overload
def mole_fraction(humidity_ratio: Array) -> Array: ...
def mole_fraction(humidity_ratio: Values) -> Values:
    """Moles of vapor per mole of moist air, x = W / (0.621945 + W); what a pressure change keeps.

    Parameters
    ----------
    humidity_ratio : float or array
        kg of vapor per kg of dry air, 0 or more; infinite (no air) gives 1.

    Raises
    ------
    RangeError
        A negative humidity ratio.
    """
    return as_given(mole_fraction_unchecked(bounds.humidity_ratio(humidity_ratio)), humidity_ratio)


def mole_fraction_unchecked(humidity_ratio: Array) -> Array:
    """`mole_fraction` for arrays, without checks."""
    with np.errstate(divide="ignore", over="ignore"):
        x: Array = 1.0 / (1.0 + WATER_TO_DRY_AIR / humidity_ratio)
    return x


@overload
def compressibility(temperature_k: float, pressure_pa: float, mole_fraction: float) -> float: ...
@overload
def compressibility(temperature_k: Array, pressure_pa: Values, mole_fraction: Values) -> Array: ...
@overload
def compressibility(temperature_k: Values, pressure_pa: Array, mole_fraction: Values) -> Array: ...
@overload
def compressibility(temperature_k: Values, pressure_pa: Values, mole_fraction: Array) -> Array: ...
def compressibility(temperature_k: Values, pressure_pa: Values, mole_fraction: Values) -> Values:
    """Z in P V = Z n R T for moist air.

    Parameters
    ----------
    temperature_k, pressure_pa : float or array
        K, 173.15 to 373.15; Pa absolute, above 0 to 2 MPa.
    mole_fraction : float or array
        Of vapor in the moist air, 0 to 1.

    Returns
    -------
    float or array
        Without unit; 0.99 to 1.

    Raises
    ------
    RangeError
        An argument outside its range.

    Notes
    -----
    CIPM-2007 appendix A: Z = 1 - P/T [a0 + a1 t + a2 t^2 + (b0 + b1 t) x + (c0 + c1 t) x^2]
    + P^2/T^2 (d + e x^2), t in degC. Fitted for 15 to 27 degC near one atmosphere, used here far
    beyond: `dry_air_density` is within 0.04 % of CoolProp from -20 to 60 degC and 0.8 to 16 bar,
    0.06 % at -40, 0.5 % in saturated air at 80 degC.
    """
    t, p = bounds.temperature(temperature_k), bounds.pressure(pressure_pa)
    z = compressibility_unchecked(t, p, bounds.mole_fraction(mole_fraction))
    return as_given(z, temperature_k, pressure_pa, mole_fraction)


def compressibility_unchecked(temperature_k: Array, pressure_pa: Array, x: Array) -> Array:
    """`compressibility` for arrays of one or more dimensions, without checks."""
    celsius = temperature_k - 273.15
    ratio = pressure_pa / temperature_k
    # the coefficients of celsius first: x is often smaller than the rest, a value a member
    constant = 1.58123e-6 + x * (5.707e-6 + x * 1.9898e-4)
    slope = -2.9331e-8 - x * (2.051e-8 + x * 2.376e-6)
    squared = 1.83e-11 - 0.765e-8 * x * x
    z: Array = 1.0 - ratio * (constant + celsius * (slope + celsius * 1.1043e-10))
    z += ratio * ratio * squared
    return z


@overload
def dry_air_density(temperature_k: float, pressure_pa: float, humidity_ratio: float) -> float: ...
@overload
def dry_air_density(temperature_k: Array, pressure_pa: Values, humidity_ratio: Values) -> Array: ...
@overload
def dry_air_density(temperature_k: Values, pressure_pa: Array, humidity_ratio: Values) -> Array: ...
@overload
def dry_air_density(temperature_k: Values, pressure_pa: Values, humidity_ratio: Array) -> Array: ...
def dry_air_density(temperature_k: Values, pressure_pa: Values, humidity_ratio: Values) -> Values:
    """Dry air in a volume of moist air.

    Parameters
    ----------
    temperature_k, pressure_pa : float or array
        K, 173.15 to 373.15; Pa absolute, above 0 to 2 MPa.
    humidity_ratio : float or array
        kg of vapor per kg of dry air, 0 or more.

    Returns
    -------
    float or array
        kg of dry air per m3 of the mixture, P (1 - x) M / (Z R T).

    Raises
    ------
    RangeError
        An argument outside its range.
    """
    t, p = bounds.temperature(temperature_k), bounds.pressure(pressure_pa)
    density = dry_air_density_unchecked(t, p, bounds.humidity_ratio(humidity_ratio))
    return as_given(density, temperature_k, pressure_pa, humidity_ratio)


def dry_air_density_unchecked(t: Array, pressure_pa: Array, humidity_ratio: Array) -> Array:
    """`dry_air_density` for arrays of one or more dimensions, without checks."""
    x = mole_fraction_unchecked(humidity_ratio)
    return DRY_AIR_KG_PER_MOL * (1.0 - x) * _moles_per_m3(t, pressure_pa, x)


@overload
def vapor_concentration(
    humidity_ratio: float, temperature_k: float, pressure_pa: float
) -> float: ...
@overload
def vapor_concentration(
    humidity_ratio: Array, temperature_k: Values, pressure_pa: Values
) -> Array: ...
@overload
def vapor_concentration(
    humidity_ratio: Values, temperature_k: Array, pressure_pa: Values
) -> Array: ...
@overload
def vapor_concentration(
    humidity_ratio: Values, temperature_k: Values, pressure_pa: Array
) -> Array: ...
def vapor_concentration(
    humidity_ratio: Values, temperature_k: Values, pressure_pa: Values
) -> Values:
    """Vapor in a volume of moist air (absolute humidity), whether or not so much can be held.

    Parameters
    ----------
    humidity_ratio : float or array
        kg of vapor per kg of dry air, 0 or more.
    temperature_k, pressure_pa : float or array
        K, 173.15 to 373.15; Pa absolute, above 0 to 2 MPa.

    Returns
    -------
    float or array
        kg of vapor per m3 of the mixture at this temperature and pressure, x P M / (Z R T).

    Raises
    ------
    RangeError
        An argument outside its range.
    """
    w = bounds.humidity_ratio(humidity_ratio)
    t, p = bounds.temperature(temperature_k), bounds.pressure(pressure_pa)
    concentration = vapor_concentration_unchecked(w, t, p)
    return as_given(concentration, humidity_ratio, temperature_k, pressure_pa)


def vapor_concentration_unchecked(humidity_ratio: Array, t: Array, pressure_pa: Array) -> Array:
    """`vapor_concentration` for arrays of one or more dimensions, without checks."""
    x = mole_fraction_unchecked(humidity_ratio)
    return WATER_KG_PER_MOL * x * _moles_per_m3(t, pressure_pa, x)


@overload
def joule_thomson_drop(
    temperature_k: float, pressure_from_pa: float, pressure_to_pa: float
) -> float: ...
@overload
def joule_thomson_drop(
    temperature_k: Array, pressure_from_pa: Values, pressure_to_pa: Values
) -> Array: ...
@overload
def joule_thomson_drop(
    temperature_k: Values, pressure_from_pa: Array, pressure_to_pa: Values
) -> Array: ...
@overload
def joule_thomson_drop(
    temperature_k: Values, pressure_from_pa: Values, pressure_to_pa: Array
) -> Array: ...
def joule_thomson_drop(
    temperature_k: Values, pressure_from_pa: Values, pressure_to_pa: Values
) -> Values:
    """How much air cools when it expands through a valve and comes to rest, without heat or work.

    Parameters
    ----------
    temperature_k : float or array
        Before the valve, K, 173.15 to 373.15.
    pressure_from_pa, pressure_to_pa : float or array
        Before and after, Pa absolute, above 0 to 2 MPa.

    Returns
    -------
    float or array
        K; negative where the pressure rises.

    Raises
    ------
    RangeError
        An argument outside its range.

    Notes
    -----
    (0.2688 - 0.00165 t) K per bar, t in degC: a fit to CoolProp, from 3-8 bar gauge to atmosphere
    within 0.012 K between 10 and 40 degC, 0.03 K between 0 and 50. Dry air; the jet's own much
    colder core is no steady state.
    """
    t = bounds.temperature(temperature_k)
    before = bounds.pressure(pressure_from_pa, "pressure_from_pa")
    after = bounds.pressure(pressure_to_pa, "pressure_to_pa")
    drop = (0.2688 - 0.00165 * (t - 273.15)) * (before - after) / 1e5
    return as_given(drop, temperature_k, pressure_from_pa, pressure_to_pa)


def _moles_per_m3(t: Array, p: Array, x: Array) -> Array:
    return p / (compressibility_unchecked(t, p, x) * GAS_CONSTANT * t)


# A reference cubic metre: 20 degC, 1 bar absolute, 0 % relative humidity.
REFERENCE_DRY_AIR_KG_PER_M3 = dry_air_density(293.15, 1e5, 0.0)
