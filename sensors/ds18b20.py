"""DS18B20: temperature of a pipe, a tank's stub or a slab, several on one wire.

Wiring: 3.3 V, ground, data on GPIO 4 (pin 7) with one 4.7 kohm resistor from data to 3.3 V for the
whole wire; `dtoverlay=w1-gpio` in the Pi's config. Three wires, not two: parasitic power fails on
long runs. Strap the probe to bare metal under lagging, or it reads the room.

The kernel does the conversion (0.75 s, blocking) and shows the scratchpad as text; this module
checks the scratchpad itself. Source: DS18B20 data sheet 19-7487, figures 4 (temperature register),
9 (memory map) and 11 (CRC, polynomial x8 + x5 + x4 + 1); Linux, Documentation/w1/slaves/w1_therm.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from pathlib import Path

from sensors import keys, reasons
from sensors.guard import faults
from sensors.reading import Channel, Reading, SensorFault, reading
from sensors.registry import Driver, Hardware, Key, SensorConfig, register

_SCRATCHPAD = re.compile(r"\s*((?:[0-9a-fA-F]{2}[ :]+){9})")
_LENGTH = 9
# bits that a lower resolution leaves undefined, by the configuration register (table 2)
_UNDEFINED = {0x1F: 0x7, 0x3F: 0x3, 0x5F: 0x1, 0x7F: 0x0}
# 85.00 degC at power-on and 127.94 degC from a starved part: byte 6 is then 0x0C, where a part that
# did measure has 0x10 less the low four bits of the temperature; a pipe can really be at 85.00
_NOT_MEASURED = (0x0550, 0x07FF)
_POWER_ON_BYTE_6 = 0x0C


def crc8(data: bytes) -> int:
    """The 1-Wire checksum of some bytes."""
    crc = 0
    for byte in data:
        crc ^= byte
        for _ in range(8):
            crc = (crc >> 1) ^ 0x8C if crc & 1 else crc >> 1
    return crc


def decode(scratchpad: bytes) -> float:
    """Temperature in K of a good scratchpad; ValueError with a stable reason of a bad one."""
    if set(scratchpad) == {0xFF}:
        raise ValueError(reasons.ALL_ONES)
    if set(scratchpad) == {0x00}:  # its checksum is right
        raise ValueError(reasons.ALL_ZEROS)
    if crc8(scratchpad[:8]) != scratchpad[8]:
        raise ValueError(reasons.BAD_CHECKSUM)
    undefined = _UNDEFINED.get(scratchpad[4])
    if undefined is None:
        raise ValueError(reasons.WRONG_CHIP)
    raw = int.from_bytes(scratchpad[:2], "little", signed=True)
    if raw in _NOT_MEASURED and scratchpad[6] == _POWER_ON_BYTE_6:
        raise ValueError(reasons.NOT_MEASURED)
    return (raw & ~undefined) / 16.0 + 273.15


class Ds18b20:
    """One probe, by its serial number."""

    def __init__(self, config: SensorConfig, hardware: Hardware) -> None:
        self._id = config.id
        self._channels = channels(config)
        with faults(self._id):
            self._file = Path(hardware.one_wire_root(), config.settings["serial"], "w1_slave")

    @property
    def id(self) -> str:
        return self._id

    @property
    def channels(self) -> Sequence[Channel]:
        return self._channels

    def read(self, now_us: int) -> Sequence[Reading]:
        text = self._text()
        match = _SCRATCHPAD.match(text)
        if match is None:
            raise SensorFault(self._id, reasons.NO_ANSWER, f"{self._file} says {text[:40]!r}")
        scratchpad = bytes.fromhex(match[1].replace(":", " "))[:_LENGTH]
        try:
            temperature_k = decode(scratchpad)
        except ValueError as error:
            raise SensorFault(self._id, str(error), scratchpad.hex(" ")) from None
        return [reading(self._channels[0], temperature_k, now_us)]

    def close(self) -> None:
        """The kernel keeps the wire: nothing to let go of."""

    def _text(self) -> str:
        try:
            return self._file.read_text(encoding="ascii", errors="replace")
        except OSError as error:  # the kernel removes the folder of a probe that is gone
            raise SensorFault(self._id, reasons.NO_ANSWER, str(error)) from error


def channels(config: SensorConfig) -> tuple[Channel, ...]:
    """Data sheet: -55 to 125 degC, and a step of room; 0.5 K within -10 to 85 degC."""
    return (Channel(f"{config.id}.temperature", "temperature", 0.01, 218.14, 398.16, 0.5),)


DS18B20 = register(
    Driver(
        name="ds18b20",
        summary="temperature of a pipe or a tank, on the 1-Wire bus",
        keys=(
            Key(
                "serial",
                keys.text(
                    r"28-[0-9a-f]{12}",
                    'write the probe\'s folder in /sys/bus/w1/devices, like "28-0123456789ab"',
                ),
                meaning="the probe's folder in /sys/bus/w1/devices",
            ),
        ),
        channels=channels,
        occupies=lambda c: (f"1-Wire serial {c.settings['serial']}",),
        bus=lambda c: "one-wire",
        open=Ds18b20,
        slow=True,
    )
)
