"""Dew-point transmitter on Modbus RTU or TCP, its registers named in the site file.

Wiring: see `sensors/modbus.py`. It shows the dew point at the pressure of its own cell: put it in a
bypass at line pressure, with a small steady bleed.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from sensors import keys, reasons
from sensors.guard import faults
from sensors.modbus import ModbusError, ModbusPort, RegisterReader, parse_line, parse_port
from sensors.reading import Channel, Reading, SensorFault, reading
from sensors.registers import Register, register_map
from sensors.registry import Driver, Hardware, Key, SensorConfig, register


class DewPointModbus:
    """One transmitter, by its number on the line."""

    def __init__(self, config: SensorConfig, hardware: Hardware) -> None:
        settings = config.settings
        self._id = config.id
        self._channels = channels(config)
        self._device = int(settings["device"])
        self._registers: dict[str, Register] = settings["registers"]
        with faults(self._id):
            self._reader: RegisterReader = hardware.modbus(port_of(config))

    @property
    def id(self) -> str:
        return self._id

    @property
    def channels(self) -> Sequence[Channel]:
        return self._channels

    def read(self, now_us: int) -> Sequence[Reading]:
        return [
            reading(channel, self._value(self._registers[channel.quantity]), now_us)
            for channel in self._channels
        ]

    def close(self) -> None:
        """The line is shared: whoever opened it closes it."""

    def _value(self, place: Register) -> float:
        try:
            with faults(self._id):
                words = self._reader.read(place.kind, self._device, place.at, place.count)
        except ModbusError as error:
            reason = reasons.BAD_CHECKSUM if error.bad_checksum else reasons.ERROR_ANSWER
            raise SensorFault(self._id, reason, str(error)) from error
        if set(words) == {0xFFFF}:
            raise SensorFault(self._id, reasons.ALL_ONES)
        value_k = place.decode_k(words)
        if math.isnan(value_k):
            raise SensorFault(self._id, reasons.NOT_MEASURED, "the register holds no number")
        return value_k


def port_of(config: SensorConfig) -> ModbusPort:
    """The port of a checked config."""
    host, tcp_port = config.settings["port"]
    return ModbusPort(host, tcp_port, *config.settings["line"])


def channels(config: SensorConfig) -> tuple[Channel, ...]:
    """The quantities that the map has. Ranges are wider than any such transmitter's."""
    settings = config.settings
    found = [
        Channel(
            f"{config.id}.dew_point", "dew_point", 0.01, 163.15, 373.15, settings["give_or_take"]
        )
    ]
    if "temperature" in settings["registers"]:
        found.append(Channel(f"{config.id}.temperature", "temperature", 0.01, 223.15, 373.15, 1.0))
    return tuple(found)


DEW_POINT_MODBUS = register(
    Driver(
        name="dew-point-modbus",
        summary="pressure dew point, from a transmitter on Modbus RTU or TCP",
        keys=(
            Key("port", parse_port, meaning='"/dev/ttyUSB0", or "host:port" for Modbus TCP'),
            Key("line", parse_line, (19200, "E", 1), 'serial setting, like "19200 8E1"'),
            Key("device", keys.whole(0, 247), 1, "the device's number on the line"),
            Key("registers", register_map, meaning="where the device keeps its quantities"),
            Key(
                "give_or_take",
                keys.quantity("temperature difference", 0.05, 20.0),
                2.0,
                "the transmitter's error, 95 % of the time",
            ),
        ),
        channels=channels,
        occupies=lambda c: (f"Modbus {port_of(c)} device {c.settings['device']}",),
        bus=lambda c: f"modbus {port_of(c)}",
        open=DewPointModbus,
    )
)
