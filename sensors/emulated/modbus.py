"""An emulated Modbus line: devices with registers, and the ways a line fails."""

from __future__ import annotations

import errno

from sensors.modbus import Kind, ModbusError


class EmulatedDevice:
    """The registers of one device."""

    def __init__(self) -> None:
        self.registers: dict[tuple[Kind, int], int] = {}
        self.silent = False
        self.bad_checksum = False
        self.exception_code: int | None = None
        self.lines_high = False  # every register reads 0xFFFF

    def put(self, kind: Kind, start: int, words: list[int]) -> None:
        for at, word in enumerate(words):
            self.registers[kind, start + at] = word


class EmulatedModbusLine:
    """The reader of a port, with devices by number, made when they are first named."""

    def __init__(self) -> None:
        self.devices: dict[int, EmulatedDevice] = {}

    def device(self, number: int) -> EmulatedDevice:
        return self.devices.setdefault(number, EmulatedDevice())

    def read(self, kind: Kind, device: int, start: int, count: int) -> list[int]:
        part = self.devices.get(device)
        if part is None or part.silent:
            raise OSError(errno.ETIMEDOUT, "no response")
        if part.bad_checksum:
            raise ModbusError("a frame with another checksum", bad_checksum=True)
        if part.exception_code is not None:
            raise ModbusError(f"exception code {part.exception_code}")
        if part.lines_high:
            return [0xFFFF] * count
        places = [(kind, start + at) for at in range(count)]
        if any(place not in part.registers for place in places):
            raise ModbusError("exception code 2")  # V1.1b3, section 7: illegal data address
        return [part.registers[place] for place in places]

    def close(self) -> None:
        """Nothing to let go of."""
