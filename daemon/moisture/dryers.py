"""What dryers, separators and chilled coils do to the air: ratings, overload, heat. Pure numpy.

Ratings are of free air at 7 bar gauge, 35 degC in, 25 degC around and +3 degC of pressure dew
point. The correction factors are those of a published table, from memory; makers differ by 10 %.
"""

from __future__ import annotations

from typing import overload

import numpy as np

from daemon.moisture.ensemble import Array

Values = float | Array

ZERO_C_K = 273.15
RATED_PRESSURE_PA, RATED_INLET_K, RATED_AROUND_K = 7e5, ZERO_C_K + 35.0, ZERO_C_K + 25.0
RATED_DEW_POINT_K = ZERO_C_K + 3.0

# A published table of correction factors, from memory; makers differ by 10 %. The last row of each
# is the table's own last slope carried on, towards the side on which a dryer can do less; on the
# other side the table's end holds.
_PRESSURE = ((0.0, 0.45), (4.0, 0.77), (6.0, 0.93), (7.0, 1.0), (8.0, 1.05), (10.0, 1.14))
_INLET = (
    (25.0, 1.2),
    (30.0, 1.12),
    (35.0, 1.0),
    (40.0, 0.83),
    (45.0, 0.69),
    (50.0, 0.59),
    (60.0, 0.39),
)
_AROUND = ((25.0, 1.0), (30.0, 0.96), (35.0, 0.90), (40.0, 0.82), (45.0, 0.72), (55.0, 0.52))
_DEW_POINT = ((3.0, 1.0), (5.0, 1.09), (7.0, 1.19), (10.0, 1.37))
# Above +10 degC the table is carried on along its last slope, here to a dew point of 60 degC.
_DEW_POINT_ON = (*_DEW_POINT, (60.0, 1.37 + 50.0 * 0.06))

# How far the rise of an overloaded dryer's dew point is from what the table says; estimate.
OVERLOAD_LOG_SD = 0.3
# Below this around it a refrigerated dryer may freeze; common practice, no source.
MAY_FREEZE_BELOW_K = ZERO_C_K + 5.0
# A cold surface that is kept from freezing stays above this.
COLDEST_DEW_POINT_K = ZERO_C_K + 0.5
WARMS_UP_US = 15 * 60 * 1_000_000  # a refrigerated dryer just switched on dries nothing; practice

# Beyond its rated flow a separator keeps s / (1 + a x^2) of the liquid, x the excess as a share of
# the rated flow: no step at the rated flow, half of it at twice that with a = 1. The law and its
# width are estimates, no source.
FALLS, FALLS_LOG_SD = 1.0, 0.5

MELTING_J_PER_KG = 333_600.0  # ice at 0 degC (CRC Handbook)
WATER_J_PER_KG_K = 4_190.0
VAPOR_J_PER_KG_K = 1_860.0
# What a lagged bath takes in from its room besides the air's heat, W: median, log sd. Estimate.
BATH_GAIN_W, BATH_GAIN_LOG_SD = 10.0, 0.5


def _table(
    rows: tuple[tuple[float, float], ...], scale: float, shift: float
) -> tuple[Array, Array]:
    points = np.array(rows)
    return points[:, 0] * scale + shift, points[:, 1]


_BY_PRESSURE = _table(_PRESSURE, 1e5, 0.0)
_BY_INLET = _table(_INLET, 1.0, ZERO_C_K)
_BY_AROUND = _table(_AROUND, 1.0, ZERO_C_K)
_BY_DEW_POINT = _table(_DEW_POINT_ON, 1.0, ZERO_C_K)


