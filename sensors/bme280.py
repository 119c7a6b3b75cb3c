"""BME280: temperature, relative humidity and barometric pressure of the air around it.

Wiring: 3.3 V, ground, SDA, SCL; address 0x76 with SDO at ground, 0x77 with SDO at 3.3 V (leaving
SDO open is neither). Keep it out of the sun, out of the compressor's warm exhaust and out of paint
mist: its humidity element is open to the air.

As a vented cell the same part sits in a small chamber that line air bleeds through, from a needle
valve to an open end: its humidity and temperature at the cell's (atmospheric) pressure give the dew
point of the line's air. The chamber must never be closed at its outlet.

Each reading is one forced conversion, oversampling x1, filter off, so that the three values are of
one instant and the part does not warm itself. The vendor's library sets it up and does the
compensation; this module moves the bytes, because the library would take 130 bus operations, wait
without bound, and believe a part that lost power. Source of registers, times and limits:
BST-BME280-DS002, sections 1.1-1.3 (ranges, accuracy), 5.3-5.4 (registers), appendix 9 (times).
"""

from __future__ import annotations

import logging
import weakref
from collections.abc import Sequence
from typing import Any

from sensors import keys, reasons
from sensors.guard import faults
from sensors.reading import Channel, Reading, SensorFault, reading
from sensors.registry import Driver, Hardware, Key, SensorConfig, register

ZERO_CELSIUS_K = 273.15
CONVERSION_S = 0.010  # appendix 9.1: at most 9.3 ms at oversampling x1, all three
_CHIP_ID = 0xD0
_SETTINGS = 0xF2  # ctrl_hum, status, ctrl_meas, config
_CONFIG = 0xF5
_DATA = 0xF7
_DATA_LENGTH = 8
_CALIBRATION = (*range(0x88, 0xA2), *range(0xE1, 0xE8))  # section 5.4.2
_MEASURING = 0x08
_MODE = 0x03
_HUMIDITY_X1 = 0x01
_SLEEP_X1 = 0x24  # temperature x1, pressure x1, sleep
# the standby time has no effect in forced mode; we write one that the part never has after a
# reset, so that a part that lost power shows it
_MARK = 0xA0
_DAMAGED_BITS = 8
# what parts said when first opened, by bus and address: a changed bit has no other witness
_KNOWN: weakref.WeakKeyDictionary[Any, dict[int, bytes]] = weakref.WeakKeyDictionary()
_POLLS = 5
_POLL_S = 0.002
_UNMEASURED = (0x80000, 0x80000, 0x8000)  # section 5.4.7: a measurement that was skipped
_FULL = (0xFFFFF, 0xFFFFF, 0xFFFF)

log = logging.getLogger(__name__)


class _Registers:
    """What the vendor's library asks of a bus; during decoding it answers from one burst."""

    def __init__(self, device: Any) -> None:
        self._device = device
        self._read: dict[tuple[int, int], bytes] = {}
        self.burst: bytes | None = None

    def calibration(self) -> dict[tuple[int, int], bytes]:
        """The calibration as it was read, by register and length."""
        return {key: value for key, value in self._read.items() if key[0] in _CALIBRATION}

    def read_register(self, register: int, length: int) -> bytearray:
        if self.burst is not None:
            at = register - _DATA
            # the only other register asked for while decoding is the status: not busy
            return bytearray(self.burst[at : at + length] if at >= 0 else bytes(length))
        answer = bytearray(length)
        with self._device as device:
            device.write_then_readinto(bytes([register]), answer)
        self._read.setdefault((register, length), bytes(answer))
        return answer

    def write_register_byte(self, register: int, value: int) -> None:
        if self.burst is None:
            with self._device as device:
                device.write(bytes([register, value]))


