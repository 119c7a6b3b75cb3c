"""ADS1115: four voltages against ground, for transducers and current loops.

Wiring: 3.3 V, ground, SDA, SCL; address 0x48 with ADDR at ground, 0x49 at 3.3 V, 0x4A at SDA, 0x4B
at SCL. No input may go above its supply by more than 0.3 V: with 3.3 V that is 3.6 V, so a 5 V
signal needs a divider (10 kohm in series, 20 kohm to ground: 0.6667).

Single-shot conversions through the vendor's library, which by itself waits without bound. Source of
registers, codes and times: SBAS444 (ADS1115), sections 8.3.3 (full scale), 8.6.3 (configuration).
"""

from __future__ import annotations

import functools
from typing import Any

from sensors import keys, reasons
from sensors.reading import SensorFault
from sensors.registry import Hardware, Key

GAIN = 1  # full scale 4.096 V, 125 uV a count
VOLTS_PER_COUNT = 4.096 / 32768
# with a supply of 3.3 V the inputs' protection conducts from 3.6 V on and hides what is beyond
HIGHEST_V = 3.59
RATE = 250  # conversions a second; 4.0 ms, at most 10 % more
_CONVERSION_S = 0.0045
_POLL_S = 0.001
_POLLS = 5
_READY = 0x8000
_SINGLE_ENDED = 4  # the multiplexer's code of input 0 against ground

ADC_KEYS = (
    Key("bus", keys.whole(0, 99), 1, "number of the I2C bus: 1 is /dev/i2c-1"),
    Key("address", keys.address(0x48, 0x49, 0x4A, 0x4B), 0x48, "the converter's address"),
    Key("input", keys.whole(0, 3), meaning="the converter's input that the signal goes to"),
)


class _NeverReady(Exception):
    """The conversion did not end."""


@functools.cache
def _bounded_adc() -> Any:
    """The vendor's ADS1115 with a bounded wait; made late, for it imports a hardware library."""
    from adafruit_ads1x15.ads1115 import ADS1115  # noqa: PLC0415

    class BoundedAds1115(ADS1115):  # type: ignore[misc, unused-ignore]  # typed or not, by version
        """Waits for a conversion a few times, then says so; keeps what it wrote and read back."""

        def __init__(self, bus: Any, address: int, hardware: Hardware) -> None:
            self.hardware = hardware
            self.written = self.read_back = 0
            super().__init__(bus, gain=GAIN, data_rate=RATE, address=address)

        def _write_register(self, reg: int, value: int) -> None:
            if reg == 1:
                self.written = value
            super()._write_register(reg, value)

        def _conversion_complete(self) -> int:
            self.hardware.wait(_CONVERSION_S)
            for _ in range(_POLLS):
                self.read_back = self._read_register(1)
                if self.read_back & _READY:
                    return _READY
                self.hardware.wait(_POLL_S)
            raise _NeverReady

    return BoundedAds1115


class Adc:
    """One ADS1115, for one sensor."""

    def __init__(self, sensor: str, hardware: Hardware, bus: int, address: int) -> None:
        self._sensor = sensor
        self._chip = _bounded_adc()(hardware.i2c(bus), address, hardware)

    def volts(self, number: int) -> float:
        """The voltage at an input, V. SensorFault when the converter cannot be believed.

        A voltage at the end of what the inputs can take is a fault too: the true one may be higher.
        """
        chip = self._chip
        try:
            count = chip.read(number + _SINGLE_ENDED)
        except _NeverReady:
            raise self._wrong(chip, reasons.STAYS_BUSY) from None
        if chip.read_back != chip.written | _READY:
            raise self._wrong(chip, reasons.WAS_RESET)
        again = chip.get_last_result()
        if again != count & 0xFFFF:
            detail = f"0x{count & 0xFFFF:04x} and 0x{again:04x}"
            raise SensorFault(self._sensor, reasons.DOES_NOT_REPEAT, detail)
        volts = float(count * VOLTS_PER_COUNT)
        if volts >= HIGHEST_V:
            detail = f"{volts:.2f} V is more than the converter can take"
            raise SensorFault(self._sensor, reasons.SIGNAL_HIGH, detail)
        return volts

    def _wrong(self, chip: Any, reason: str) -> SensorFault:
        detail = f"wrote 0x{chip.written:04x}, reads 0x{chip.read_back:04x}"
        if chip.read_back == 0xFFFF:
            reason = reasons.ALL_ONES
        elif chip.read_back == 0:
            reason = reasons.ALL_ZEROS
        return SensorFault(self._sensor, reason, detail)
