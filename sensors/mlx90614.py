"""MLX90614: the temperature of a surface, by its infrared radiation.

Wiring: 3.3 V (the 3 V kind), ground, SDA, SCL at no more than 100 kHz; address 0x5A. It sees a
cone: at half a metre a spot as wide as its distance or more, depending on the kind; nothing between
lens and surface. Bare or polished metal shows the room's reflection: aim at paint, tape or rust. It
is no part for the spray zone: look from outside.

The vendor's library accepts a bad checksum; a subclass checks it. Source: MLX90614 data sheet
3901090614, sections 8.4.2-8.4.3 (SMBus, packet error code), 8.4.5 (RAM), table of accuracy: 0.5 K
at 0-50 degC of part and object; emissivity of painted surfaces (0.9-0.97 for the part's 1.0) is
more.
"""

from __future__ import annotations

import functools
from collections.abc import Sequence
from typing import Any

from sensors import keys, reasons
from sensors.guard import faults
from sensors.reading import Channel, Reading, SensorFault, reading
from sensors.registry import Driver, Hardware, Key, SensorConfig, register

ADDRESS = 0x5A
_OBJECT = 0x07
_ERROR_FLAG = 0x8000  # section 8.4.5: the most significant bit marks a value that is not valid
_STEP_K = 0.02


def packet_error_code(data: bytes) -> int:
    """CRC-8 of SMBus: x8 + x2 + x + 1, from 0."""
    crc = 0
    for byte in data:
        crc ^= byte
        for _ in range(8):
            crc = (crc << 1 ^ 0x07 if crc & 0x80 else crc << 1) & 0xFF
    return crc


@functools.cache
def _checked_mlx90614() -> Any:
    """The vendor's driver with its checksum read; made late, for it imports a hardware library."""
    from adafruit_mlx90614 import MLX90614  # noqa: PLC0415

    class CheckedMlx90614(MLX90614):  # type: ignore[misc, unused-ignore]  # typed or not, by version
        """Reads the packet error code as well, and keeps all three bytes."""

        def __init__(self, bus: Any, address: int, sensor: str) -> None:
            super().__init__(bus, address)
            self._address = address
            self._sensor = sensor

        def _read_16(self, register: int) -> int:
            answer = bytearray(3)
            with self._device as device:
                device.write_then_readinto(bytes([register]), answer)
            if set(answer) in ({0xFF}, {0x00}):
                high = answer[0] == 0xFF
                raise SensorFault(self._sensor, reasons.ALL_ONES if high else reasons.ALL_ZEROS)
            sent = bytes([self._address << 1, register, self._address << 1 | 1]) + answer[:2]
            if packet_error_code(sent) != answer[2]:
                detail = f"{sent.hex(' ')} has {answer[2]:02x}"
                raise SensorFault(self._sensor, reasons.BAD_CHECKSUM, detail)
            word = answer[1] << 8 | answer[0]
            if word & _ERROR_FLAG:
                raise SensorFault(self._sensor, reasons.NOT_MEASURED, f"0x{word:04x}")
            return word

    return CheckedMlx90614


class Mlx90614:
    """One infrared thermometer."""

    def __init__(self, config: SensorConfig, hardware: Hardware) -> None:
        settings = config.settings
        self._id = config.id
        self._channels = channels(config)
        with faults(self._id):
            bus = hardware.i2c(int(settings["bus"]))
            self._chip = _checked_mlx90614()(bus, int(settings["address"]), self._id)

    @property
    def id(self) -> str:
        return self._id

    @property
    def channels(self) -> Sequence[Channel]:
        return self._channels

    def read(self, now_us: int) -> Sequence[Reading]:
        with faults(self._id):
            temperature_k = self._chip.object_temperature + 273.15
        return [reading(self._channels[0], temperature_k, now_us)]

    def close(self) -> None:
        """The part measures all the time: nothing to let go of."""


def channels(config: SensorConfig) -> tuple[Channel, ...]:
    """The object's temperature: -70 to 380 degC, and a count of room."""
    return (
        Channel(
            f"{config.id}.temperature",
            "temperature",
            _STEP_K,
            203.12,
            653.18,
            float(config.settings["give_or_take"]),
        ),
    )


MLX90614 = register(
    Driver(
        name="mlx90614",
        summary="temperature of a surface, by infrared",
        keys=(
            Key("bus", keys.whole(0, 99), 1, "number of the I2C bus: 1 is /dev/i2c-1"),
            Key("address", keys.address(*range(0x58, 0x60)), ADDRESS, "0x5A unless reprogrammed"),
            Key(
                "give_or_take",
                keys.quantity("temperature difference", 0.2, 20.0),
                1.5,
                "part and emissivity of a painted surface together, 95 % of the time",
            ),
        ),
        channels=channels,
        occupies=lambda c: (f"bus {c.settings['bus']} address 0x{c.settings['address']:02x}",),
        bus=lambda c: f"i2c-{c.settings['bus']}",
        open=Mlx90614,
    )
)
