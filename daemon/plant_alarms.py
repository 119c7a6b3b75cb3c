"""The plant's alarms: leakage high, compressor overworked. Pure, and free from tick to tick: what
they look at is worked out where it changes."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from daemon.alarms import AlarmDefinition, Condition
from daemon.moisture.byproducts import BUSY_HOURS
from daemon.moisture.description import Measured
from daemon.moisture.plant import Plant
from daemon.plant_figures import plant_view
from daemon.site.types import Site
from daemon.state import CoreState
from daemon.units import show_flow, show_percent

LEAKAGE, OVERWORKED = "line-leakage-high", "compressor-overworked"
RAISED_AT, RETURNS_BELOW = 0.9, 0.5  # share of members
DUTY_DEADBAND = 0.1
LEAST_TURNS = 3  # of the pressure switch, before delivered air is held against the type plate


class PlantAlarms:
    """The alarms of one site's plant."""

    def __init__(self, site: Site) -> None:
        self.site = site
        contact = site.line.compressor.running is not None
        gauge = any(
            station.kind == "receiver" and isinstance(station.pressure, Measured)
            for station in site.line.stations
        )
        self._watched = contact or gauge

    def define(self) -> Iterator[AlarmDefinition]:
        """None where nothing says when the compressor runs."""
        if not self._watched:
            return
        if not self.site.hours.always_open:  # leaks show while nobody works
            yield AlarmDefinition(LEAKAGE, "leakage-high", "line", "low")
        yield AlarmDefinition(OVERWORKED, "compressor-overworked", "compressor", "medium")

    def watched(
        self, state: CoreState, definitions: Mapping[str, AlarmDefinition]
    ) -> Iterator[tuple[AlarmDefinition, Condition, str]]:
        """What each says now."""
        plant = state.followed.plant
        if LEAKAGE in definitions:
            so = _leaks(plant)
            changes = (so == "so") != state.alarms[LEAKAGE].raised
            text = self._leak_words(state, so) if changes else state.alarms[LEAKAGE].text
            yield definitions[LEAKAGE], so, text
        if OVERWORKED in definitions:
            so = self._overworked(plant)
            changes = (so == "so") != state.alarms[OVERWORKED].raised
            text = self._overworked_words(state, so) if changes else state.alarms[OVERWORKED].text
            yield definitions[OVERWORKED], so, text

    def _overworked(self, plant: Plant) -> Condition:
        limit = self.site.limits.duty
        turns = 0.0 if plant.delivered_kg_per_s is None else plant.delivered_kg_per_s.count
        busy = plant.busy_h >= BUSY_HOURS and plant.busy > limit
        weak = turns >= LEAST_TURNS and plant.weak >= RAISED_AT
        if busy or weak:
            return "so"
        rested = plant.busy < limit - DUTY_DEADBAND
        return "not so" if rested and plant.weak < RETURNS_BELOW else "between"

    def _leak_words(self, state: CoreState, so: Condition) -> str:
        view = plant_view(self.site, state)
        if so != "so" or view.leak_m3_per_s is None:
            return "The line leaks less than its limit again."
        low, middle, high = (show_flow(each, self.site.units) for each in view.leak_m3_per_s.values)
        low = low.split(" ", 1)[0]
        year = ""
        if view.leak_kwh_per_year is not None:
            year = f", {view.leak_kwh_per_year.p50:.0f} kWh a year"
        if view.leak_cost_per_year is not None:
            year += f" ({view.leak_cost_per_year.p50:.0f} {view.currency})".replace(" )", ")")
        limit = show_percent(self.site.limits.leak)
        return (
            f"The line leaks about {middle} ({low} to {high}) while nobody works{year}: more than "
            f"{limit} of what the compressor delivers. Listen along it after work: hoses, "
            "couplings and drains first."
        )

    def _overworked_words(self, state: CoreState, so: Condition) -> str:
        plant, site = state.followed.plant, self.site
        if so != "so":
            return "The compressor copes again."
        if plant.busy > site.limits.duty:
            return (
                f"The compressor ran {show_percent(plant.busy)} of the last working hours; its "
                f"limit is {show_percent(site.limits.duty)}. Look for leaks and at its intake "
                "filter, and let it rest."
            )
        view = plant_view(site, state)
        ratio = view.delivered_to_rated
        share = "less" if ratio is None else f"{show_percent(ratio.p50)} of"
        return (
            f"The compressor delivers {share} what its type plate says. Look at its intake filter, "
            "its belt and its valves."
        )


def _leaks(plant: Plant) -> Condition:
    if plant.leak_kg_per_s is None:
        return "not so"
    if plant.leak_high >= RAISED_AT:
        return "so"
    return "not so" if plant.leak_high < RETURNS_BELOW else "between"
