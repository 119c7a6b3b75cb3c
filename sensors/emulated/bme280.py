"""An emulated BME280: set in K, Pa and a fraction, it answers in the data sheet's raw words.

Source: BST-BME280-DS002, sections 4.2 (compensation), 5.3-5.4 (registers), 9 (times). Calibration
words of temperature and pressure are the data sheet's example; those of humidity are invented in
the size that parts have.
"""

from __future__ import annotations

import random
import struct
from collections.abc import Callable
from dataclasses import dataclass

from sensors.emulated.bus import EmulatedI2C, Registers

CHIP_ID = 0x60
_RESET_WORD = 0xB6
_CTRL_HUM, _STATUS, _CTRL_MEAS, _CONFIG, _DATA = 0xF2, 0xF3, 0xF4, 0xF5, 0xF7
_SLEEP, _NORMAL = 0, 3
_MEASURING = 0x08
_SKIPPED = bytes.fromhex("8000008000008000")  # power-on values of the data registers
_OVERSAMPLING = (0, 1, 2, 4, 8, 16, 16, 16)


@dataclass(frozen=True, slots=True)
class Calibration:
    """The words that a part carries, by the data sheet's names."""

    t: tuple[int, ...] = (27504, 26435, -1000)
    p: tuple[int, ...] = (36477, -10685, 3024, 2855, 140, -7, 15500, -14600, 6000)
    h: tuple[int, ...] = (75, 370, 0, 313, 50, 30)

    def packed(self) -> dict[int, int]:
        """Register by register, section 5.4.2 (table 16)."""
        first = struct.pack("<HhhHhhhhhhhh", *self.t, *self.p)
        h1, h2, h3, h4, h5, h6 = self.h
        second = struct.pack("<hB", h2, h3) + bytes(
            ((h4 >> 4) & 0xFF, (h4 & 0xF) | ((h5 & 0xF) << 4), (h5 >> 4) & 0xFF, h6 & 0xFF)
        )
        registers = {0x88 + at: byte for at, byte in enumerate(first)}
        registers |= {0xE1 + at: byte for at, byte in enumerate(second)}
        return registers | {0xA0: 0, 0xA1: h1}


def fine_temperature(calibration: Calibration, raw: int) -> float:
    """`t_fine` of the data sheet's double-precision code: degC times 5120."""
    t1, t2, t3 = calibration.t
    first = (raw / 16384.0 - t1 / 1024.0) * t2
    second = (raw / 131072.0 - t1 / 8192.0) ** 2 * t3
    return first + second


def pressure_pa(calibration: Calibration, raw: int, fine: float) -> float:
    """Pressure by the data sheet's double-precision code."""
    p1, p2, p3, p4, p5, p6, p7, p8, p9 = calibration.p
    first = fine / 2.0 - 64000.0
    second = first * first * p6 / 32768.0 + first * p5 * 2.0
    second = second / 4.0 + p4 * 65536.0
    first = (p3 * first * first / 524288.0 + p2 * first) / 524288.0
    first = (1.0 + first / 32768.0) * p1
    pressure = (1048576.0 - raw - second / 4096.0) * 6250.0 / first
    first = p9 * pressure * pressure / 2147483648.0
    return pressure + (first + pressure * p8 / 32768.0 + p7) / 16.0


def relative_humidity(calibration: Calibration, raw: int, fine: float) -> float:
    """Relative humidity, a fraction, by the data sheet's double-precision code, not clipped."""
    h1, h2, h3, h4, h5, h6 = calibration.h
    offset = fine - 76800.0
    humidity = (raw - (h4 * 64.0 + h5 / 16384.0 * offset)) * (
        h2 / 65536.0 * (1.0 + h6 / 67108864.0 * offset * (1.0 + h3 / 67108864.0 * offset))
    )
    return humidity * (1.0 - h1 * humidity / 524288.0) / 100.0


def _invert(function: Callable[[int], float], wanted: float, bits: int, step: int) -> int:
    """The raw word, a whole number of `step`, whose value is nearest to the one wanted."""
    low, high = 0, (1 << bits) // step - 1
    rising = function(high * step) > function(0)
    while low < high:
        middle = (low + high) // 2
        if (function(middle * step) < wanted) == rising:
            low = middle + 1
        else:
            high = middle
    nearest = min((low, max(low - 1, 0)), key=lambda n: abs(function(n * step) - wanted))
    return nearest * step


