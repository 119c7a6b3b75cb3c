"""An emulated DS18B20: the kernel's `w1_slave` file in a folder, with a scratchpad and its CRC.

Source: DS18B20 data sheet 19-7487, figures 4, 9 and 11; Linux, drivers/w1/slaves/w1_therm.c.
The checksum is computed here bit by bit as in the data sheet's shift register, apart from the
driver's.
"""

from __future__ import annotations

import math
import os
from pathlib import Path

_POWER_ON = 85.0
_CONFIGURATION = {9: 0x1F, 10: 0x3F, 11: 0x5F, 12: 0x7F}


def shift_register_crc(data: bytes) -> int:
    """Figure 11: eight stages, input at the bit that leaves, taps after stages 4 and 5."""
    stages = [0] * 8  # stage 8 (most significant in the result) last
    for byte in data:
        for at in range(8):
            feedback = stages[0] ^ (byte >> at & 1)
            stages = [*stages[1:], feedback]
            stages[3] ^= feedback
            stages[2] ^= feedback
    return sum(bit << at for at, bit in enumerate(stages))


class EmulatedDs18b20:
    """One probe on the wire."""

    def __init__(self, root: Path, serial: str, resolution_bits: int = 12) -> None:
        self._folder = root / serial
        self._bits = resolution_bits
        self._temperature_k = 293.15
        self._fault = ""
        self._show()

    @property
    def temperature_k(self) -> float:
        return self._temperature_k

    @temperature_k.setter
    def temperature_k(self, value: float) -> None:
        self._temperature_k = value
        if self._fault != "frozen":
            self._show()

    def fail(self, fault: str = "") -> None:
        """ "silent", "empty", "checksum", "ones", "zeros", "reset", "starved", "frozen", or ""."""
        self._fault = fault
        self._show()

    def scratchpad(self) -> bytes:
        """Nine bytes as the part would send them."""
        if self._fault in ("ones", "zeros"):
            return bytes([0xFF if self._fault == "ones" else 0x00]) * 9
        raw = self._raw()
        low = raw.to_bytes(2, "little", signed=True)
        byte_6 = 0x10 - (raw & 0xF)
        if self._fault in ("reset", "starved"):
            low = (0x0550 if self._fault == "reset" else 0x07FF).to_bytes(2, "little")
            byte_6 = 0x0C
        eight = low + bytes((0x4B, 0x46, _CONFIGURATION[self._bits], 0xFF, byte_6, 0x10))
        crc = shift_register_crc(eight)
        return eight + bytes([crc ^ (0x01 if self._fault == "checksum" else 0)])

    def _raw(self) -> int:
        """Sixteenths of a degree; a lower resolution truncates its last bits."""
        unused = 12 - self._bits
        sixteenths = math.floor((self._temperature_k - 273.15) * 16 + 0.5)
        return min(max(sixteenths >> unused << unused, -55 * 16), 125 * 16)

    def _show(self) -> None:
        file = self._folder / "w1_slave"
        if self._fault == "silent":
            file.unlink(missing_ok=True)
            if self._folder.exists():
                self._folder.rmdir()
            return
        self._folder.mkdir(exist_ok=True)
        text = "" if self._fault == "empty" else self._kernel_text(self.scratchpad())
        whole = self._folder.with_suffix(".new")
        whole.write_text(text, encoding="ascii")
        os.replace(whole, file)  # a reader sees the old text or the new one, never half

    @staticmethod
    def _kernel_text(pad: bytes) -> str:
        crc = shift_register_crc(pad[:8])
        verdict = "YES" if crc == pad[8] else "NO"
        thousandths = int.from_bytes(pad[:2], "little", signed=True) * 1000 // 16
        shown = pad.hex(" ")
        return f"{shown} : crc={crc:02x} {verdict}\n{shown} t={thousandths}\n"
