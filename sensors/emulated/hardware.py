"""The make-believe shop's hardware: the shape of the real one, with emulated parts on it.

A test or the demo asks for a part by where it sits and sets it in physical units; the real drivers
read it in bytes. `fit` puts in every part that a site file names.
"""

from __future__ import annotations

import tempfile
import threading
from collections.abc import Iterable
from pathlib import Path

from sensors.emulated.ads1115 import EmulatedAds1115
from sensors.emulated.bme280 import EmulatedBme280
from sensors.emulated.bus import EmulatedI2C
from sensors.emulated.ds18b20 import EmulatedDs18b20
from sensors.emulated.fit import Setter, fit
from sensors.emulated.lines import EmulatedLine, EmulatedLines
from sensors.emulated.mlx90614 import EmulatedMlx90614
from sensors.emulated.modbus import EmulatedModbusLine
from sensors.inbox import Inbox
from sensors.modbus import ModbusPort
from sensors.registry import SensorConfig


class EmulatedHardware:
    """Buses, wires and lines, empty until parts are asked for."""

    def __init__(self, folder: Path | None = None, frequency_hz: int = 100_000) -> None:
        self._own = tempfile.TemporaryDirectory(prefix="dripleg-") if folder is None else None
        self._folder = Path(self._own.name) if self._own is not None else folder
        self._frequency_hz = frequency_hz
        self._lock = threading.RLock()
        self._buses: dict[int, EmulatedI2C] = {}
        self._probes: dict[str, EmulatedDs18b20] = {}
        self._chips: dict[str, EmulatedLines] = {}
        self._modbus: dict[ModbusPort, EmulatedModbusLine] = {}
        self._inbox = Inbox()

    # what drivers ask for

    def i2c(self, bus: int) -> EmulatedI2C:
        with self._lock:
            return self._buses.setdefault(bus, EmulatedI2C(self._frequency_hz))

    def one_wire_root(self) -> str:
        return str(self._folder)

    def lines(self, chip: str) -> EmulatedLines:
        with self._lock:
            return self._chips.setdefault(chip, EmulatedLines())

    def modbus(self, port: ModbusPort) -> EmulatedModbusLine:
        with self._lock:
            return self._modbus.setdefault(port, EmulatedModbusLine())

    def inbox(self) -> Inbox:
        return self._inbox

    def wait(self, seconds: float) -> None:
        """No real time passes; the buses' own time does."""
        with self._lock:
            for bus in self._buses.values():
                bus.wait(seconds)

    def close(self) -> None:
        """Remove the folder if it is ours. May be called twice."""
        if self._own is not None:
            self._own.cleanup()

    # what the shop asks for

    def __enter__(self) -> EmulatedHardware:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def locked_buses(self) -> tuple[int, ...]:
        """Buses that somebody took and did not give back."""
        with self._lock:
            return tuple(number for number, bus in self._buses.items() if bus.locked)

    def bme280(self, bus: int, address: int) -> EmulatedBme280:
        part = self.i2c(bus).parts.setdefault(address, EmulatedBme280())
        assert isinstance(part, EmulatedBme280), f"0x{address:02x} is another part"
        return part

    def ads1115(self, bus: int, address: int) -> EmulatedAds1115:
        part = self.i2c(bus).parts.setdefault(address, EmulatedAds1115())
        assert isinstance(part, EmulatedAds1115), f"0x{address:02x} is another part"
        return part

    def mlx90614(self, bus: int, address: int) -> EmulatedMlx90614:
        part = self.i2c(bus).parts.setdefault(address, EmulatedMlx90614(address))
        assert isinstance(part, EmulatedMlx90614), f"0x{address:02x} is another part"
        return part

    def ds18b20(self, serial: str) -> EmulatedDs18b20:
        with self._lock:
            if serial not in self._probes:
                self._probes[serial] = EmulatedDs18b20(Path(self.one_wire_root()), serial)
            return self._probes[serial]

    def line(self, chip: str, number: int) -> EmulatedLine:
        return self.lines(chip).line(number)

    def make_noisy(self) -> None:
        """From now on the parts' conversions differ a little, as those of real parts do."""
        with self._lock:
            parts = [part for bus in self._buses.values() for part in bus.parts.values()]
        for part in parts:
            if isinstance(part, EmulatedBme280):
                part.noisy = True

    def fit(self, sensors: Iterable[SensorConfig]) -> dict[str, Setter]:
        """Put in the parts of these sensors; a setter for every channel, by its name."""
        return fit(self, sensors)
