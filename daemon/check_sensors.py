"""What the sensors say now, for `dripleg check`: beside what is plausible, and what to do."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator

from daemon.check import WIDTH, Section
from daemon.check_readings import NOTHING_YET, Looked, Said
from daemon.check_words import plausible, plausible_words, remedy, value_words
from daemon.moisture.description import Fixed, Measured, Station, VentedCell
from daemon.moisture.dew_sensors import MeasuredDewPoint, cell_dew_point
from daemon.site.types import Site
from daemon.units import show_pressure, show_temperature
from sensors.reading import Channel
from sensors.registry import SensorConfig

_NAME, _VALUE = 34, 18  # columns


def now_section(site: Site, looked: Looked) -> Section:
    """Every channel, sensor by sensor."""
    lines: list[str] = []
    for config in site.sensors:
        lines += _sensor(site, config, looked)
    return Section(f"Sensors now, {looked.source}", tuple(lines))


def elsewhere_section(missing: tuple[str, ...]) -> Section:
    """Said instead on a machine that has none of the sensors' buses."""
    text = (
        f"Nothing was read: this machine has no {', '.join(missing)}. The file alone is explained; "
        "run this on the Pi that the sensors are wired to."
    )
    return Section("Sensors now", tuple(_wrapped(text, "  ")))


def _sensor(site: Site, config: SensorConfig, looked: Looked) -> Iterator[str]:
    told = ""
    for channel in site.channels.values():
        if channel.sensor != config.id:
            continue
        said = looked.said.get(channel.name, Said(None, NOTHING_YET))
        if said.fault == NOTHING_YET:
            yield f"  {channel.name:<{_NAME}}{_nothing_yet(config)}"
        elif said.fault:
            yield f"  {channel.name:<{_NAME}}not usable: {said.fault}"
            told = told or said.fault
        elif said.value is not None:
            yield _good(site, channel, said.value)
    if told:
        yield from _wrapped(remedy(config, told), "      ")
    yield from _cell(site, config, looked)


def _nothing_yet(config: SensorConfig) -> str:
    if config.driver == "mqtt-channel":
        return "has published nothing while this listened"
    if config.driver == "flow-pulses":
        return "no pulse came while this looked"
    return NOTHING_YET


def _good(site: Site, channel: Channel, value: float) -> str:
    shown, usual = value_words(site, channel, value), plausible(site, channel)
    odd = "" if usual.holds(value) else "  <- not plausible here"
    line = f"  {channel.name:<{_NAME}}{shown:<{_VALUE}}plausible: "
    return f"{line}{plausible_words(site, channel, usual)}{odd}"


# ---- a vented cell's dew point ----


def _cell(site: Site, config: SensorConfig, looked: Looked) -> Iterator[str]:
    for station in site.line.stations:
        cell = station.measured_dew_point
        if isinstance(cell, VentedCell) and cell.pressure.channel.startswith(f"{config.id}."):
            values = [
                _value(looked, each.channel)
                for each in (cell.relative_humidity, cell.temperature, cell.pressure)
            ]
            if None not in values:
                humidity, cell_k, cell_pa = (each for each in values if each is not None)
                line_pa = _line_pa(site, station, looked, cell_pa)
                said = cell_dew_point(
                    humidity,
                    cell_k,
                    cell_pa,
                    line_pa,
                    cell.relative_humidity.give_or_take,
                    cell.temperature.give_or_take,
                )
                shown = show_pressure(line_pa - cell_pa, site.units, gauge=True)
                text = f"dew point {dew_point_words(site, said)} at {shown} gauge"
                yield f"  {station.id:<{_NAME}}{text}"


def dew_point_words(site: Site, said: MeasuredDewPoint) -> str:
    """ "below 1.7 degC", or "3.2 degC (-12.8 to 11.8 degC)"."""
    high = show_temperature(said.high_k, site.units)
    if said.low_k is None or said.middle_k is None:
        return f"below {high}"
    low, middle = (show_temperature(each, site.units) for each in (said.low_k, said.middle_k))
    return f"{middle} ({low.partition(' ')[0]} to {high})"


def _value(looked: Looked, channel: str) -> float | None:
    said = looked.said.get(channel)
    return said.value if said is not None and not said.fault else None


def _line_pa(site: Site, station: Station, looked: Looked, barometer_pa: float) -> float:
    """The line's absolute pressure: its sensor's, its setting, or between the switch's two."""
    source = station.pressure
    if isinstance(source, Measured):
        measured = _value(looked, source.channel)
        if measured is not None:
            return measured + (barometer_pa if source.gauge else 0.0)
    if isinstance(source, Fixed):
        return source.value + (barometer_pa if source.gauge else 0.0)
    compressor = site.line.compressor
    return (compressor.cut_in.value + compressor.cut_out.value) / 2.0 + barometer_pa


def _wrapped(text: str, indent: str) -> list[str]:
    return textwrap.wrap(
        text, WIDTH, initial_indent=indent, subsequent_indent=indent, break_on_hyphens=False
    )
