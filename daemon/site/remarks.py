"""What a practitioner would say about a line, and what it costs not to heed it.

Rules of the trade are common practice, no source.
"""

from __future__ import annotations

from collections.abc import Iterator

from daemon.moisture.description import Measured, Station
from daemon.moisture.flow import is_gauged, shortest_pump_up_s, shows_pump_ups
from daemon.site.fitting_remarks import fitting_remarks, is_dried
from daemon.site.names import Names
from daemon.site.types import Site
from daemon.units import show_difference, show_flow, show_volume


def remarks(site: Site, names: Names, *, loaded_contact: bool) -> tuple[str, ...]:
    """The remarks, the one that helps most first. Every one is a sentence or two."""
    return (
        *_sensors(site),
        *_compressor(site, loaded_contact),
        *_stations(site),
        *fitting_remarks(site),
        *_outlets(site),
        *_hours(site),
        *_unused(names),
        *_unheard(site),
    )


def _sensors(site: Site) -> Iterator[str]:
    stations = site.line.stations
    if not site.sensors:
        yield (
            "There is no sensor at all, so almost nothing is known: begin with one bme280 where "
            "the compressor breathes and a contact that closes while it runs."
        )
    for station in stations:
        if station.kind == "receiver" and not isinstance(station.temperature, Measured):
            yield (
                f"The temperature of {station.id} is a guess, and no guess costs more: it decides "
                "whether the water stays there or goes on down the line. First of all, put one "
                "ds18b20 under lagging on the tank's outlet stub."
            )
    if site.sensors and not isinstance(stations[0].relative_humidity, Measured):
        yield (
            "Nobody measures the humidity where the compressor breathes: every answer hangs on "
            "that guess. A bme280 there is the next best thing to buy."
        )
    if not isinstance(stations[0].pressure, Measured):
        yield (
            "There is no barometer: gauges read from the atmosphere, and the height of the shop "
            "decides it. Say the intake's pressure at least."
        )


def _compressor(site: Site, loaded_contact: bool) -> Iterator[str]:
    compressor, period_s = site.line.compressor, site.line.period_s
    measured = is_gauged(site.line)
    if compressor.running is None and not measured:
        yield (
            "Nothing says when the compressor makes air, neither a contact nor the tank's "
            "pressure: how much water there is stays a wide guess."
        )
    if compressor.running is None and measured and not shows_pump_ups(site.line):
        quickest, every = (f"{each:.0f} s" for each in (shortest_pump_up_s(site.line), period_s))
        yield (
            f"The compressor fills its tank in {quickest} at the quickest, and sample_every is "
            f"{every}: the pressure turns between two readings and does not tell how long it ran. "
            "Wire a contact, or take readings more often; until then how much water there is "
            "stays a wide guess."
        )
    if compressor.running is not None and not loaded_contact:
        yield (
            "A motor that runs is not air made: is it a screw compressor, or does it run on "
            'unloaded? Then wire the contact of its loading valve as well, as loaded = "...".'
        )
    assumed = _assumed(site, "compressor", "off_when_closed")
    if assumed and not site.hours.always_open:
        leak, water = show_flow(10e-3 / 60, site.units), show_volume(250e-6, site.units)
        yield (
            "Is the compressor off at night? It is taken to be. Left on, a small leak still makes "
            f"water: {leak} over a weekend about {water}."
        )


def _stations(site: Site) -> Iterator[str]:
    by_id = {station.id: station for station in site.line.stations}
    if not any(station.kind == "receiver" for station in site.line.stations):
        yield "No station is a receiver: the line is taken to have no tank that stores air."
    for station in site.line.stations:
        if station.kind in ("separator", "coalescer") and _behind_regulator(station, by_id):
            yield (
                f"{station.id} hangs behind a regulator, where the air is no longer saturated: a "
                "dry bowl there proves nothing. It belongs before the regulator."
            )
        trap = station.trap
        if station.kind == "receiver" and (trap is None or trap.drain == "none"):
            yield f"{station.id} is said to have no drain: a steel tank without one rusts. Look."
        if trap is not None and trap.drain == "float":
            yield (
                f"The float drain of {station.id} can gum shut or stick open, and stuck open it "
                "looks like a leak: work it by hand now and then."
            )
        if trap is not None and trap.drain == "timer":
            yield (
                f"The timer drain of {station.id}: set too short it floods, set too long it "
                "wastes air."
            )
        if trap is not None and trap.drain == "pressure-off":
            yield (
                f"The drain of {station.id} passes only when the line is let down: a line that "
                "stays under pressure never drains there."
            )


def _outlets(site: Site) -> Iterator[str]:
    by_id = {station.id: station for station in site.line.stations}
    for outlet in site.line.outlets:
        place = by_id[outlet.after]
        regulated = place.kind == "regulator" or _behind_regulator(place, by_id)
        if not regulated and not is_dried(place, by_id):
            yield (
                f"Neither a dryer nor a regulator stands before {outlet.id}: its air is saturated, "
                f"so its margin stays near {show_difference(0.0, site.units)} for good."
            )
    for settings in site.outlets:
        if settings.work and not settings.surroundings:
            yield (
                f"Nobody measures the air around {settings.id}: whether it is dry enough to work "
                "there stays unknown but for the air in the line. A bme280 in the clean supply "
                "air, named as surroundings, tells."
            )
    fed = {""}
    for outlet in site.line.outlets:
        at = outlet.after
        while at not in fed:
            fed.add(at)
            at = by_id[at].after
    dead = [station.id for station in site.line.stations if station.id not in fed]
    if dead:
        yield f"No air passes {', '.join(dead)}: no outlet hangs behind."


def _hours(site: Site) -> Iterator[str]:
    if site.hours.always_open:
        yield (
            "There is no [hours] table: the shop counts as always open, and what is drained every "
            "working day is due at midnight."
        )
    elif _assumed(site, "site", "timezone"):
        yield "The hours are taken for UTC: write the shop's timezone into [site]."


def _unused(names: Names) -> Iterator[str]:
    for sensor in names.sensors:
        if not names.used(sensor):
            yield f"Nothing uses the sensor {sensor}: name it where it hangs."


def _unheard(site: Site) -> Iterator[str]:
    for config in site.sensors:
        if config.driver == "mqtt-channel" and site.mqtt is None:
            yield (
                f"{config.id} waits for messages of another device, but there is no [mqtt] table: "
                "without a broker nothing will ever arrive."
            )


def _behind_regulator(station: Station, by_id: dict[str, Station]) -> bool:
    at = station.after
    while at:
        if by_id[at].kind == "regulator":
            return True
        at = by_id[at].after
    return False


def _assumed(site: Site, table: str, key: str) -> bool:
    return any(each.table == table and each.key == key for each in site.defaults)