class EmulatedBme280(Registers):
    """The part, with its surroundings as attributes."""

    def __init__(self, calibration: Calibration | None = None) -> None:
        super().__init__()
        self.temperature_k = 293.15
        self.relative_humidity = 0.5
        self.pressure_pa = 101_325.0
        self.chip_id = CHIP_ID  # another chip on the address: 0x58 is a BMP280
        self.stuck_busy = False
        self.flipped_data_bit: int | None = None  # of 64, in every second read of the data
        self.flipped_calibration_bit: int | None = None  # of 208, in every second read
        self.frozen = False  # goes on answering with its last conversion
        self.noisy = False  # each conversion differs a little, as a real one does
        self.conversions = 0
        self._random = random.Random(1)
        self.replace(calibration or Calibration())

    def replace(self, calibration: Calibration) -> None:
        """Another part is plugged in: other words, and everything as after power-on."""
        self.calibration = calibration
        self._words = calibration.packed()
        self.brown_out()

    def damage_calibration(self, register: int, bit: int) -> None:
        """A bit of the part's own memory changes for good."""
        self._words[register] ^= 1 << bit

    def brown_out(self) -> None:
        """The supply dips: every register is as after power-on."""
        self._set = {_CTRL_HUM: 0, _CTRL_MEAS: 0, _CONFIG: 0}
        self._data = _SKIPPED
        self._done_s: float | None = None
        self._reads = 0

    @property
    def mode(self) -> int:
        """0 asleep, 1 or 2 forced, 3 normal."""
        return self._set[_CTRL_MEAS] & 0x03

    def store(self, register: int, data: bytes, bus: EmulatedI2C) -> None:
        # a write of several registers is register, value, register, value ... (section 6.2.1)
        pairs = bytes([register]) + data
        for at in range(0, len(pairs) - 1, 2):
            self._store_one(pairs[at], pairs[at + 1], bus)

    def fetch(self, register: int, length: int, bus: EmulatedI2C) -> bytes:
        self._settle(bus)
        values = dict(self._words) | self._set | {0xD0: self.chip_id, _STATUS: self._status()}
        values |= {_DATA + at: byte for at, byte in enumerate(self._data)}
        answer = bytearray(values.get(at & 0xFF, 0) for at in range(register, register + length))
        self._reads += 1
        self._flip(answer, register == 0x88, self.flipped_calibration_bit)
        self._flip(answer, register == _DATA, self.flipped_data_bit)
        return bytes(answer)

    def _flip(self, answer: bytearray, here: bool, bit: int | None) -> None:
        if here and bit is not None and self._reads % 2 and bit < 8 * len(answer):
            answer[bit // 8] ^= 0x80 >> bit % 8

    def _store_one(self, register: int, value: int, bus: EmulatedI2C) -> None:
        if register == 0xE0 and value == _RESET_WORD:
            self.brown_out()
        elif register == _CTRL_MEAS:
            self._set[register] = value
            if value & 0x03 not in (_SLEEP, _NORMAL):
                self._done_s = bus.time_s + self._longest_s()
        elif register in self._set:
            self._set[register] = value

    def _longest_s(self) -> float:
        """Section 9.1, the largest conversion time."""
        t, p, h = self._times_sampled()
        return (1.25 + 2.3 * t + (2.3 * p + 0.575) * (p > 0) + (2.3 * h + 0.575) * (h > 0)) / 1e3

    def _times_sampled(self) -> tuple[int, int, int]:
        control = self._set[_CTRL_MEAS]
        codes = (control >> 5, control >> 2 & 7, self._set[_CTRL_HUM] & 7)
        return tuple(_OVERSAMPLING[code] for code in codes)  # type: ignore[return-value]  # three

    def _status(self) -> int:
        return _MEASURING if self._done_s is not None else 0

    def _settle(self, bus: EmulatedI2C) -> None:
        if self.mode == _NORMAL:
            self._convert()
        elif self._done_s is not None and bus.time_s >= self._done_s and not self.stuck_busy:
            self._convert()
            self._done_s = None
            self._set[_CTRL_MEAS] &= ~0x03

    def _convert(self) -> None:
        if self.frozen and self._data != _SKIPPED:
            return
        self.conversions += 1
        self._data = self.encode(*self._times_sampled())

    def encode(self, t: int = 1, p: int = 1, h: int = 1) -> bytes:
        """The data registers for these surroundings; a quantity sampled 0 times is skipped.

        Filter off, oversampling x1: 16 bits (sections 3.4.2, 3.4.3), one bit more each doubling.
        """
        step_t, step_p = (1 << max(0, 5 - n.bit_length()) if n else 1 for n in (t, p))
        raw_t, fine = self._raw_temperature(step_t)
        words = (
            self._noisy(self._raw_pressure(fine, step_p), step_p) if p else 0x80000,
            self._noisy(raw_t, step_t) if t else 0x80000,
            self._noisy(self._raw_humidity(fine), 1) if h else 0x8000,
        )
        pressure, temperature, humidity = words
        return (
            (pressure << 4).to_bytes(3, "big")
            + (temperature << 4).to_bytes(3, "big")
            + humidity.to_bytes(2, "big")
        )

    def _raw_temperature(self, step: int) -> tuple[int, float]:
        """The word, and the fine temperature that the other two are compensated with."""
        words = self.calibration
        wanted = (self.temperature_k - 273.15) * 5120.0
        raw = _invert(lambda n: fine_temperature(words, n), wanted, 20, step)
        return raw, float(int(fine_temperature(words, raw)))

    def _raw_pressure(self, fine: float, step: int) -> int:
        words = self.calibration
        return _invert(lambda n: pressure_pa(words, n, fine), self.pressure_pa, 20, step)

    def _raw_humidity(self, fine: float) -> int:
        words = self.calibration
        return _invert(lambda n: relative_humidity(words, n, fine), self.relative_humidity, 16, 1)

    def _noisy(self, raw: int, step: int) -> int:
        """About a count each way: 3.3 Pa and 5 mK at oversampling x1 (section 3.5.1)."""
        return raw + step * self._random.randint(-1, 1) if self.noisy else raw
