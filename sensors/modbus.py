"""Modbus: reading registers of a device on a serial line (RTU) or over TCP, through pymodbus.

Wiring: RS-485, A to A and B to B, one pair for all devices, 120 ohm at both ends of a long one, a
common ground; each device its own number. The standard's own setting is 19200 8E1.

pymodbus is an optional extra and is imported when a port is first opened. Source: Modbus
application protocol V1.1b3, sections 6.3-6.4 (reading registers) and 7 (exception codes).
"""

from __future__ import annotations

import errno
import logging
import re
from dataclasses import dataclass
from typing import Any, Literal, Protocol

Kind = Literal["holding", "input"]
TIMEOUT_S = 1.0  # a device answers within some tens of milliseconds; a busy Pi looks late
_HOST = re.compile(r"([A-Za-z0-9.-]+|\[[0-9A-Fa-f:]+\]):(\d{1,5})\Z")
_DEVICE = re.compile(r"/dev/[\w./-]+\Z")
_LINE = re.compile(r"(1200|2400|4800|9600|19200|38400|57600|115200)\s+8([NEO])([12])\Z")


@dataclass(frozen=True, slots=True)
class ModbusPort:
    """A serial device or a TCP host, by `host`; `tcp_port` is 0 for a serial one."""

    host: str
    tcp_port: int = 0
    baud: int = 19200
    parity: str = "E"
    stop_bits: int = 1

    def __str__(self) -> str:
        return f"{self.host}:{self.tcp_port}" if self.tcp_port else self.host


class ModbusError(Exception):
    """The device answered, with an exception code or with a frame that fails its checksum."""

    def __init__(self, what: str, bad_checksum: bool = False) -> None:
        self.bad_checksum = bad_checksum
        super().__init__(what)


class RegisterReader(Protocol):
    """Something that reads registers. One thread uses it."""

    def read(self, kind: Kind, device: int, start: int, count: int) -> list[int]:
        """16-bit words. OSError when nothing answers, ModbusError when the answer is no good."""
        ...

    def close(self) -> None: ...


def parse_port(value: object) -> tuple[str, int]:
    """`"/dev/ttyUSB0"` or `"192.168.4.20:502"` as (name, TCP port or 0)."""
    if isinstance(value, str):
        match = _HOST.match(value)
        if match is not None and 0 < int(match[2]) < 65536:
            return match[1].strip("[]"), int(match[2])
        if _DEVICE.match(value):
            return value, 0
    raise ValueError('write a serial device like "/dev/ttyUSB0", or "host:port" for Modbus TCP')


def parse_line(value: object) -> tuple[int, str, int]:
    """`"19200 8E1"` as (baud, parity, stop bits)."""
    match = _LINE.match(value) if isinstance(value, str) else None
    if match is None:
        raise ValueError('write the serial setting of the device, like "19200 8E1" or "9600 8N1"')
    return int(match[1]), match[2], int(match[3])


class PymodbusReader:
    """Registers through pymodbus. Opened with the first read, again after a failure."""

    def __init__(self, port: ModbusPort, timeout_s: float = TIMEOUT_S) -> None:
        self._port = port
        self._timeout_s = timeout_s
        self._client: Any = None
        self._received = b""

    def read(self, kind: Kind, device: int, start: int, count: int) -> list[int]:
        from pymodbus.exceptions import ModbusException  # noqa: PLC0415  # optional extra

        client = self._open()
        ask = client.read_input_registers if kind == "input" else client.read_holding_registers
        self._received = b""
        try:
            answer = ask(start, count=count, device_id=device)
        except ModbusException as error:
            self.close()  # a late answer must not be taken for the next one's
            if self._received:
                raise ModbusError(f"{self._received.hex(' ')}", bad_checksum=True) from error
            raise OSError(errno.ETIMEDOUT, f"{self._port}: {error}") from error
        if answer.isError():
            raise ModbusError(f"exception code {answer.exception_code}")
        words = [int(word) for word in answer.registers]
        if len(words) != count:
            self.close()
            raise ModbusError(f"{len(words)} registers came, {count} were asked for")
        return words

    def close(self) -> None:
        """Close the connection; the next read opens it. May be called twice."""
        client, self._client = self._client, None
        if client is not None:
            client.close()

    def _open(self) -> Any:
        if self._client is None:
            self._client = self._make()
        if not self._client.connect():
            self.close()
            raise OSError(errno.ENXIO, f"{self._port} cannot be opened")
        return self._client

    def _make(self) -> Any:
        from pymodbus.client import ModbusSerialClient, ModbusTcpClient  # noqa: PLC0415

        # it would log every tick that a device is absent; the sampler says so once
        logging.getLogger("pymodbus.logging").setLevel(logging.CRITICAL)
        common: dict[str, Any] = {
            "timeout": self._timeout_s,
            "retries": 0,
            "trace_packet": self._trace,
        }
        port = self._port
        if port.tcp_port:
            return ModbusTcpClient(port.host, port=port.tcp_port, **common)
        import serial  # noqa: F401, PLC0415  # so that a missing one is named as what it is

        return ModbusSerialClient(
            port.host, baudrate=port.baud, parity=port.parity, stopbits=port.stop_bits, **common
        )

    def _trace(self, sending: bool, data: bytes) -> bytes:
        if not sending:
            self._received = bytes(data)
        return data
