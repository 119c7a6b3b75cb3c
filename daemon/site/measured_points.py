"""Reads which sensor measures the dew point of a station's air: a transmitter, or a vented cell."""

from __future__ import annotations

from daemon.moisture.description import Measured, VentedCell
from daemon.site.names import Names
from daemon.site.table import Table
from daemon.site.widths import OF_TEMPERATURE, give_or_take

KEY = "measured_dew_point"
_FORMS = "write a transmitter's channel, like \"dryer-outlet.dew_point\", or a vented cell's id"


def read_measured_dew_point(table: Table, names: Names) -> Measured | VentedCell | None:
    """What `measured_dew_point` says; None when it is absent or wrong."""
    raw = table.values.get(KEY)
    if raw is None:
        return None
    if isinstance(raw, dict):
        inner = table.sub(KEY, ("channel", "give_or_take"))
        found = inner.read("channel", lambda name: _sensor(names, name), None)
        if not inner.said("channel"):
            table.wrong(KEY, f"says no channel; {_FORMS}")
        if isinstance(found, VentedCell):
            inner.wrong("channel", "a vented cell's error is that of its part; write its id alone")
        if found is None or inner.broken or isinstance(found, VentedCell):
            table.broken.add(KEY)
            return None
        width = give_or_take(inner, OF_TEMPERATURE, None, found.give_or_take, "")
        return None if inner.broken else Measured(found.channel, width)
    return table.read(KEY, lambda name: _sensor(names, name), None)


def _sensor(names: Names, raw: object) -> Measured | VentedCell:
    if not isinstance(raw, str):
        raise ValueError(f"must be in quotes; {_FORMS}")
    if raw in names.sensors and raw not in names.broken_sensors and names.of(raw, "dew_point"):
        raise ValueError(f'names a sensor, not what it gives; write "{raw}.dew_point"')
    if raw in names.in_line:
        return _cell(names, raw)
    channel = names.channel(raw, "dew_point")
    return Measured(channel.name, channel.give_or_take)


def _cell(names: Names, sensor: str) -> VentedCell:
    channels = [
        names.channel(f"{sensor}.temperature", "temperature"),
        names.channel(f"{sensor}.relative_humidity", "relative_humidity"),
        names.channel(f"{sensor}.pressure", "pressure"),
    ]
    temperature, humidity, pressure = (Measured(c.name, c.give_or_take) for c in channels)
    return VentedCell(temperature, humidity, pressure)
