"""Whole numbers as few bytes: differences, in the narrowest width that holds them all, by planes.

What follows one another in a shop's air is nearly alike, so that differences are small, and a
general compressor finds little to do but count them. Pure; the inverse gives the same numbers.

A run is little-endian: width in bytes (u8) | how many (u32) | the differences' lowest bytes, then
the next ones, and so on. The first difference is from 0.
"""

from __future__ import annotations

import struct

import numpy as np
import numpy.typing as npt

Integers = npt.NDArray[np.int64]
_HEAD = struct.Struct("<BI")
_WIDTHS = (1, 2, 4, 8)


class Damaged(ValueError):
    """Bytes that are not what was written."""


def put(values: Integers) -> bytes:
    """The numbers (int64, within +- 2**62) as bytes."""
    deltas = np.diff(values, prepend=np.int64(0))
    least, most = (int(deltas.min()), int(deltas.max())) if len(deltas) else (0, 0)
    width = next(
        each for each in _WIDTHS if -(1 << 8 * each - 1) <= least <= most < 1 << 8 * each - 1
    )
    return _HEAD.pack(width, len(deltas)) + planes(deltas.astype(f"<i{width}"))


def planes(values: npt.NDArray[np.generic]) -> bytes:
    """The bytes of an array: of every item the first, then of every item the second ..."""
    table = np.frombuffer(values.tobytes(), np.uint8).reshape(-1, values.dtype.itemsize)
    return table.T.tobytes()


class Source:
    """Takes one thing after another from bytes. Damaged when they end too early."""

    def __init__(self, data: bytes) -> None:
        self._data, self._at = data, 0

    def integers(self) -> Integers:
        """The next run of numbers."""
        width, number = self.fields(_HEAD)
        if width not in _WIDTHS:
            raise Damaged(f"numbers of {width} bytes")
        return np.cumsum(self.array(f"<i{width}", number), dtype=np.int64)

    def array(self, kind: str, number: int) -> npt.NDArray[np.generic]:
        """The next array whose bytes stand by planes."""
        size = np.dtype(kind).itemsize
        table = np.frombuffer(self.taken(size * number), np.uint8).reshape(size, number)
        return np.frombuffer(table.T.tobytes(), kind)

    def fields(self, fields: struct.Struct) -> tuple[int, ...]:
        """The next few fields."""
        return fields.unpack(self.taken(fields.size))

    def taken(self, size: int) -> bytes:
        """The next bytes."""
        if self._at + size > len(self._data):
            raise Damaged(f"{len(self._data)} bytes, at least {self._at + size} expected")
        self._at += size
        return self._data[self._at - size : self._at]
