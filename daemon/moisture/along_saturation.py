"""Saturated moist air at several ticks, where temperatures wander alike for every member.

From tick to tick a station's temperature follows one sensor, and each member is off by its own
constant. Hardy's f e, the pressure of vapor in saturated air, is

    ln(f e) = L + B P - C / P    with L = ln e + a - b, B = b / e, C = a e,

a and b being the coefficients of the enhancement factor f. L, B and C depend on the temperature
alone: they are worked out at a few temperatures of each member, Chebyshev's nodes over the ticks,
and interpolated between them, to rounding and at a fraction of the cost. The rest is exact. Where
temperatures do not wander alike, pass the triple point or come near boiling, all of it is.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from daemon.moisture import air, hardy
from daemon.moisture.along_conditions import Wandering
from daemon.moisture.conditions import LOWEST_PA
from daemon.moisture.ensemble import Array

ALIKE_K = 2e-11  # 1e-12 of a humidity ratio, and a hundred times what rounding makes of 300 K
FEWEST_NODES, MOST_NODES = 2, 8
# ln e is nearly a constant less c / T, with c / T below 60 from 200 K on: its error over
# T +- half is some c / T (half / T) ** nodes / 2 ** (nodes - 1).
STEEPNESS, COLDEST_NODE_K = 60.0, 200.0
SMALLEST = 3e-13  # of the interpolation's error, relative
MOST_SHARE = 0.9  # of vapor in air: beyond it it all but boils


def saturated_ratios(
    kelvin: Array | Wandering, pressure_pa: Array | Wandering
) -> tuple[Array, Array]:
    """Humidity ratios at saturation of every station, and the first one's mole fraction.

    Parameters
    ----------
    kelvin, pressure_pa : (stations, ticks, members); whether members' temperatures wander alike
        is looked at, station by station, where they do not come as `Wandering`.

    Returns
    -------
    (stations, ticks, members), kg/kg, and (ticks, members), both as of
    `hardy.saturated_mole_fraction`.
    """
    ratios = np.empty(kelvin.shape)
    fraction = np.empty(kelvin.shape[1:])
    courses = list(_courses(kelvin))
    for phase in (hardy.WATER, hardy.ICE):
        few = [course for course in courses if course.phase is phase and course.nodes]
        for course, series in zip(few, _series(phase, few), strict=True):
            i = course.station
            course.exact = not _interpolated(
                course, series, pressure_pa[i], ratios[i], fraction if i == 0 else None
            )
    for course in courses:
        if course.exact:
            i = course.station
            each = hardy.saturated_mole_fraction(kelvin[i], pressure_pa[i])
            ratios[i] = air.ratio_of_fraction(each)
            fraction = each if i == 0 else fraction
    return ratios, fraction


def _courses(kelvin: Array | Wandering) -> Iterator[_Course]:
    if isinstance(kelvin, Wandering):
        for i, (start, way) in enumerate(zip(kelvin.start, kelvin.way, strict=True)):
            yield _Course(i, start, way)
        return
    for i, rows in enumerate(kelvin):
        way = rows[:, 0] - rows[0, 0]
        yield _Course(i, rows[0], way if _are_alike(rows, way) else None)


def _are_alike(rows: Array, way: Array) -> bool:
    """Whether all members go the same way."""
    apart = rows - rows[0]
    apart -= way[:, None]
    return bool(apart.max() <= ALIKE_K and apart.min() >= -ALIKE_K)


@dataclass(slots=True)
class _Course:
    """How the temperatures of one station go."""

    station: int
    start: Array  # (members,), at the first tick
    way: Array | None  # (ticks,), the same for all; None: each goes its own
    lowest: float = 0.0  # how far they go from the first tick, K
    highest: float = 0.0
    phase: hardy.Phase | None = None
    nodes: int = 0  # how many it takes; 0: no gain
    exact: bool = True

    def __post_init__(self) -> None:
        if self.way is None:
            return
        self.lowest, self.highest = float(self.way.min()), float(self.way.max())
        if float(self.start.min()) + self.lowest > hardy.TRIPLE_POINT_K:
            self.phase = hardy.WATER
        elif float(self.start.max()) + self.highest <= hardy.TRIPLE_POINT_K:
            self.phase = hardy.ICE
        nodes = _nodes(self.half)
        self.nodes = nodes if nodes < len(self.way) else 0

    @property
    def half(self) -> float:
        return (self.highest - self.lowest) / 2.0

    @property
    def middle(self) -> Array:
        """Of each member's temperatures, (members,)."""
        middle: Array = self.start + (self.lowest + self.highest) / 2.0
        return middle

    def weights(self, nodes: int) -> Array:
        """What each node counts for at each tick, (ticks, nodes)."""
        assert self.way is not None
        place = np.zeros(len(self.way))
        if self.half > 0.0:
            place = (self.way - (self.lowest + self.highest) / 2.0) / self.half
        terms = np.empty((nodes, len(place)))
        terms[0], terms[1] = 1.0, place
        for n in range(2, nodes):
            terms[n] = 2.0 * place * terms[n - 1] - terms[n - 2]
        weights: Array = terms.T @ _chebyshev(nodes)[1]
        return weights


