"""Leaks and compressors from pressures and times: the trade's formulas, SI, floats or arrays.

Pressures are absolute unless a name says otherwise. Volumes of air are what they would be at the
reference pressure of 1 bar and the reference temperature of 20 degC, dry (ISO 1217).
"""

from __future__ import annotations

import math

import numpy as np

from daemon.moisture.density import DRY_AIR_KG_PER_MOL, GAS_CONSTANT
from daemon.moisture.ensemble import Array

REFERENCE_PA, REFERENCE_K = 1.0e5, 293.15
DRY_AIR_J_PER_KG_K = GAS_CONSTANT / DRY_AIR_KG_PER_MOL
ADIABATIC = 1.4  # ratio of heat capacities of air
# Below this ratio of the pressures before and behind a hole the flow also depends on the latter.
CHOKED_RATIO = ((ADIABATIC + 1.0) / 2.0) ** (ADIABATIC / (ADIABATIC - 1.0))  # 1.893

Values = float | Array


def flow_of_pressure_change(volume_m3: Values, change_pa: Values, seconds: Values) -> Values:
    """What a tank gives or takes, m3/s at 1 bar and its own temperature: V dP / (P_ref t)."""
    return volume_m3 * change_pa / (REFERENCE_PA * seconds)


def cycle_flows(
    volume_m3: Values, swing_pa: Values, on_s: Values, off_s: Values
) -> tuple[Values, Values]:
    """Demand and delivered air from one turn of the pressure switch, m3/s at 1 bar.

    Demand is what empties the tank while the compressor rests; delivered is that and what fills
    it again. Holds where demand is alike on and off, and at one temperature throughout.

    Parameters
    ----------
    volume_m3 : the tank's volume.
    swing_pa : cut-out less cut-in, > 0.
    on_s, off_s : how long the compressor ran and rested, > 0.
    """
    demand = flow_of_pressure_change(volume_m3, swing_pa, off_s)
    return demand, demand + flow_of_pressure_change(volume_m3, swing_pa, on_s)


def load_cycle_leak(delivered: Values, on_s: Values, off_s: Values) -> Values:
    """What leaks when nobody uses air: the share of time on, of what is delivered; its unit."""
    return delivered * on_s / (on_s + off_s)


def mean_flow_factor(first_pa: Values, last_pa: Values) -> Values:
    """How much more a hole passes at the first pressure than on average down to the last.

    P1 ln(P1 / P2) / (P1 - P2): choked flow is proportional to the absolute pressure, so the
    pressure decays exponentially. Holds while last_pa is above `CHOKED_RATIO` times the
    atmosphere; first_pa > last_pa > 0.
    """
    factor: Values = first_pa * np.log(first_pa / last_pa) / (first_pa - last_pa)
    return factor


def decay_constant(first: Values, last: Values, seconds: Values) -> Values:
    """The share of its air that a leaking tank loses per second, 1/s: ln(first / last) / t.

    `first` and `last` are what it holds (or its absolute pressures at one temperature). Times what
    it holds this is the leak then: the mean flow times `mean_flow_factor`.
    """
    constant: Values = np.log(first / last) / seconds
    return constant


def choked_orifice_kg_per_s(
    diameter_m: Values, pressure_pa: Values, temperature_k: Values, coefficient: float = 1.0
) -> Values:
    """Air through a round hole into the open, kg/s, as long as it is choked.

    C A P sqrt(k / (R T)) (2 / (k + 1))^((k + 1) / (2 (k - 1))), an ideal gas through an ideal
    nozzle (any textbook on compressible flow). Coefficient: 1 well rounded, about 0.6 sharp-edged.
    """
    area = math.pi / 4.0 * diameter_m**2
    return coefficient * area * pressure_pa * _per_area_and_pressure(temperature_k)


def _per_area_and_pressure(temperature_k: Values) -> Values:
    exponent = (ADIABATIC + 1.0) / (2.0 * (ADIABATIC - 1.0))
    throat = (2.0 / (ADIABATIC + 1.0)) ** exponent
    root: Values = throat * np.sqrt(ADIABATIC / (DRY_AIR_J_PER_KG_K * temperature_k))
    return root


def equivalent_hole_m(
    leak_kg_per_s: Values, pressure_pa: Values, temperature_k: Values, coefficient: float = 0.6
) -> Values:
    """The diameter of the one round hole that leaks as much; the inverse of the above."""
    area = leak_kg_per_s / (coefficient * pressure_pa * _per_area_and_pressure(temperature_k))
    diameter: Values = np.sqrt(area * 4.0 / math.pi)
    return diameter


def molar_leak_rate(
    volume_m3: Values,
    first_pa: Values,
    last_pa: Values,
    first_k: Values,
    last_k: Values,
    seconds: Values,
) -> Values:
    """What came into a volume, mol/s: V / (R t) (p2 / T2 - p1 / T1) (40 CFR 1065.644).

    The correction for temperature that every decay needs; out of the volume is negative.
    """
    change = last_pa / last_k - first_pa / first_k
    return volume_m3 / (GAS_CONSTANT * seconds) * change


def feigned_share(before_k: Values, after_k: Values) -> Values:
    """The share of a tank's air that seems to leave when it only cools: 1 - T2 / T1."""
    return 1.0 - after_k / before_k
