"""Saturated moist air at several ticks, where temperatures wander alike for every member.

From tick to tick a station's temperature follows one sensor, and each member is off by its own
constant. What depends on the temperature alone (`e` and the two coefficients of the enhancement
factor) is then worked out exactly at a few temperatures of each member, Chebyshev's nodes over the
stretch, and interpolated between them: to rounding, at a fraction of the cost. The rest of the
formula is exact. Where temperatures do not wander alike, or pass the triple point, all of it is.
"""

from __future__ import annotations

from functools import lru_cache
from math import factorial

import numpy as np

from daemon.moisture import hardy
from daemon.moisture.conditions import COLDEST_K, HOTTEST_K
from daemon.moisture.ensemble import Array

ALIKE_K = 2e-11  # 1e-12 of a humidity ratio, and a hundred times what rounding makes of 300 K
FEWEST_NODES, MOST_NODES = 2, 9
# How steep e and both coefficients are at most, per K of their own logarithm: e over ice at 200 K.
STEEPEST_PER_K = 0.16
SMALLEST = 1e-14  # of the interpolation's error, relative


def saturated_mole_fraction(kelvin: Array, pressure_pa: Array, alike: bool = False) -> Array:
    """`hardy.saturated_mole_fraction` of (ticks, members).

    `alike`: every member's temperature is the same but for its own constant, as long as none
    stands at an end of the range.
    """
    way = kelvin[:, 0] - kelvin[0, 0]
    lowest, highest = float(way.min()), float(way.max())
    if alike:
        within = kelvin[way.argmin()].min() > COLDEST_K and kelvin[way.argmax()].max() < HOTTEST_K
    else:
        apart = kelvin - kelvin[0]
        apart -= way[:, None]
        within = bool(apart.max() <= ALIKE_K and apart.min() >= -ALIKE_K)
    if not within:
        return hardy.saturated_mole_fraction(kelvin, pressure_pa)
    half = (highest - lowest) / 2.0
    nodes = _nodes(half)
    if kelvin[0].min() + lowest > hardy.TRIPLE_POINT_K:
        phase = hardy.WATER
    elif kelvin[0].max() + highest <= hardy.TRIPLE_POINT_K:
        phase = hardy.ICE
    else:
        nodes = 0
    if nodes == 0 or nodes >= len(kelvin):
        return hardy.saturated_mole_fraction(kelvin, pressure_pa)
    middle = kelvin[0] + (lowest + highest) / 2.0
    places, to_series = _chebyshev(nodes)
    at = middle + half * places[:, None]
    saturation, a = hardy.pressure(phase, at), hardy.polynomial(phase.a, at)
    b = np.exp(hardy.polynomial(phase.b, at))
    if half > 0.0:
        angle = np.arccos(np.clip((way - (lowest + highest) / 2.0) / half, -1.0, 1.0))
        weights = np.cos(angle[:, None] * np.arange(nodes)) @ to_series
        saturation, a, b = weights @ saturation, weights @ a, weights @ b
    else:
        saturation, a, b = saturation[:1], a[:1], b[:1]
    return _fraction(saturation, a, b, pressure_pa)


def _fraction(saturation: Array, a: Array, b: Array, pressure_pa: Array) -> Array:
    """f e / P of the vapor pressure e and the coefficients of f, as `hardy.mole_fraction_of`."""
    share = saturation / pressure_pa
    np.minimum(share, 1.0, out=share)
    enhancement = 1.0 / share
    enhancement -= 1.0
    enhancement *= b
    enhancement += a * (1.0 - share)
    np.exp(enhancement, out=enhancement)
    enhancement *= share
    return enhancement


def _nodes(half_k: float) -> int:
    """How many nodes it takes over 2 `half_k`; 0 where that is no gain."""
    for nodes in range(FEWEST_NODES, MOST_NODES + 1):
        error = (STEEPEST_PER_K * half_k) ** nodes / factorial(nodes) / 2.0 ** (nodes - 1)
        if error < SMALLEST:
            return nodes
    return 0


@lru_cache(maxsize=MOST_NODES)
def _chebyshev(nodes: int) -> tuple[Array, Array]:
    """Chebyshev's nodes in [-1, 1], and what turns values there into the series' coefficients."""
    angles = np.pi * (np.arange(nodes) + 0.5) / nodes
    to_series = 2.0 / nodes * np.cos(np.arange(nodes)[:, None] * angles)
    to_series[0] /= 2.0
    return np.cos(angles), to_series
