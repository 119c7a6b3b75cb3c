"""Dew-point margins at an outlet, per member: of the line, and of a surface.

The *line margin* is the least, over all that the outlet's air touches after the last station that
takes water out of it (stations, the hose, the slab it lies on), of the temperature there less the
dew point of that air at the pressure there. The *surface margin* is a surface's temperature less
the dew point of the air around it. Dew points are frost points at and below 0 degC.

Air is judged at the gun's own pressure, before the nozzle. The core of an expanding jet is always
supersaturated and tells nothing: what is given of expansion is the steady Joule-Thomson cooling.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from daemon.moisture import air
from daemon.moisture.beliefs import room_of, slab_of
from daemon.moisture.description import Like, Measured, RiseByDuty, Station
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array
from daemon.moisture.model import State
from daemon.moisture.plan import Plan

# Hoses on a slab run 5-8 K colder than booth air on a Monday: 4 K +- 4 K. Common practice.
SLAB_K, SLAB_GIVE_OR_TAKE_K = -4.0, 4.0
# Air around a hose that nobody measures, against the station that it hangs on, or against the
# intake where that station is as warm as a tank or as cold as a bath; an estimate.
ROOM_GIVE_OR_TAKE_K = 4.0
HOSE, SLAB = "hose", "slab"


@dataclass(frozen=True, slots=True)
class Way:
    """What the air of one outlet passes, as rows of the plan's stations."""

    outlet: int
    path: tuple[int, ...]  # from the intake to the station that it hangs on
    touched: tuple[int, ...]  # of those, after the last one that takes water out

    @property
    def station(self) -> int:
        """Where the outlet hangs."""
        return self.path[-1]


def way(plan: Plan, outlet: int) -> Way:
    """The way to an outlet, by its number."""
    path = [plan.index[plan.line.outlets[outlet].after]]
    while plan.parent[path[0]] >= 0:
        path.insert(0, plan.parent[path[0]])
    taking = [n for n, row in enumerate(path) if _takes_water_out(plan.stations[row])]
    after = taking[-1] + 1 if taking else 1
    return Way(outlet, tuple(path), tuple(path[after:]))


def relieved(plan: Plan, along: Way) -> bool:
    """Whether a dryer or a regulator stands on the way: else the margin stays near 0 K for good."""
    stations = [plan.stations[row] for row in along.path]
    return any(each.kind == "regulator" or _dries(each) for each in stations)


def _takes_water_out(station: Station) -> bool:
    return station.trap is not None or _dries(station)


def _dries(station: Station) -> bool:
    return station.dryer is not None and station.dryer.power.in_service


@dataclass(frozen=True, slots=True)
class Places:
    """All that an outlet's air touches. Rows are the touched stations, the hose, the slab."""

    names: tuple[str, ...]
    temperature_k: Array  # (places, members)
    pressure_pa: Array  # (pressures, members), absolute, the outlet's own last
    pressure_row: tuple[int, ...]  # of each place

    @property
    def at_outlet_pa(self) -> Array:
        """Pressure before the nozzle, (members,)."""
        pressure: Array = self.pressure_pa[-1]
        return pressure


@dataclass(frozen=True, slots=True)
class LineMargin:
    """Per member; all arrays are (members,)."""

    pressure_pa: Array  # absolute, where the outlet hangs
    dew_point_k: Array  # at that pressure
    margin_k: Array
    coldest: str  # the place that decides most members' margin


def believed(state: State, source: Measured) -> Array:
    """A channel's last good value with every member's error of it; NaN before the first."""
    sd = source.give_or_take * HALF_WIDTH_TO_SD
    held = state.held.get(source.channel)
    value = held.value if held is not None else np.nan
    spread: Array = value + state.offsets.channels[source.channel] * sd
    return spread


def outlet_ratio(state: State, along: Way) -> Array:
    """Humidity ratio of the air that last left at the outlet, (members,)."""
    ratio: Array = state.water.leaving_ratio[along.station]
    return ratio


def as_a_tank(plan: Plan, row: int) -> bool:
    """Whether a station's temperature is a tank's or a cooler's, and tells little of the room."""
    station = plan.stations[row]
    source = station.temperature
    if station.kind in ("receiver", "cooler"):
        return True
    return isinstance(source, Like | RiseByDuty) and as_a_tank(plan, plan.index[source.station])


