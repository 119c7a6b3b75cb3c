"""One outlet as the site describes it, and what the state says of its air and of its surface.

Everything here is per member; verdicts and views are made of it elsewhere. Pure.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

import numpy as np

from daemon.channel_faults import unusable
from daemon.contradictions import Contradictions
from daemon.moisture import margin
from daemon.moisture.description import Like, Measured, RiseByDuty, Source
from daemon.moisture.dew_sensors import behind_dryer, channels_of, contradicts, wetter
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array, standard_normal
from daemon.moisture.floats import switches
from daemon.moisture.model import Model
from daemon.outlet_record import GaugeHeld
from daemon.site.types import OutletSettings, Site
from daemon.state import CoreState
from daemon.units import show_temperature
from daemon.work import PROFILES, Profile

TYPED_GIVE_OR_TAKE_K = 1.0  # of a surface thermometer in somebody's hand; common practice


@dataclass(frozen=True, slots=True)
class Described:
    """An outlet: its place, its way, what is asked of it, and the channels that it hangs on."""

    id: str
    way: margin.Way
    settings: OutletSettings
    profile: Profile
    line_channels: tuple[str, ...]
    air_channels: tuple[str, ...]  # of the air around the surface
    surface_channel: str  # "" without one
    watching: tuple[str, ...]  # sensors on the way that may contradict what is believed
    relieved: bool

    @property
    def wanted_line_k(self) -> float:
        """Dry enough from here: the site file's figure, else the profile's."""
        said = self.settings.line_margin_k
        return self.profile.line_margin_k if said is None else said


def describe(site: Site, model: Model) -> tuple[Described, ...]:
    """Every outlet of a site, in its order."""
    plan = model.plan
    found = []
    for number, (place, settings) in enumerate(zip(site.line.outlets, site.outlets, strict=True)):
        along = margin.way(plan, number)
        room = [place.air_temperature, place.air_humidity]
        found.append(
            Described(
                id=place.id,
                way=along,
                settings=settings,
                profile=PROFILES[settings.work],
                line_channels=_line_channels(model, along),
                air_channels=_named([*room, plan.stations[0].pressure]) if all(room) else (),
                surface_channel=place.surface.channel if place.surface is not None else "",
                watching=_watching(model, along),
                relieved=margin.relieved(plan, along),
            )
        )
    return tuple(found)


def _named(sources: Iterable[Source | None]) -> tuple[str, ...]:
    found = (s.channel for s in sources if isinstance(s, Measured))
    return tuple(dict.fromkeys(found))


def _line_channels(model: Model, along: margin.Way) -> tuple[str, ...]:
    """Every channel that the air on the way is reckoned from, also by way of rules."""
    plan = model.plan
    outlet = plan.line.outlets[along.outlet]
    rows, done = list(along.path), set(along.path)
    sources: list[Source | None] = []
    heard: list[str] = []
    contacts = [running] if (running := plan.line.compressor.running) is not None else []
    while rows:
        station = plan.stations[rows.pop(0)]
        own = [station.temperature, station.pressure, station.relative_humidity]
        sources += [*own, station.around]
        if station.measured_dew_point is not None:
            heard += channels_of(station.measured_dew_point)
        if station.dryer is not None and station.dryer.power.contact is not None:
            contacts.append(station.dryer.power.contact)
        for source in own:
            if isinstance(source, Like | RiseByDuty) and plan.index[source.station] not in done:
                rows.append(plan.index[source.station])
                done.add(plan.index[source.station])
    sources.append(outlet.slab if outlet.slab is not None else outlet.air_temperature)
    sources.append(outlet.air_temperature)
    return tuple(dict.fromkeys((*_named(sources), *heard, *contacts)))


def _watching(model: Model, along: margin.Way) -> tuple[str, ...]:
    """The sensors of measured dew points and of float switches on the way."""
    plan = model.plan
    found: list[str] = []
    for row in along.path:
        if (source := plan.stations[row].measured_dew_point) is not None:
            found.append(channels_of(source)[0])
    found += [switch.channel for row, switch in switches(plan) if row in along.path]
    return tuple(channel.rpartition(".")[0] for channel in found)


class OutletAir:
    """Asks a state about the outlets of one site."""

    def __init__(self, site: Site, model: Model) -> None:
        self.site, self.model = site, model
        self.outlets = describe(site, model)
        self.contradictions = Contradictions(site, model)

    # ---- the line ----

    def line_faults(self, state: CoreState, outlet: Described) -> list[str]:
        """Inputs of the line's air that cannot be believed, in words."""
        against = self.contradictions.found(state)
        return [
            *self.faults(state, outlet.line_channels),
            *(f"{sensor}: {against[sensor]}" for sensor in outlet.watching if sensor in against),
            *self._wetter(state, outlet),
        ]

    def _wetter(self, state: CoreState, outlet: Described) -> Iterator[str]:
        """Dew points that are measured above what is believed behind a dryer."""
        plan, units = self.model.plan, self.site.units
        for row in outlet.way.path:
            if plan.stations[row].measured_dew_point is None or not behind_dryer(plan, row):
                continue
            if contradicts(plan, state.model, row):
                continue  # told already
            if (found := wetter(plan, state.model, row)) is not None:
                least, most = (show_temperature(each, units) for each in found)
                yield (
                    f"{plan.stations[row].id}: a dew point of at least {least} is measured there, "
                    f"and at most {most} is believed: does the dryer before it dry?"
                )

    def beyond_belief(self, state: CoreState, outlet: Described) -> bool:
        """Whether a measured dew point is above what the line can have, or what its dryer is
        believed to give: then there is no number."""
        plan = self.model.plan
        impossible = any(contradicts(plan, state.model, row) for row in outlet.way.path)
        return impossible or any(self._wetter(state, outlet))

    def faults(self, state: CoreState, names: Iterable[str]) -> Iterator[str]:
        """Which of these channels cannot be believed, in words."""
        for name in names:
            if fault := unusable(state, name, self.model.period_us):
                yield fault

    def places(self, state: CoreState, outlet: Described) -> margin.Places:
        """All that the air touches."""
        return margin.places(self.model.plan, state.model, outlet.way)

    def flooded(self, state: CoreState, outlet: Described) -> list[str]:
        """Traps on the way that are taken for full."""
        names = (self.model.plan.stations[row].id for row in outlet.way.path)
        return [
            name
            for name in names
            if (alarm := state.alarms.get(f"{name}-flooded")) is not None and alarm.raised
        ]

    # ---- the surface ----

    def surface_faults(self, state: CoreState, outlet: Described) -> list[str]:
        """Inputs of the surface's margin that cannot be believed, in words."""
        names = (*outlet.air_channels, *([outlet.surface_channel] * bool(outlet.surface_channel)))
        found = list(self.faults(state, names))
        gauge = self.gauge(state, outlet)
        if gauge is not None and gauge.contradicts:
            found.append("The gauge's reading and the sensors cannot both be right")
        return found

    def gauge(self, state: CoreState, outlet: Described) -> GaugeHeld | None:
        """The gauge's reading while it speaks."""
        gauge = state.outlets[outlet.id].gauge
        return gauge if gauge is not None and state.time_us <= gauge.until_us else None

    def around(self, state: CoreState, outlet: Described) -> margin.Around | None:
        """The air around; None where nobody measures it."""
        return margin.around(self.model.plan, state.model, outlet.way.outlet)

    def surface_k(
        self, state: CoreState, outlet: Described, typed_k: float | None = None
    ) -> Array | None:
        """The surface's temperature, by the person, the gauge or the sensor; None: not known."""
        if typed_k is not None:
            line = self.model.plan.line
            spread = standard_normal(line.seed, f"typed surface of {outlet.id}", line.members)
            return typed_k + spread * (TYPED_GIVE_OR_TAKE_K * HALF_WIDTH_TO_SD)
        gauge = self.gauge(state, outlet)
        if gauge is not None and gauge.tells == "surface":
            return gauge.values
        return self.sensed_surface_k(state, outlet)

    def sensed_surface_k(self, state: CoreState, outlet: Described) -> Array | None:
        """The surface's temperature by its sensor; None without one that has spoken."""
        source = self.model.plan.line.outlets[outlet.way.outlet].surface
        if source is None:
            return None
        surface = margin.believed(state.model, source)
        return None if np.isnan(surface).any() else surface

    def surface_margin_k(
        self,
        state: CoreState,
        outlet: Described,
        dew_point_k: Array | None,
        surface_k: Array | None,
        typed: bool = False,
    ) -> Array | None:
        """The surface margin, with what the gauge told; None: not known."""
        gauge = None if typed else self.gauge(state, outlet)
        if gauge is not None and gauge.tells == "margin":
            return gauge.values
        if dew_point_k is None or surface_k is None:
            return None
        if gauge is not None and gauge.tells == "correction":
            return surface_k - dew_point_k + gauge.values
        return surface_k - dew_point_k