@dataclass(frozen=True, slots=True)
class _Series:
    """L, B and C of one station at the nodes, (nodes, members) each."""

    level: Array
    slope_per_pa: Array
    bend_pa: Array
    e_pa: Array

    @property
    def nodes(self) -> int:
        return len(self.level)


def _series(phase: hardy.Phase, courses: Sequence[_Course]) -> list[_Series]:
    """Of all stations that are of one phase, worked out together."""
    if not courses:
        return []
    places = _chebyshev(max(course.nodes for course in courses))[0][:, None]
    at = np.array([course.middle + course.half * places for course in courses])
    log_e = phase.log_pressure(at)
    e, a, b = np.exp(log_e), hardy.polynomial(phase.a, at), hardy.polynomial(phase.b, at)
    np.exp(b, out=b)
    log_e += a
    log_e -= b
    b /= e
    a *= e
    return [_Series(*each) for each in zip(log_e, b, a, e, strict=True)]


def _interpolated(
    course: _Course, series: _Series, pressure_pa: Array, ratio: Array, fraction: Array | None
) -> bool:
    """The humidity ratio, in place, and the mole fraction, where that is asked for; whether it
    could be done."""
    highest = MOST_SHARE * LOWEST_PA
    if series.e_pa.max() > highest and series.e_pa.max() > MOST_SHARE * pressure_pa.min():
        return False
    weights = course.weights(series.nodes)
    vapor, part = weights @ series.level, weights @ series.slope_per_pa
    part *= pressure_pa
    vapor += part
    np.matmul(weights, series.bend_pa, out=part)
    part /= pressure_pa
    vapor -= part
    np.exp(vapor, out=vapor)
    if fraction is not None:
        np.divide(vapor, pressure_pa, out=fraction)
    np.subtract(pressure_pa, vapor, out=part)
    np.divide(vapor, part, out=ratio)
    ratio *= air.WATER_TO_DRY_AIR
    return True


def _nodes(half_k: float) -> int:
    """How many nodes it takes over 2 `half_k`; 0 where that is no gain."""
    for nodes in range(FEWEST_NODES, MOST_NODES + 1):
        error = STEEPNESS * (half_k / COLDEST_NODE_K) ** nodes / 2.0 ** (nodes - 1)
        if error < SMALLEST:
            return nodes
    return 0


@lru_cache(maxsize=MOST_NODES)
def _chebyshev(nodes: int) -> tuple[Array, Array]:
    """Chebyshev's nodes in [-1, 1], and what turns the polynomials' values at a place into the
    weights of the nodes."""
    angles = np.pi * (np.arange(nodes) + 0.5) / nodes
    to_weights = 2.0 / nodes * np.cos(np.arange(nodes)[:, None] * angles)
    to_weights[0] /= 2.0
    return np.cos(angles), to_weights
