"""An emulated MLX90614: set in K, it answers SMBus word reads with their packet error code.

Source: MLX90614 data sheet 3901090614, sections 8.4.2-8.4.5: 0.02 K a count from 0 K, low byte
first, then the code over both addresses, the command and the data. The code is computed here by
long division of the whole message, apart from the driver's.
"""

from __future__ import annotations

from sensors.emulated.bus import EmulatedI2C, Registers

_CASE, _OBJECT, _SECOND = 0x06, 0x07, 0x08
_EMISSIVITY = 0x24
_POLYNOMIAL = 0x107  # x8 + x2 + x + 1


def long_division_pec(message: bytes) -> int:
    """The remainder of the message times x8, divided by the polynomial."""
    remainder = int.from_bytes(message, "big") << 8
    for bit in range(remainder.bit_length() - 1, 7, -1):
        if remainder >> bit & 1:
            remainder ^= _POLYNOMIAL << (bit - 8)
    return remainder


class EmulatedMlx90614(Registers):
    """The part, with what it looks at and where it sits as attributes."""

    def __init__(self, address: int = 0x5A) -> None:
        super().__init__()
        self.address = address
        self.object_k = 293.15
        self.case_k = 293.15
        self.bad_checksum = False
        self.not_valid = False  # the value's error flag
        self.flipped_data_bit: int | None = None  # of 16, after the code was computed
        self.frozen = False
        self._shown = self.object_k

    def brown_out(self) -> None:
        """Until its first measurement after power-on the part has nothing to say."""
        self.not_valid = True

    def store(self, register: int, data: bytes, bus: EmulatedI2C) -> None:
        """Its memory is written at the factory."""

    def fetch(self, register: int, length: int, bus: EmulatedI2C) -> bytes:
        word = self._word(register)
        data = bytearray(word.to_bytes(2, "little"))
        head = bytes((self.address << 1, register, self.address << 1 | 1))
        code = long_division_pec(head + bytes(data)) ^ (0x55 if self.bad_checksum else 0)
        if self.flipped_data_bit is not None:
            data[self.flipped_data_bit // 8] ^= 0x80 >> self.flipped_data_bit % 8
        return (bytes(data) + bytes([code]) + bytes([0xFF]) * length)[:length]

    def _word(self, register: int) -> int:
        if register == _EMISSIVITY:
            return 0xFFFF
        if not self.frozen:
            self._shown = self.object_k
        temperature_k = self.case_k if register == _CASE else self._shown
        counts = min(max(round(temperature_k / 0.02), 0), 0x7FFF)
        flag = 0x8000 if self.not_valid and register in (_OBJECT, _SECOND) else 0
        return counts | flag
