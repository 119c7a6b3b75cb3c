"""The machine's own buses and lines, as drivers ask for them."""

from __future__ import annotations

import threading

from daemon.clock import SystemClock
from sensors.i2c import LinuxI2C
from sensors.inbox import Inbox
from sensors.lines import GpiodLines
from sensors.modbus import TIMEOUT_S, ModbusPort, PymodbusReader

ONE_WIRE_ROOT = "/sys/bus/w1/devices"


class RealHardware:
    """Opens a bus when it is first asked for, and once only. Safe to call from any thread."""

    def __init__(
        self,
        one_wire_root: str = ONE_WIRE_ROOT,
        inbox: Inbox | None = None,
        modbus_timeout_s: float = TIMEOUT_S,
    ) -> None:
        self._one_wire_root = one_wire_root
        self._modbus_timeout_s = modbus_timeout_s
        self._inbox = Inbox() if inbox is None else inbox
        self._clock = SystemClock()
        self._never = threading.Event()
        self._lock = threading.Lock()
        self._buses: dict[int, LinuxI2C] = {}
        self._modbus: dict[ModbusPort, PymodbusReader] = {}

    def i2c(self, bus: int) -> LinuxI2C:
        """`/dev/i2c-<bus>`; OSError when it cannot be opened."""
        with self._lock:
            if bus not in self._buses:
                self._buses[bus] = LinuxI2C(bus)
            return self._buses[bus]

    def one_wire_root(self) -> str:
        return self._one_wire_root

    def lines(self, chip: str) -> GpiodLines:
        return GpiodLines(
            chip,
            wall_ns=lambda: self._clock.now_us() * 1000,
            monotonic_ns=lambda: round(self._clock.monotonic() * 1e9),
        )

    def modbus(self, port: ModbusPort) -> PymodbusReader:
        with self._lock:
            return self._modbus.setdefault(port, PymodbusReader(port, self._modbus_timeout_s))

    def inbox(self) -> Inbox:
        return self._inbox

    def wait(self, seconds: float) -> None:
        self._clock.wait(seconds, self._never)

    def close(self) -> None:
        """Close the buses and lines. May be called twice; a bus asked for again is opened again."""
        with self._lock:
            for bus in self._buses.values():
                bus.close()
            self._buses.clear()
            for reader in self._modbus.values():
                reader.close()
            self._modbus.clear()
