"""Every station of the line as it is now, and what each of its values comes from.

Made from a state when somebody looks, never per tick: a dew point costs an inversion. Pure.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from daemon.channel_faults import unusable
from daemon.clock import format_rfc3339
from daemon.moisture import air
from daemon.moisture.description import Fixed, Like, Measured, RiseByDuty, Source, Station
from daemon.moisture.model import Model
from daemon.outlets import interval
from daemon.site.types import Site
from daemon.site.words import source_words
from daemon.state import CoreState
from daemon.views import Origin, StationValue, StationView

# Air this near to saturation is said to be saturated: far below what any sensor resolves.
_AS_GOOD_AS = 1.0 - 1e-6


class LineViews:
    """Makes the views of one site's stations."""

    def __init__(self, site: Site, model: Model) -> None:
        self._site, self._model = site, model
        self._defaults = {(each.table, each.key) for each in site.defaults}

    def all(self, state: CoreState) -> tuple[StationView, ...]:
        """One view a station, in the order in which the air meets them."""
        inner, plan = state.model, self._model.plan
        pressure = inner.conditions.pressure_pa
        ratio = inner.water.leaving_ratio
        dew_points = air.dew_point_unchecked(ratio, pressure)
        saturated = (ratio >= inner.saturated * _AS_GOOD_AS).mean(axis=1)
        atmosphere_pa = float(np.median(pressure[0]))
        return tuple(
            StationView(
                station=station.id,
                kind=station.kind,
                after=station.after,
                at_us=state.time_us,
                temperature=self._temperature(state, i),
                pressure=self._pressure(state, i),
                atmosphere_pa=atmosphere_pa,
                relative_humidity=self._humidity(state) if i == 0 else None,
                dew_point_k=interval(dew_points[i]),
                saturated=float(saturated[i]),
                trap=station.trap is not None,
            )
            for i, station in enumerate(plan.stations)
        )

    def _temperature(self, state: CoreState, i: int) -> StationValue:
        station = self._model.plan.stations[i]
        return StationValue(
            interval(state.model.conditions.temperature_k[i]),
            *self._origin(state, station, "temperature", station.temperature),
        )

    def _pressure(self, state: CoreState, i: int) -> StationValue:
        station = self._model.plan.stations[i]
        return StationValue(
            interval(state.model.conditions.pressure_pa[i]),
            *self._origin(state, station, "pressure", station.pressure),
        )

    def _humidity(self, state: CoreState) -> StationValue | None:
        station = self._model.plan.stations[0]
        if station.relative_humidity is None:
            return None
        return StationValue(
            interval(state.model.conditions.relative_humidity),
            *self._origin(state, station, "relative_humidity", station.relative_humidity),
        )

    def _origin(
        self, state: CoreState, station: Station, key: str, source: Source
    ) -> tuple[Origin, str]:
        """Where a value comes from now: the kind of thing, and that in words."""
        said = key
        if key == "pressure" and station.kind == "regulator" and isinstance(source, Fixed):
            said = "set"
        words = source_words(self._site, said, source, barometer=station.kind == "intake")
        if (f'station "{station.id}"', said) in self._defaults:
            return "default", words
        match source:
            case Measured(channel=channel):
                return self._measured(state, station, key, channel, words)
            case Like() | RiseByDuty():
                return "rule", words
            case _:
                return "site file", words

    def _measured(
        self, state: CoreState, station: Station, key: str, channel: str, words: str
    ) -> tuple[Origin, str]:
        """A sensor's value, or what stands in for a sensor that is not heard."""
        fault = unusable(state, channel, self._model.period_us)
        lapse = state.model.lapses.get(f"{key} of {station.id}")
        if lapse is None:
            return "sensor", f"{words}; but {fault}" if fault else words
        since = (
            f"not heard since {format_rfc3339(lapse.since_us)}"
            if lapse.since_us >= 0
            else "never heard"
        )
        instead = "; ".join(self._instead(station, key))
        return "rule", f"sensor {channel} is {since}; instead: {instead}"

    def _instead(self, station: Station, key: str) -> Iterator[str]:
        """What a station's value leans towards while its sensor is silent."""
        plan = self._model.plan
        i = plan.index[station.id]
        if key == "relative_humidity":
            yield "anything that an ordinary room has"
            return
        rule = (plan.temperature_rules if key == "temperature" else plan.pressure_rules)[i]
        yield source_words(self._site, key, rule, barometer=station.kind == "intake")