def places(plan: Plan, state: State, along: Way) -> Places:
    """Temperatures and pressures of all that the air touches."""
    described = plan.line.outlets[along.outlet]
    rows = list(along.touched)
    temperature, pressure = state.conditions.temperature_k, state.conditions.pressure_pa
    if described.air_temperature is not None:
        room = believed(state, described.air_temperature)
    else:
        sd = ROOM_GIVE_OR_TAKE_K * HALF_WIDTH_TO_SD
        # a tank's warmth and a bath's cold stay there: the hose lies in a room
        near = 0 if as_a_tank(plan, along.station) else along.station
        room = temperature[near] + sd * state.beliefs[room_of(described.id)]
    if described.slab is not None:
        slab = believed(state, described.slab)
    else:
        sd = SLAB_GIVE_OR_TAKE_K * HALF_WIDTH_TO_SD
        slab = room + SLAB_K + sd * state.beliefs[slab_of(described.id)]
    names = (*(plan.stations[row].id for row in rows), HOSE, SLAB)
    distinct = rows or [along.station]
    last = len(distinct) - 1  # the touched stations end where the outlet hangs
    return Places(
        names,
        np.concatenate([temperature[rows], room[None], slab[None]]),
        pressure[distinct],
        (*range(len(rows)), last, last),
    )


def line_margin(ratio: Array, touched: Places) -> LineMargin:
    """The line margin of air with this humidity ratio (members,)."""
    dew_point_k = air.dew_point_unchecked(
        np.broadcast_to(ratio, touched.pressure_pa.shape), touched.pressure_pa
    )
    margins = touched.temperature_k - dew_point_k[list(touched.pressure_row)]
    decides = np.bincount(np.argmin(margins, axis=0), minlength=len(touched.names))
    return LineMargin(
        pressure_pa=touched.at_outlet_pa,
        dew_point_k=dew_point_k[-1],
        margin_k=margins.min(axis=0),
        coldest=touched.names[int(np.argmax(decides))],
    )


def line_margin_below(ratio: Array, touched: Places, limits_k: Array) -> Array:
    """The share of members whose line margin is below each limit; no inversion, so it is cheap.

    NaN where a temperature is not known.
    """
    colder = touched.temperature_k[None] - limits_k[:, None, None]
    holds = air.saturated_humidity_ratio_unchecked(
        colder, np.broadcast_to(touched.pressure_pa[list(touched.pressure_row)], colder.shape)
    )
    share: Array = np.mean(np.any(holds < ratio, axis=1), axis=-1)
    if np.isnan(touched.temperature_k).any():
        share = np.full_like(share, np.nan)
    return share


@dataclass(frozen=True, slots=True)
class Around:
    """The air around hose and surface, per member; arrays are (members,)."""

    temperature_k: Array
    relative_humidity: Array  # over liquid water, 0-1
    pressure_pa: Array
    ratio: Array  # humidity ratio


def around(plan: Plan, state: State, outlet: int) -> Around | None:
    """The air around an outlet; None where nobody measures it."""
    described = plan.line.outlets[outlet]
    if described.air_temperature is None or described.air_humidity is None:
        return None
    temperature = believed(state, described.air_temperature)
    humidity = np.clip(believed(state, described.air_humidity), 0.0, 1.0)
    pressure = state.conditions.pressure_pa[0]
    ratio = air.humidity_ratio_unchecked(temperature, pressure, humidity)
    return Around(temperature, humidity, pressure, ratio)


def dew_point_around(room: Around) -> Array:
    """K, (members,): at and below 0 degC the frost point, for frost is what forms there."""
    dew_point: Array = air.dew_point_unchecked(room.ratio, room.pressure_pa)
    return dew_point


def surface_margin_below(room: Around, surface_k: Array, limits_k: Array) -> Array:
    """The share of members whose surface margin is below each limit; NaN where it is not known."""
    colder = surface_k[None] - limits_k[:, None]
    holds = air.saturated_humidity_ratio_unchecked(
        colder, np.broadcast_to(room.pressure_pa, colder.shape)
    )
    share: Array = np.mean(holds < room.ratio, axis=-1)
    if np.isnan(colder).any() or np.isnan(room.ratio).any():
        share = np.full_like(share, np.nan)
    return share


def humidity_at_surface(dew_point_k: Array, surface_k: Array, pressure_pa: Array) -> Array:
    """Relative humidity of air of this dew point where it touches a surface, at most 1.

    The ratio of the vapor's mole fraction to that at saturation at the surface's temperature; over
    ice where either is at or below 0 degC.
    """
    holds = air.mole_fraction_unchecked(
        air.saturated_humidity_ratio_unchecked(surface_k, pressure_pa)
    )
    there = air.mole_fraction_unchecked(
        air.saturated_humidity_ratio_unchecked(dew_point_k, pressure_pa)
    )
    humidity: Array = np.minimum(there / holds, 1.0)
    return humidity


def after_expansion(hose_k: Array, pressure_pa: Array, atmosphere_pa: Array) -> Array:
    """Temperature of air let down to the atmosphere and come to rest, K: Joule-Thomson alone."""
    cooled: Array = hose_k - air.joule_thomson_drop(hose_k, pressure_pa, atmosphere_pa)
    return cooled
