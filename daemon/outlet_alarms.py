"""The margin alarms: line margin low, surface margin low. Pure.

A look costs a good part of a tick, so the margins are looked at every ten minutes; between two
looks what was found stands. They are raised only while the shop is open: at night nobody sprays.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace

import numpy as np

from daemon.alarms import AlarmDefinition, AlarmRecord, Condition, Priority
from daemon.clock import MINUTE_US
from daemon.moisture import margin
from daemon.moisture.ensemble import Array, percentiles
from daemon.outlet_air import Described, OutletAir
from daemon.outlet_record import OutletRecord
from daemon.site import hours as opening
from daemon.state import CoreState
from daemon.units import show_difference
from daemon.verdict import differences, liquid
from daemon.views import Interval
from daemon.work import LIQUID_KG_PER_M3, WAIT_BELOW_K

LOOK_EVERY_US = 10 * MINUTE_US
ON_DELAY_US = OFF_DELAY_US = LOOK_EVERY_US  # two looks that say the same
DEADBAND_K = 1.0
MOST_BELOW = 0.05  # the share of members that the 5 % bound leaves out
LIQUID_RAISED_AT, LIQUID_RETURNS_BELOW = 0.5, 0.3  # share of members that carry too much


class MarginAlarms:
    """The margin alarms of one site."""

    def __init__(self, air: OutletAir) -> None:
        self.air = air
        self.watches = any(watches_line(each) or watches_surface(each) for each in air.outlets)

    def define(self) -> Iterator[AlarmDefinition]:
        """At most two an outlet."""
        for outlet in self.air.outlets:
            if watches_line(outlet):
                # where the margin stays near nothing for good, a low priority is enough
                priority: Priority = "medium" if outlet.relieved else "low"
                yield AlarmDefinition(
                    f"{outlet.id}-line-margin-low",
                    "line-margin-low",
                    outlet.id,
                    priority,
                    ON_DELAY_US,
                    OFF_DELAY_US,
                )
            if watches_surface(outlet):
                yield AlarmDefinition(
                    f"{outlet.id}-surface-margin-low",
                    "surface-margin-low",
                    outlet.id,
                    "medium",
                    ON_DELAY_US,
                    OFF_DELAY_US,
                )

    # ---- the look ----

    def look(self, state: CoreState) -> CoreState:
        """The state with what the margins say now, where it is time to look."""
        due = [
            outlet
            for outlet in self.air.outlets
            if state.time_us // LOOK_EVERY_US != state.outlets[outlet.id].looked_us // LOOK_EVERY_US
        ]
        if not due:
            return state
        site = self.air.site
        is_open = opening.is_open(site.hours, site.timezone, state.time_us)
        outlets = dict(state.outlets)
        for outlet in due:
            outlets[outlet.id] = self._looked(state, outlet, outlets[outlet.id], is_open)
        return replace(state, outlets=outlets)

    def asks(self, state: CoreState, is_open: bool) -> bool:
        """Whether a look would ask the model about any outlet's air."""
        return any(
            _asks_line(state, outlet, is_open) or _asks_surface(state, outlet, is_open)
            for outlet in self.air.outlets
        )

    def _looked(
        self, state: CoreState, outlet: Described, record: OutletRecord, is_open: bool
    ) -> OutletRecord:
        line: Condition = "between"
        surface: Condition = "between"
        if _asks_line(state, outlet, is_open):
            line = self._line(state, outlet)
        if _asks_surface(state, outlet, is_open):
            surface = self._surface(state, outlet)
        return replace(record, looked_us=state.time_us, line=line, surface=surface)

    def _line(self, state: CoreState, outlet: Described) -> Condition:
        if self.air.line_faults(state, outlet):
            return "between"
        limits_k = np.array([WAIT_BELOW_K, WAIT_BELOW_K + DEADBAND_K])
        ratio = margin.outlet_ratio(state.model, outlet.way)
        below = margin.line_margin_below(ratio, self.air.places(state, outlet), limits_k)
        wet = self._wet_share(state, outlet)
        if np.isnan(below).any():
            return "between"
        if below[0] > MOST_BELOW or wet >= LIQUID_RAISED_AT:
            return "so"
        return "not so" if below[1] <= MOST_BELOW and wet < LIQUID_RETURNS_BELOW else "between"

    def _wet_share(self, state: CoreState, outlet: Described) -> float:
        carried = state.model.water.carried.kg_per_m3[outlet.way.outlet]
        return float(np.mean(carried > LIQUID_KG_PER_M3))

    def _surface(self, state: CoreState, outlet: Described) -> Condition:
        room = self.air.around(state, outlet)
        surface_k = self.air.surface_k(state, outlet)
        if room is None or surface_k is None or self.air.surface_faults(state, outlet):
            return "between"
        gauge = self.air.gauge(state, outlet)
        if gauge is not None and gauge.tells == "correction":
            surface_k = surface_k + gauge.values
        wanted_k = outlet.settings.surface_margin_k
        limits_k = np.array([wanted_k, wanted_k + DEADBAND_K])
        below = margin.surface_margin_below(room, surface_k, limits_k)
        if np.isnan(below).any():
            return "between"
        if below[0] > MOST_BELOW:
            return "so"
        return "not so" if below[1] <= MOST_BELOW else "between"

    # ---- what the alarms watch ----

    def watched(
        self, state: CoreState, definitions: Mapping[str, AlarmDefinition]
    ) -> Iterator[tuple[AlarmDefinition, Condition, str]]:
        """Every margin alarm with its condition and its words."""
        for outlet in self.air.outlets:
            found = state.outlets[outlet.id]
            if watches_line(outlet):
                definition = definitions[f"{outlet.id}-line-margin-low"]
                yield self._one(state, outlet, definition, found.line)
            if watches_surface(outlet):
                definition = definitions[f"{outlet.id}-surface-margin-low"]
                yield self._one(state, outlet, definition, found.surface)

    def _one(
        self, state: CoreState, outlet: Described, definition: AlarmDefinition, so: Condition
    ) -> tuple[AlarmDefinition, Condition, str]:
        record: AlarmRecord = state.alarms[definition.id]
        text = record.text
        if so != "between" and (so == "so") != record.raised:  # only then are the words needed
            of_line = definition.kind == "line-margin-low"
            text = self._line_text(state, outlet, so) if of_line else self._surface_text(
                state, outlet, so
            )  # fmt: skip
        return definition, so, text

    def _line_text(self, state: CoreState, outlet: Described, so: Condition) -> str:
        if so != "so":
            return f"{outlet.id}: the air in the line is far enough from its dew point again."
        units = self.air.site.units
        touched = self.air.places(state, outlet)
        found = margin.line_margin(margin.outlet_ratio(state.model, outlet.way), touched)
        limit = show_difference(WAIT_BELOW_K, units)
        shown = differences(_interval(found.margin_k), units)
        text = (
            f"{outlet.id}: at {place_words(found.coldest)} the air in the line is {shown} above "
            f"its dew point; below {limit} water may drop out."
        )
        if self._wet_share(state, outlet) >= LIQUID_RAISED_AT:
            carried = state.model.water.carried.kg_per_m3[outlet.way.outlet]
            shown, unit = liquid(float(np.median(carried)), units)
            text += f" Liquid water comes along: about {shown} {unit}."
        flooded = ", ".join(self.air.flooded(state, outlet))
        if flooded:
            return f"{text} Drain {flooded}, then blow the hose out."
        if not outlet.relieved:
            return f"{text} It stays so: neither a dryer nor a regulator stands before it."
        return f"{text} Drain the traps; warm the hose, lower the pressure, or dry the air."

    def _surface_text(self, state: CoreState, outlet: Described, so: Condition) -> str:
        if so != "so":
            return f"{outlet.id}: the surface is far enough from the dew point again."
        units = self.air.site.units
        room, surface_k = self.air.around(state, outlet), self.air.surface_k(state, outlet)
        dew_point_k = None if room is None else margin.dew_point_around(room)
        found = self.air.surface_margin_k(state, outlet, dew_point_k, surface_k)
        shown = "not known" if found is None else differences(_interval(found), units)
        limit = show_difference(outlet.settings.surface_margin_k, units)
        return (
            f"{outlet.id}: the surface is {shown} above the dew point of the air around; {limit} "
            "are asked for. Wait, warm the surface, or dry the air."
        )


def watches_line(outlet: Described) -> bool:
    """Whether a low line margin is news: without dryer and regulator only to who asked for one."""
    asked = bool(outlet.settings.work) or outlet.settings.line_margin_k is not None
    return outlet.relieved or asked


def watches_surface(outlet: Described) -> bool:
    """Whether there is a surface to watch: measured, with the air around, and it counts."""
    return bool(outlet.surface_channel and outlet.air_channels and outlet.profile.surface_rule)


def place_words(place: str) -> str:
    """A place that the air touches, for people."""
    return {margin.HOSE: "the hose", margin.SLAB: "the slab under the hose"}.get(place, place)


def _asks_line(state: CoreState, outlet: Described, is_open: bool) -> bool:
    return watches_line(outlet) and (is_open or _raised(state, f"{outlet.id}-line-margin-low"))


def _asks_surface(state: CoreState, outlet: Described, is_open: bool) -> bool:
    name = f"{outlet.id}-surface-margin-low"
    return watches_surface(outlet) and (is_open or _raised(state, name))


def _raised(state: CoreState, alarm: str) -> bool:
    return state.alarms[alarm].raised


def _interval(values: Array) -> Interval:
    low, middle, high = percentiles(values)
    return Interval(float(low), float(middle), float(high))