class Bme280:
    """One BME280 on one bus."""

    def __init__(self, config: SensorConfig, hardware: Hardware) -> None:
        self._id = config.id
        self._channels = channels(config)
        self._address = int(config.settings["address"])
        self._bus_number = int(config.settings["bus"])
        self._hardware = hardware
        self._chip: Any = None
        with faults(self._id):
            self._set_up()

    @property
    def id(self) -> str:
        return self._id

    @property
    def channels(self) -> Sequence[Channel]:
        return self._channels

    def read(self, now_us: int) -> Sequence[Reading]:
        with faults(self._id):
            if self._chip is None:
                self._set_up()
            values = self._decode(self._measure())
        return [
            reading(channel, value, now_us)
            for channel, value in zip(self._channels, values, strict=True)
        ]

    def close(self) -> None:
        """The part sleeps between readings: nothing to let go of but the object."""
        self._chip = None

    def _fault(self, reason: str, detail: str = "") -> SensorFault:
        return SensorFault(self._id, reason, detail)

    def _set_up(self) -> None:
        from adafruit_bme280 import advanced  # noqa: PLC0415  # no hardware library at import
        from adafruit_bus_device.i2c_device import I2CDevice  # noqa: PLC0415

        bus = self._hardware.i2c(self._bus_number)
        self._registers = _Registers(I2CDevice(bus, self._address))
        self._refuse_dead_lines(bytes(self._registers.read_register(_CHIP_ID, 1)))
        chip = advanced.Adafruit_BME280_Advanced(self._registers)
        self._check_calibration(self._registers.calibration())
        chip.overscan_pressure = advanced.OVERSCAN_X1
        self._registers.write_register_byte(_CONFIG, _MARK)
        self._forced = advanced.MODE_FORCE
        self._chip = chip

    def _check_calibration(self, read: dict[tuple[int, int], bytes]) -> None:
        """What the library read once must read the same again: it has no checksum."""
        for (start, length), first in read.items():
            if bytes(self._registers.read_register(start, length)) != first:
                raise self._fault(reasons.CALIBRATION, f"register 0x{start:02x} does not repeat")
            if length > 1 and len(set(first)) == 1:
                raise self._fault(reasons.CALIBRATION, f"all bytes are 0x{first[0]:02x}")
        self._compare_with_before(b"".join(read[key] for key in sorted(read)))

    def _compare_with_before(self, words: bytes) -> None:
        """Another part differs in dozens of bits; one that differs in a few has been damaged."""
        known = _KNOWN.setdefault(self._hardware.i2c(self._bus_number), {})
        before = known.get(self._address, words)
        differ = sum((a ^ b).bit_count() for a, b in zip(before, words, strict=True))
        if 0 < differ <= _DAMAGED_BITS:
            detail = f"{differ} of its bits changed since it was opened first"
            raise self._fault(reasons.CALIBRATION, detail)
        if differ:
            log.warning("%s: another part is on the address now", self._id)
        known[self._address] = words

    def _measure(self) -> bytes:
        """One forced conversion: the eight data bytes."""
        self._chip.mode = self._forced
        self._hardware.wait(CONVERSION_S)
        for _ in range(_POLLS):
            humidity, status, control, config = self._registers.read_register(_SETTINGS, 4)
            self._refuse_dead_lines(bytes((humidity, status, control, config)))
            if not status & _MEASURING and not control & _MODE:
                break
            self._hardware.wait(_POLL_S)
        else:
            raise self._fault(reasons.STAYS_BUSY, f"after {_POLLS} polls")
        if (humidity, control, config) != (_HUMIDITY_X1, _SLEEP_X1, _MARK):
            self._chip = None  # set up anew with the next reading
            raise self._fault(reasons.WAS_RESET)
        burst, again = (bytes(self._registers.read_register(_DATA, _DATA_LENGTH)) for _ in range(2))
        if burst != again:
            raise self._fault(reasons.DOES_NOT_REPEAT, f"{burst.hex()} and {again.hex()}")
        self._refuse_dead_lines(burst)
        self._refuse_stuck_words(burst)
        return burst

    def _refuse_dead_lines(self, answer: bytes) -> None:
        if set(answer) == {0xFF}:
            raise self._fault(reasons.ALL_ONES)
        if set(answer) == {0x00}:
            raise self._fault(reasons.ALL_ZEROS)

    def _refuse_stuck_words(self, burst: bytes) -> None:
        pressure = int.from_bytes(burst[0:3], "big") >> 4
        temperature = int.from_bytes(burst[3:6], "big") >> 4
        words = (pressure, temperature, int.from_bytes(burst[6:8], "big"))
        for word, full in zip(words, _FULL, strict=True):
            if word in (0, full):
                raise self._fault(reasons.NOT_MEASURED, f"raw word 0x{word:x}")
        # each of these alone can be true: 26.46 degC, 820 hPa or 62 % with the usual calibration
        if sum(word == one for word, one in zip(words, _UNMEASURED, strict=True)) >= 2:
            raise self._fault(reasons.NOT_MEASURED, "raw words as after power-on")

    def _decode(self, burst: bytes) -> tuple[float, float, float]:
        self._registers.burst = burst
        try:
            return (
                self._chip.temperature + ZERO_CELSIUS_K,
                self._chip.relative_humidity / 100.0,
                self._chip.pressure * 100.0,
            )
        finally:
            self._registers.burst = None


def channels(config: SensorConfig) -> tuple[Channel, ...]:
    """Limits of section 1.1-1.3: the operating range, and the error over 0-65 degC."""
    return (
        Channel(f"{config.id}.temperature", "temperature", 0.01, 233.15, 358.15, 1.0),
        Channel(f"{config.id}.relative_humidity", "relative_humidity", 1e-4, 0.0, 1.0, 0.03),
        Channel(f"{config.id}.pressure", "pressure", 1.0, 30_000.0, 110_000.0, 100.0),
    )


_KEYS = (
    Key("bus", keys.whole(0, 99), 1, "number of the I2C bus: 1 is /dev/i2c-1"),
    Key("address", keys.address(0x76, 0x77), 0x76, "0x76, or 0x77 with SDO at 3.3 V"),
)


def _occupies(config: SensorConfig) -> tuple[str, ...]:
    return (f"bus {config.settings['bus']} address 0x{config.settings['address']:02x}",)


def _bus(config: SensorConfig) -> str:
    return f"i2c-{config.settings['bus']}"


BME280 = register(
    Driver(
        name="bme280",
        summary="air temperature, relative humidity and barometric pressure",
        keys=_KEYS,
        channels=channels,
        occupies=_occupies,
        bus=_bus,
        open=Bme280,
    )
)
VENTED_CELL = register(
    Driver(
        name="vented-cell",
        summary="a BME280 in a chamber through which line air bleeds to the atmosphere",
        keys=_KEYS,
        channels=channels,
        occupies=_occupies,
        bus=_bus,
        open=Bme280,
    )
)