@overload
def correction(
    pressure_gauge_pa: float, inlet_k: float, around_k: float, dew_point_k: float
) -> float: ...
@overload
def correction(
    pressure_gauge_pa: Array, inlet_k: Array, around_k: Array, dew_point_k: Array
) -> Array: ...
def correction(
    pressure_gauge_pa: Values, inlet_k: Values, around_k: Values, dew_point_k: Values
) -> Values:
    """What a refrigerated dryer can take, as a share of its rated flow.

    Parameters
    ----------
    pressure_gauge_pa : Pa above the atmosphere, at its inlet.
    inlet_k, around_k : K, of the air that comes in and of the air around it.
    dew_point_k : K, the pressure dew point that is asked of it.

    Returns
    -------
    float or array
        The product of the four factors, linear between the table's rows.
    """
    product = (
        np.interp(pressure_gauge_pa, *_BY_PRESSURE)
        * np.interp(inlet_k, *_BY_INLET)
        * np.interp(around_k, *_BY_AROUND)
        * np.interp(dew_point_k, *_BY_DEW_POINT)
    )
    return product if isinstance(product, np.ndarray) else float(product)


def dew_point_rise(load: Array, dew_point_k: float) -> Array:
    """How far an overloaded refrigerated dryer's dew point lies above what it is set to, K.

    `load` is the flow as a share of what it can take at `dew_point_k`. At a dew point further up it
    could take more, by the table's factors: the air leaves at the one at which it can take all.
    """
    asked = np.interp(dew_point_k, *_BY_DEW_POINT)
    reached = np.interp(load * asked, _BY_DEW_POINT[1], _BY_DEW_POINT[0])
    rise: Array = np.maximum(reached - max(dew_point_k, RATED_DEW_POINT_K), 0.0)
    return rise


def separation_at(separation: Array, load: Array, falls: Array) -> Array:
    """The share of liquid that is kept at a flow of `load` times the rated one."""
    excess = np.maximum(load - 1.0, 0.0)
    kept: Array = separation / (1.0 + falls * excess * excess)
    return kept


def latent_heat(temperature_k: Array) -> Array:
    """Heat that water vapor gives off when it condenses, J/kg, 0 to 60 degC.

    Linear through the steam tables' 2500.9 kJ/kg at 0 and 2406.0 kJ/kg at 40 degC (IAPWS-95, from
    memory); within 0.1 % between.
    """
    heat: Array = 2_500_900.0 - 2_372.5 * (temperature_k - ZERO_C_K)
    return heat


def air_heat_capacity(pressure_pa: Array) -> Array:
    """Heat capacity of dry air, J/(kg K), near room temperature, 1 to 16 bar absolute.

    1006 J/(kg K) at 1 bar and 1.6 more for each bar further; within 0.6 % of CoolProp 8,
    0-40 degC.
    """
    heat: Array = 1_004.4 + 1.6e-5 * pressure_pa
    return heat


def coil_heat(
    dry_air_kg: Array,
    vapor_out_kg: Array,
    condensed_kg: Array,
    inlet_k: Array,
    outlet_k: Array,
    pressure_pa: Array,
) -> Array:
    """Heat that air gives off to something colder, J: sensible and latent; never negative.

    Parameters
    ----------
    dry_air_kg, vapor_out_kg : what passed, kg.
    condensed_kg : vapor that became liquid on the way, kg.
    inlet_k, outlet_k, pressure_pa : of the air, K and Pa absolute.

    Notes
    -----
    The liquid that comes along with the air is neglected: its heat is below one per cent.
    """
    fall = inlet_k - outlet_k
    sensible = (
        dry_air_kg * air_heat_capacity(pressure_pa)
        + (vapor_out_kg + condensed_kg) * VAPOR_J_PER_KG_K
    ) * fall
    heat: Array = np.maximum(sensible + condensed_kg * latent_heat(outlet_k), 0.0)
    return heat


def ice_left(ice_kg: Array, taken_j: Array) -> Array:
    """What is left of a bath's ice once it has taken this heat, kg."""
    left: Array = np.maximum(ice_kg - taken_j / MELTING_J_PER_KG, 0.0)
    return left


def bath_warmth(ice_kg: Array, taken_j: Array) -> Array:
    """How far a bath is above 0 degC, K: not at all while there is ice, then as its water warms.

    The bath is taken to hold the water of its ice and no other.
    """
    beyond = np.maximum(taken_j - ice_kg * MELTING_J_PER_KG, 0.0)
    warmth: Array = beyond / np.maximum(ice_kg * WATER_J_PER_KG_K, 1e-9)
    return warmth
