"""An emulated I2C bus: the surface of `busio.I2C`, parts that answer in bytes, and its own time.

The bus counts what a real one would be busy for: nine bits a byte, a start and a stop, at its clock
rate; `wait` adds what a driver waits. Parts finish their conversions in that time, so a driver that
does not wait gets a busy part, as on the bench.

Source of the bit count: UM10204 (I2C-bus specification), section 3.1.
"""

from __future__ import annotations

import errno
import threading
from typing import Protocol

from sensors.i2c import ReadableBuffer, WriteableBuffer


class Part(Protocol):
    """A chip on the bus. OSError(121) when it does not acknowledge."""

    def write(self, data: bytes, bus: EmulatedI2C) -> None: ...

    def read(self, length: int, bus: EmulatedI2C) -> bytes: ...


def no_acknowledge() -> OSError:
    """What the kernel reports when nobody answers an address."""
    return OSError(errno.EREMOTEIO, "Remote I/O error")


class EmulatedI2C:
    """One bus with parts at addresses."""

    def __init__(self, frequency_hz: int = 100_000) -> None:
        self.frequency_hz = frequency_hz
        self.parts: dict[int, Part] = {}
        self.operations = 0  # transfers, each from a start to its stop
        self.bits = 0
        self.waited_s = 0.0
        self.hang: threading.Event | None = None  # a transfer waits for it: a bus that is stuck
        self._lock = threading.Lock()

    @property
    def busy_s(self) -> float:
        """Time that transfers took on the wires."""
        return self.bits / self.frequency_hz

    @property
    def time_s(self) -> float:
        """The bus's own time: transfers and waits."""
        return self.busy_s + self.waited_s

    def wait(self, seconds: float) -> None:
        self.waited_s += seconds

    def try_lock(self) -> bool:
        if not self._lock.acquire(timeout=2.0):
            raise OSError(errno.EBUSY, "the bus is held by another caller")
        return True

    def unlock(self) -> None:
        self._lock.release()

    @property
    def locked(self) -> bool:
        return self._lock.locked()

    def scan(self) -> list[int]:
        found = []
        for address in range(0x08, 0x78):
            try:
                self.readfrom_into(address, bytearray(1))
            except OSError:
                continue
            found.append(address)
        return found

    def writeto(
        self, address: int, buffer: ReadableBuffer, *, start: int = 0, end: int | None = None
    ) -> None:
        self._start()
        self._write(address, bytes(buffer[start:end]))

    def readfrom_into(
        self, address: int, buffer: WriteableBuffer, *, start: int = 0, end: int | None = None
    ) -> None:
        self._start()
        end = len(buffer) if end is None else end
        buffer[start:end] = self._read(address, end - start)

    def writeto_then_readfrom(
        self,
        address: int,
        out_buffer: ReadableBuffer,
        in_buffer: WriteableBuffer,
        *,
        out_start: int = 0,
        out_end: int | None = None,
        in_start: int = 0,
        in_end: int | None = None,
    ) -> None:
        self._start()
        in_end = len(in_buffer) if in_end is None else in_end
        self._write(address, bytes(out_buffer[out_start:out_end]))
        in_buffer[in_start:in_end] = self._read(address, in_end - in_start)

    def _start(self) -> None:
        self.operations += 1
        self.bits += 1  # the stop
        if self.hang is not None:
            self.hang.wait()

    def _write(self, address: int, data: bytes) -> None:
        self.bits += 1 + 9 * (1 + len(data))
        self._part(address).write(data, self)

    def _read(self, address: int, length: int) -> bytes:
        self.bits += 1 + 9 * (1 + length)
        answer = self._part(address).read(length, self)
        assert len(answer) == length
        return answer

    def _part(self, address: int) -> Part:
        part = self.parts.get(address)
        if part is None:
            raise no_acknowledge()
        return part


class Registers:
    """A part with 8-bit registers and a pointer that advances, with the faults any part has."""

    def __init__(self) -> None:
        self.silent = False  # no acknowledge: unplugged, or without power
        self.lines_high = False  # every byte reads 0xFF
        self.lines_low = False  # every byte reads 0x00
        self._pointer = 0

    def write(self, data: bytes, bus: EmulatedI2C) -> None:
        self._answer_or_not()
        if not data:
            return
        self._pointer = data[0]
        if not (self.lines_high or self.lines_low):
            self.store(data[0], data[1:], bus)

    def read(self, length: int, bus: EmulatedI2C) -> bytes:
        self._answer_or_not()
        if self.lines_high or self.lines_low:
            return bytes([0xFF if self.lines_high else 0x00]) * length
        return self.fetch(self._pointer, length, bus)

    def store(self, register: int, data: bytes, bus: EmulatedI2C) -> None:
        """Take the bytes of a write after its register."""
        raise NotImplementedError

    def fetch(self, register: int, length: int, bus: EmulatedI2C) -> bytes:
        """Bytes from a register on."""
        raise NotImplementedError

    def _answer_or_not(self) -> None:
        if self.silent:
            raise no_acknowledge()
