"""pymodbus's own servers on loopback, over TCP and over a pair of pseudo-terminals."""

from __future__ import annotations

import asyncio
import contextlib
import os
import select
import threading
import tty
from collections.abc import Callable, Iterator
from typing import Any

from pymodbus.server import ModbusSerialServer, ModbusTcpServer
from pymodbus.simulator import DataType, SimData, SimDevice

INPUTS = [0x4120, 0x0000, 0xFFCE, 0x7FFF]  # 10.0 as float32; -50; 32767
HOLDINGS = [0x0000, 0xC1A4, 0x00D2, 0xFFFF]  # -20.5 as float32, low word first; 210


def device() -> SimDevice:
    """Device 7, coils and discrete inputs (unused), holding and input registers from 0."""

    def block(words: list[int]) -> list[SimData]:
        return [SimData(0, values=words, datatype=DataType.REGISTERS)]

    bits = [SimData(0, values=[False] * 16, datatype=DataType.BITS)]
    return SimDevice(7, (bits, bits, block(HOLDINGS), block(INPUTS)))


class _Server:
    """An asyncio server in a thread of its own."""

    def __init__(self, make: Callable[[], Any]) -> None:
        self._make = make
        self._started = threading.Event()
        self.server: Any = None
        self.loop: Any = None
        self._thread = threading.Thread(target=self._run, name="modbus server")
        self._thread.start()
        assert self._started.wait(20)

    def _run(self) -> None:
        asyncio.run(self._serve())

    async def _serve(self) -> None:
        self.loop = asyncio.get_running_loop()
        self._end = asyncio.Event()
        self.server = self._make()
        await self.server.serve_forever(background=True)
        self._started.set()
        await self._end.wait()
        await self.server.shutdown()

    def stop(self) -> None:
        self.loop.call_soon_threadsafe(self._end.set)
        self._thread.join(20)
        assert not self._thread.is_alive()


@contextlib.contextmanager
def tcp_server() -> Iterator[int]:
    """The port of a TCP server on 127.0.0.1."""
    running = _Server(lambda: ModbusTcpServer(device(), address=("127.0.0.1", 0)))
    try:
        yield running.server.transport.sockets[0].getsockname()[1]
    finally:
        running.stop()


class Wire:
    """Two pseudo-terminals with a wire between them that a test can spoil."""

    def __init__(self) -> None:
        self.spoil: Callable[[bytes], bytes] = lambda data: data
        self._masters = []
        self.ends = []
        self._slaves = []
        for _ in range(2):
            master, slave = os.openpty()
            tty.setraw(slave)
            self._masters.append(master)
            self._slaves.append(slave)
            self.ends.append(os.ttyname(slave))
        self._wake, self._stop = os.pipe()
        self._thread = threading.Thread(target=self._carry, name="wire")
        self._thread.start()

    def _carry(self) -> None:
        near, far = self._masters
        while True:
            ready, _, _ = select.select([near, far, self._wake], [], [])
            if self._wake in ready:
                return
            for source in ready:
                data = os.read(source, 4096)
                if source == far:
                    data = self.spoil(data)
                os.write(near if source == far else far, data)

    def close(self) -> None:
        os.write(self._stop, b"x")
        self._thread.join(20)
        for fd in (*self._masters, *self._slaves, self._wake, self._stop):
            os.close(fd)


@contextlib.contextmanager
def serial_server() -> Iterator[Wire]:
    """A wire: the client's end is `ends[0]`, the server has the other."""
    wire = Wire()
    running = _Server(
        lambda: ModbusSerialServer(device(), port=wire.ends[1], baudrate=19200, parity="N")
    )
    try:
        yield wire
    finally:
        running.stop()
        wire.close()
