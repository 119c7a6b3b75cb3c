"""Sensors that answer well and cannot be right: what they say beside what the line can be.

Each is a fault of the sensor in words, for its alarm; nothing of it is learned from.
"""

from __future__ import annotations

from daemon.clock import MINUTE_US
from daemon.due import volume_words
from daemon.moisture import dew_sensors, floats
from daemon.moisture.description import FloatSwitch, Measured, VentedCell
from daemon.moisture.ensemble import Array, percentiles
from daemon.moisture.model import Model
from daemon.site.types import Site
from daemon.state import CoreState
from daemon.units import show_temperature

RUNS_OUT_US = 5 * MINUTE_US  # a float falls with the water, not with the tap on a page


class Contradictions:
    """What one line's sensors say that cannot be."""

    def __init__(self, site: Site, model: Model) -> None:
        self.site, self.model = site, model
        self._switches = list(floats.switches(model.plan))
        self._points = dew_sensors.stations(model.plan)

    def found(self, state: CoreState) -> dict[str, str]:
        """The contradictions now, by sensor."""
        found: dict[str, str] = {}
        if self._switches:
            contents = self.model.contents(state.model)
            for station, switch in self._switches:
                text = self._switch(state, station, switch, contents)
                if text:
                    found[switch.channel.rpartition(".")[0]] = text
        for station in self._points:
            if dew_sensors.contradicts(self.model.plan, state.model, station):
                sensor, text = self._point(state, station)
                found[sensor] = text
        return found

    def _switch(self, state: CoreState, station: int, switch: FloatSwitch, contents: Array) -> str:
        seen = state.sensed.floats.get(switch.channel)
        trap = self.model.plan.stations[station].id
        drained_us = state.traps[trap].last_drain_us
        if seen is None or seen.closed is None or state.channels[switch.channel].fault:
            return ""
        if state.time_us - max(drained_us, seen.since_us) < RUNS_OUT_US:
            return ""
        if not floats.contradiction(contents[station], switch, seen.closed):
            return ""
        kg = percentiles(contents[station])
        low, high = (volume_words(self.site, float(each)) for each in (kg[0], kg[2]))
        level = volume_words(self.site, switch.level.value)
        if seen.closed:
            return (
                f"closed, which says {level} or more, but {trap} is believed to hold "
                f"{low} to {high}: does the float stick, or was it never drained?"
            )
        return (
            f"open, which says less than {level}, but {trap} is believed to hold {low} to "
            f"{high}: does the float stick, or was it drained and nobody said so?"
        )

    def _point(self, state: CoreState, station: int) -> tuple[str, str]:
        one, model = self.model.plan.stations[station], state.model
        said = dew_sensors.measured(
            self.model.plan, model.beliefs, model.held, model.conditions, station
        )
        source = one.measured_dew_point
        assert isinstance(source, Measured | VentedCell)
        sensor = dew_sensors.channels_of(source)[0].rpartition(".")[0]
        assert said is not None
        hottest_k = float(model.conditions.temperature_k[station].max())
        units = self.site.units
        dew_point = show_temperature(said.low_k if said.low_k is not None else said.high_k, units)
        return sensor, (
            f"a dew point of at least {dew_point} cannot be where {one.id} is at most "
            f"{show_temperature(hottest_k, units)}: is there liquid in its cell?"
        )
