"""What a reading looks like in the site's units, what is plausible, and what to do about a fault.

Plausible is what shops show; it is common practice, no source, and wider than any good day.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

from daemon.moisture.description import Measured, StationKind, VentedCell
from daemon.site.sources import is_barometer
from daemon.site.types import Site
from daemon.units import (
    People,
    show_barometer,
    show_flow,
    show_percent,
    show_pressure,
    show_temperature,
)
from sensors import reasons
from sensors.reading import Channel
from sensors.registry import SensorConfig

ZERO_C = 273.15
_BAROMETER_PA = (80_000.0, 108_500.0)  # sea level in a high to 1,900 m
_AIR_K, _DEW_POINT_K = (ZERO_C - 20.0, ZERO_C + 45.0), (ZERO_C - 70.0, ZERO_C + 30.0)
_KIND_K: dict[StationKind, tuple[float, float]] = {
    "receiver": (ZERO_C, ZERO_C + 70.0),
    "cooler": (ZERO_C - 5.0, ZERO_C + 60.0),
}
_LINE_K = (ZERO_C - 5.0, ZERO_C + 55.0)


@dataclass(frozen=True, slots=True)
class Plausible:
    """What a channel may well say where it is used, SI."""

    lowest: float
    highest: float

    def holds(self, value: float) -> bool:
        return self.lowest <= value <= self.highest


def plausible(site: Site, channel: Channel) -> Plausible:
    """By what the channel measures and where the site uses it."""
    if channel.quantity == "temperature":
        return Plausible(*_temperature(site, channel.name))
    if channel.quantity == "pressure":
        return _pressure_range(site, channel)
    if channel.quantity == "relative_humidity":
        return Plausible(0.0, 0.9) if channel.name in _cells(site) else Plausible(0.08, 0.99)
    if channel.quantity == "free_air_flow":
        return Plausible(0.0, 2.0 * site.line.compressor.delivered.value)
    return Plausible(*_DEW_POINT_K) if channel.quantity == "dew_point" else Plausible(0.0, 1.0)


def _pressure_range(site: Site, channel: Channel) -> Plausible:
    if is_barometer(channel):
        return Plausible(*_BAROMETER_PA)
    highest = 1.15 * site.line.compressor.cut_out.value
    above = 0.0 if channel.gauge else _BAROMETER_PA[1]
    return Plausible(-0.02 * highest, highest + above)


def _temperature(site: Site, name: str) -> tuple[float, float]:
    for station in site.line.stations:
        if isinstance(station.temperature, Measured) and station.temperature.channel == name:
            return _AIR_K if station.kind == "intake" else _KIND_K.get(station.kind, _LINE_K)
    return _AIR_K


def _cells(site: Site) -> Iterator[str]:
    for station in site.line.stations:
        cell = station.measured_dew_point
        if isinstance(cell, VentedCell):
            yield cell.relative_humidity.channel


def value_words(site: Site, channel: Channel, value: float) -> str:
    """A value in the site's units: "7.62 bar", "closed"."""
    return _SHOW[channel.quantity](channel, value, site.units)


def plausible_words(site: Site, channel: Channel, range_of: Plausible) -> str:
    """ "0 to 9.9 bar"."""
    if channel.quantity == "contact":
        return "open or closed"
    low, high = (value_words(site, channel, end) for end in (range_of.lowest, range_of.highest))
    number, _, unit = low.partition(" ")
    return f"{number if high.endswith(f' {unit}') else low} to {high}"


def _pressure(channel: Channel, value: float, people: People) -> str:
    if is_barometer(channel):
        return show_barometer(value, people)
    return show_pressure(value, people, gauge=channel.gauge)


_SHOW: dict[str, Callable[[Channel, float, People], str]] = {
    "temperature": lambda _, value, people: show_temperature(value, people),
    "dew_point": lambda _, value, people: show_temperature(value, people),
    "relative_humidity": lambda _, value, people: show_percent(round(value, 3)),
    "pressure": _pressure,
    "contact": lambda _, value, people: "closed" if value > 0.5 else "open",
    "free_air_flow": lambda _, value, people: show_flow(value, people),
}


# ---- what to do ----

_I2C = (
    "Look for 3.3 V and ground at the part, SDA on pin 3 and SCL on pin 5, and whether its address "
    "is the one in the site file (i2cdetect -y {bus} lists those that answer)."
)
_ONE_WIRE = (
    "Look at the probe's three wires and the resistor from data to 3.3 V; its folder is listed in "
    "/sys/bus/w1/devices when it answers."
)
_GPIO = "Is the line's number right, and does no other program have it (gpioinfo tells)?"
_MODBUS = "Try A and B the other way round; look at the device's number, its speed and its supply."
_NOISE = (
    "Keep the wires short and away from the motor's cable; look for pull-ups twice over, or none."
)
_SUPPLY = "Its supply gives way: a stronger 5 V supply, thicker wires, 100 nF at the part."
_BY_REASON = {
    reasons.WRONG_CHIP: "Another part answers there: a BMP280, for one, has no humidity element.",
    reasons.ALL_ONES: "The lines float high: a wire is off, or the part is on the wrong bus.",
    reasons.ALL_ZEROS: "A line is held low: look for a short, or a part without its supply.",
    reasons.STAYS_BUSY: _SUPPLY,
    reasons.WAS_RESET: _SUPPLY,
    reasons.NOT_MEASURED: "It answers but does not measure: give it all its wires, and its supply.",
    reasons.DOES_NOT_REPEAT: _NOISE,
    reasons.BAD_CHECKSUM: _NOISE,
    reasons.CALIBRATION: "Its own memory is damaged or is read wrongly. " + _NOISE,
    reasons.SUPPLY: "The 5 V rail is not 4.5 to 5.5 V: a stronger supply, or the divider is wrong.",
    reasons.SIGNAL_LOW: "A wire is off, or the transmitter has no supply.",
    reasons.SIGNAL_HIGH: "A short, the wrong resistor or divider, or more than its range.",
    reasons.EDGES_LOST: "The contact chatters faster than can be counted: a longer debounce.",
    reasons.ERROR_ANSWER: "It answers otherwise: compare its registers or field with its manual.",
    reasons.LIBRARY_MISSING: "A library is missing: install dripleg with its pi (or modbus) extra.",
    reasons.BUS_UNOPENED: (
        "Is the bus switched on in config.txt, and may this user open it (groups i2c, gpio, "
        "dialout)? Does another program hold it?"
    ),
    reasons.BUS_HANGS: "The bus hangs: take the parts off one by one until it answers again.",
    reasons.SILENT: "Does the device publish on that topic, and on this broker?",
}
_OUT_OF_RANGE = "No such part can say that: look at its wiring, its range and its divider."


def remedy(config: SensorConfig, reason: str) -> str:
    """What somebody on a ladder can do about a fault."""
    if reason == reasons.NO_ANSWER:
        return _no_answer(config)
    if reason.startswith("out of range"):
        return _OUT_OF_RANGE
    return _BY_REASON.get(reason, "Look at its wiring.")


def _no_answer(config: SensorConfig) -> str:
    settings = config.settings
    if "bus" in settings:
        return _I2C.format(bus=settings["bus"])
    if "line" in settings and "chip" in settings:
        return _GPIO
    return _ONE_WIRE if config.driver == "ds18b20" else _MODBUS
