"""An emulated ADS1115 with what hangs on its inputs: transducers and current loops.

Source: SBAS444, sections 8.3 (multiplexer, full scale, codes), 8.6 (registers), 6.3 (inputs).
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Protocol

from sensors.emulated.bus import EmulatedI2C, Registers
from sensors.emulated.loop import CurrentLoop

_CONVERSION, _CONFIG = 0, 1
_POWER_ON = 0x8583
_RATES = (8, 16, 32, 64, 128, 250, 475, 860)
_FULL_SCALE_V = (6.144, 4.096, 2.048, 1.024, 0.512, 0.256, 0.256, 0.256)
_SINGLE_SHOT = 0x0100
_START = 0x8000


class Source(Protocol):
    """Something on an input."""

    @property
    def volts(self) -> float:
        """At the converter's pin, against ground."""
        ...


@dataclass
class Rail:
    """The 5 V supply through a divider; transducers share it."""

    supply_v: float = 5.0
    divider: float = 0.6667

    @property
    def volts(self) -> float:
        return self.supply_v * self.divider


@dataclass
class Transducer:
    """A ratiometric transducer, 10-90 % of its supply over its range, through a divider."""

    lowest_pa: float
    highest_pa: float
    rail: Rail
    divider: float = 0.6667
    pressure_pa: float = 0.0  # what it measures: gauge, or absolute if it is that kind
    wire_off: bool = False

    @property
    def volts(self) -> float:
        if self.wire_off:
            return 0.0
        position = (self.pressure_pa - self.lowest_pa) / (self.highest_pa - self.lowest_pa)
        # beyond its range its amplifier ends near the rails (invented: 4 % and 96 %)
        share = min(max(0.1 + 0.8 * position, 0.04), 0.96)
        return share * self.rail.supply_v * self.divider


@dataclass(eq=False)
class EmulatedAds1115(Registers):
    """The converter."""

    inputs: dict[int, Source] = field(default_factory=dict)
    rail: Rail = field(default_factory=Rail)
    supply_v: float = 3.3  # its own; an input cannot be read above this by more than 0.3 V
    stuck_busy: bool = False
    frozen: bool = False
    resets_while_converting: bool = False  # a weak supply gives way when it starts to work
    flipped_data_bit: int | None = None  # of 16, in every second read of a conversion

    def __post_init__(self) -> None:
        super().__init__()
        self.brown_out()

    def transducer(
        self, number: int, lowest_pa: float, highest_pa: float, divider: float = 0.6667
    ) -> Transducer:
        """A transducer on an input; the one there already, if there is."""
        there = self.inputs.get(number)
        if not isinstance(there, Transducer):
            there = Transducer(lowest_pa, highest_pa, self.rail, divider)
            self.inputs[number] = there
        return there

    def loop(self, number: int, lowest: float, highest: float, resistor_ohm: float) -> CurrentLoop:
        """A 4-20 mA transmitter on an input; the one there already, if there is."""
        there = self.inputs.get(number)
        if not isinstance(there, CurrentLoop):
            there = CurrentLoop(lowest, highest, resistor_ohm, value=lowest)
            self.inputs[number] = there
        return there

    def read_rail(self, number: int, divider: float = 0.6667) -> Rail:
        """The transducers' supply on an input."""
        self.rail.divider = divider
        self.inputs[number] = self.rail
        return self.rail

    def brown_out(self) -> None:
        """Every register as after power-on."""
        self._registers = {_CONVERSION: 0, _CONFIG: _POWER_ON, 2: 0x8000, 3: 0x7FFF}
        self._done_s: float | None = None
        self._reads = 0
        self._pointer = 0

    def store(self, register: int, data: bytes, bus: EmulatedI2C) -> None:
        if len(data) != 2 or register not in self._registers or register == _CONVERSION:
            return
        word = int.from_bytes(data, "big")
        self._registers[register] = word
        if register == _CONFIG and word & _START:
            rate = _RATES[word >> 5 & 7]
            self._done_s = bus.time_s + 1.1 / rate  # section 6.5: the rate may be 10 % low
            self._registers[_CONFIG] = word & ~_START

    def fetch(self, register: int, length: int, bus: EmulatedI2C) -> bytes:
        self._settle(bus)
        answer = bytearray(self._registers[register & 3].to_bytes(2, "big"))
        if register == _CONVERSION:
            self._reads += 1
            if self.flipped_data_bit is not None and self._reads % 2:
                answer[self.flipped_data_bit // 8] ^= 0x80 >> self.flipped_data_bit % 8
        return bytes(answer * (length // 2 + 1))[:length]

    def _settle(self, bus: EmulatedI2C) -> None:
        if self.resets_while_converting and self._done_s is not None:
            self.brown_out()
        if self._done_s is None or bus.time_s < self._done_s or self.stuck_busy:
            return
        self._done_s = None
        self._registers[_CONFIG] |= _START
        if not self.frozen:
            self._registers[_CONVERSION] = self._code(self._registers[_CONFIG])

    def _code(self, config: int) -> int:
        volts = self._multiplexed(config >> 12 & 7)
        count = round(volts / _FULL_SCALE_V[config >> 9 & 7] * 32768)
        return min(max(count, -32768), 32767) & 0xFFFF

    def _multiplexed(self, code: int) -> float:
        if code >= 4:
            return self._pin(code - 4)
        plus, minus = ((0, 1), (0, 3), (1, 3), (2, 3))[code]
        return self._pin(plus) - self._pin(minus)

    def _pin(self, number: int) -> float:
        source = self.inputs.get(number)
        volts = source.volts if source is not None else 0.0
        return min(max(volts, -0.3), self.supply_v + 0.3)
