"""The real bus: what it asks of the kernel, with a kernel made of an emulated bus."""

from __future__ import annotations

import ctypes
import errno
import os
from typing import Any

import pytest

from sensors import i2c
from sensors.emulated.bme280 import EmulatedBme280
from sensors.emulated.bus import EmulatedI2C
from sensors.hardware import RealHardware
from sensors.i2c import LinuxI2C, Request
from sensors.reading import SensorFault
from tests.sensors.support import START_US, config, open_part, values

# Linux, include/uapi/linux/i2c-dev.h
RETRIES, TIMEOUT, RDWR = 0x0701, 0x0702, 0x0707


class Kernel:
    """Takes the requests apart as the kernel does and passes them to an emulated bus."""

    def __init__(self) -> None:
        self.bus = EmulatedI2C()
        self.opened: list[str] = []
        self.closed: list[int] = []
        self.settings: dict[int, int] = {}
        self.requests: list[list[tuple[int, int, int]]] = []

    def open(self, path: str, flags: int) -> int:
        assert flags & os.O_RDWR
        assert flags & os.O_CLOEXEC
        self.opened.append(path)
        return 7

    def close(self, fd: int) -> None:
        self.closed.append(fd)

    def ioctl(self, fd: int, request: int, argument: Any) -> int:
        assert fd == 7
        if request != RDWR:
            self.settings[request] = argument
            return 0
        assert isinstance(argument, Request)
        messages = [argument.msgs[at] for at in range(argument.nmsgs)]
        self.requests.append([(one.addr, one.flags, one.len) for one in messages])
        for one in messages:
            if one.flags & 1:
                answer = bytearray(one.len)
                self.bus.readfrom_into(one.addr, answer)
                ctypes.memmove(one.buf, bytes(answer), one.len)
            else:
                self.bus.writeto(one.addr, bytes(one.buf[: one.len]))
        return len(messages)

    def device(self) -> LinuxI2C:
        return LinuxI2C(1, open_device=self.open, ioctl=self.ioctl, close_device=self.close)


@pytest.fixture
def kernel() -> Kernel:
    kernel = Kernel()
    kernel.bus.parts[0x76] = EmulatedBme280()
    return kernel


def test_the_structures_are_as_long_as_the_kernels() -> None:
    # Linux, include/uapi/linux/i2c.h, on a 64-bit machine: 3 x u16, padding, a pointer; a pointer,
    # u32, padding
    assert ctypes.sizeof(i2c.Message) == 16
    assert i2c.Message.buf.offset == 8
    assert ctypes.sizeof(Request) == 16


def test_the_bus_is_opened_by_number_with_a_bound_on_every_transfer(kernel: Kernel) -> None:
    kernel.device()
    assert kernel.opened == ["/dev/i2c-1"]
    assert kernel.settings == {TIMEOUT: 10, RETRIES: 0}  # 100 ms, in units of 10 ms


def test_a_write_then_read_is_one_request_with_a_repeated_start(kernel: Kernel) -> None:
    answer = bytearray(3)
    kernel.device().writeto_then_readfrom(0x76, b"\xd0", answer, in_start=1, in_end=2)
    assert kernel.requests == [[(0x76, 0, 1), (0x76, 1, 1)]]
    assert answer == b"\x00\x60\x00"


def test_buffers_are_cut_as_busio_cuts_them(kernel: Kernel) -> None:
    bus = kernel.device()
    bus.writeto(0x76, b"xx\xd0yy", start=2, end=3)
    answer = bytearray(b"abc")
    bus.readfrom_into(0x76, answer, start=2)
    assert answer == b"ab\x60"
    assert kernel.requests == [[(0x76, 0, 1)], [(0x76, 1, 1)]]


def test_a_scan_finds_the_parts(kernel: Kernel) -> None:
    kernel.bus.parts[0x77] = EmulatedBme280()
    assert kernel.device().scan() == [0x76, 0x77]


def test_a_closed_bus_says_so_and_closes_once(kernel: Kernel) -> None:
    bus = kernel.device()
    bus.close()
    bus.close()
    assert kernel.closed == [7]
    with pytest.raises(OSError, match="is closed"):
        bus.writeto(0x76, b"")


def test_a_bus_that_is_held_is_an_error_not_a_wait_for_ever(
    kernel: Kernel, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(i2c, "_LOCK_WAIT_S", 0.01)
    bus = kernel.device()
    assert bus.try_lock()
    with pytest.raises(OSError, match="held by another") as caught:
        bus.try_lock()
    assert caught.value.errno == errno.EBUSY
    bus.unlock()
    assert bus.try_lock()


def test_the_driver_reads_through_the_kernels_requests(
    kernel: Kernel, monkeypatch: pytest.MonkeyPatch
) -> None:
    hardware = RealHardware()
    monkeypatch.setattr("sensors.hardware.LinuxI2C", lambda _number: kernel.device())
    part = kernel.bus.parts[0x76]
    assert isinstance(part, EmulatedBme280)
    monkeypatch.setattr(hardware, "wait", kernel.bus.wait)
    part.temperature_k = 301.0
    read = values(open_part(config("air", "bme280"), hardware).read(START_US))
    assert read["temperature"] == pytest.approx(301.0, abs=0.01)
    assert len(kernel.opened) == 1
    hardware.close()
    hardware.close()
    assert kernel.closed == [7]


def test_a_machine_without_the_bus_is_a_fault() -> None:
    with pytest.raises(SensorFault, match=r"bus cannot be opened.*/dev/i2c-98"):
        open_part(config("air", "bme280", bus=98), RealHardware())


def test_the_real_hardware_waits_really() -> None:
    hardware = RealHardware("/somewhere")
    hardware.wait(0.0)
    assert hardware.one_wire_root() == "/somewhere"
