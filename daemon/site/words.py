"""Where a station's value comes from, in words and in the site's units."""

from __future__ import annotations

from daemon.moisture.description import Fixed, Like, Measured, RiseByDuty, Source
from daemon.site.types import Site
from daemon.units import (
    show_barometer,
    show_difference,
    show_duration,
    show_percent,
    show_pressure,
    show_pressure_difference,
    show_temperature,
)


def source_words(site: Site, key: str, source: Source, *, barometer: bool = False) -> str:
    """Where a value comes from: "sensor pipe-end.temperature, give or take 0.5 K"."""
    width = f", give or take {_width(site, key, source.give_or_take, barometer)}"
    match source:
        case Measured():
            gauge = " (gauge)" if source.gauge else ""
            return f"sensor {source.channel}{gauge}{_plus(site, key, source.plus)}{width}"
        case Fixed():
            return f"{_value(site, key, source, barometer)}{width}"
        case Like():
            return f"like {source.station}{_plus(site, key, source.plus)}{width}"
        case RiseByDuty():
            rise = show_difference(source.rise, site.units)
            lag = show_duration(source.time_constant_s)
            return f"like {source.station} + {rise} x duty, over {lag}{width}"


def _value(site: Site, key: str, source: Fixed, barometer: bool) -> str:
    if key == "temperature":
        return show_temperature(source.value, site.units)
    if key == "relative_humidity":
        return show_percent(source.value)
    if barometer:
        return f"{show_barometer(source.value, site.units)} abs"
    gauge = " gauge" if source.gauge else ""
    return show_pressure(source.value, site.units, gauge=source.gauge) + gauge


def _width(site: Site, key: str, value: float, barometer: bool) -> str:
    if key == "temperature":
        return show_difference(value, site.units)
    if key == "relative_humidity":
        return show_percent(value)
    if barometer:
        return show_barometer(value, site.units)
    return show_pressure_difference(value, site.units)


def _plus(site: Site, key: str, plus: float) -> str:
    if plus == 0:
        return ""
    size = _width(site, key, abs(plus), barometer=False)
    return f" {'+' if plus > 0 else '-'} {size}"
