"""An I2C bus of the machine: `/dev/i2c-N`, one I2C_RDWR request to the kernel per transfer.

The object has the surface of `busio.I2C`, which the vendors' drivers ask for. One thread owns it.
Wiring: SDA on pin 3, SCL on pin 5 (bus 1), 3.3 V on pin 1, ground on pin 9; the Pi has 1.8 kohm
pull-ups on the board. Keep wires under half a metre at 100 kHz; beyond that use an extender.

Source of the request's layout: Linux, include/uapi/linux/i2c.h and i2c-dev.h.
"""

from __future__ import annotations

import ctypes
import errno
import os
import threading
from collections.abc import Callable, Sequence
from typing import Any, Protocol

ReadableBuffer = bytes | bytearray
WriteableBuffer = bytearray

_I2C_RETRIES = 0x0701
_I2C_TIMEOUT = 0x0702  # the argument counts in 10 ms
_I2C_RDWR = 0x0707
_I2C_M_RD = 0x0001
_LOCK_WAIT_S = 2.0


class I2CBus(Protocol):
    """The part of `busio.I2C` that drivers use."""

    def try_lock(self) -> bool: ...

    def unlock(self) -> None: ...

    def scan(self) -> list[int]: ...

    def writeto(
        self, address: int, buffer: ReadableBuffer, *, start: int = 0, end: int | None = None
    ) -> None: ...

    def readfrom_into(
        self, address: int, buffer: WriteableBuffer, *, start: int = 0, end: int | None = None
    ) -> None: ...

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
    ) -> None: ...


class Message(ctypes.Structure):
    """`struct i2c_msg`."""

    _fields_ = (
        ("addr", ctypes.c_uint16),
        ("flags", ctypes.c_uint16),
        ("len", ctypes.c_uint16),
        ("buf", ctypes.POINTER(ctypes.c_uint8)),
    )


class Request(ctypes.Structure):
    """`struct i2c_rdwr_ioctl_data`."""

    _fields_ = (("msgs", ctypes.POINTER(Message)), ("nmsgs", ctypes.c_uint32))


def _system_ioctl(fd: int, request: int, argument: Any) -> int:
    import fcntl  # noqa: PLC0415  # Linux only; the package is read on other systems too

    return int(fcntl.ioctl(fd, request, argument))


class LinuxI2C:
    """`/dev/i2c-<bus>`. OSError when it cannot be opened or a part does not acknowledge."""

    def __init__(
        self,
        bus: int,
        *,
        timeout_s: float = 0.1,
        open_device: Callable[[str, int], int] = os.open,
        ioctl: Callable[[int, int, Any], int] = _system_ioctl,
        close_device: Callable[[int], None] = os.close,
    ) -> None:
        self.path = f"/dev/i2c-{bus}"
        self._ioctl = ioctl
        self._close = close_device
        self._lock = threading.Lock()
        self._fd = open_device(self.path, os.O_RDWR | os.O_CLOEXEC)
        ioctl(self._fd, _I2C_TIMEOUT, max(1, round(timeout_s / 0.01)))
        ioctl(self._fd, _I2C_RETRIES, 0)

    def try_lock(self) -> bool:
        """Take the bus; OSError after two seconds, where the vendors' loop would wait for ever."""
        if not self._lock.acquire(timeout=_LOCK_WAIT_S):
            raise OSError(errno.EBUSY, f"{self.path} is held by another caller")
        return True

    def unlock(self) -> None:
        self._lock.release()

    def close(self) -> None:
        """Let go of the device. May be called twice."""
        if self._fd >= 0:
            self._close(self._fd)
            self._fd = -1

    def scan(self) -> list[int]:
        """The addresses that acknowledge a read of one byte."""
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
        self._transfer(address, bytes(buffer[start:end]), None)

    def readfrom_into(
        self, address: int, buffer: WriteableBuffer, *, start: int = 0, end: int | None = None
    ) -> None:
        end = len(buffer) if end is None else end
        buffer[start:end] = self._transfer(address, None, end - start)

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
        in_end = len(in_buffer) if in_end is None else in_end
        out = bytes(out_buffer[out_start:out_end])
        in_buffer[in_start:in_end] = self._transfer(address, out, in_end - in_start)

    def _transfer(self, address: int, out: bytes | None, length: int | None) -> bytes:
        if self._fd < 0:
            raise OSError(errno.EBADF, f"{self.path} is closed")
        parts: list[tuple[int, Any]] = []
        if out is not None:
            parts.append((0, (ctypes.c_uint8 * max(1, len(out)))(*out)))
        answer = (ctypes.c_uint8 * (length or 0))()
        if length is not None:
            parts.append((_I2C_M_RD, answer))
        lengths = ([len(out)] if out is not None else []) + ([length] if length is not None else [])
        self._request(address, parts, lengths)
        return bytes(answer)

    def _request(
        self, address: int, parts: Sequence[tuple[int, Any]], lengths: Sequence[int]
    ) -> None:
        messages = (Message * len(parts))()
        pointer = ctypes.POINTER(ctypes.c_uint8)
        for message, (flags, buffer), length in zip(messages, parts, lengths, strict=True):
            message.addr, message.flags, message.len = address, flags, length
            message.buf = ctypes.cast(buffer, pointer)
        request = Request(ctypes.cast(messages, ctypes.POINTER(Message)), len(parts))
        self._ioctl(self._fd, _I2C_RDWR, request)
