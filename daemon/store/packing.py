"""One tick's readings as one packed row, and back to the same bits; pure, no database.

A *layout* is an ordered tuple of (channel, step). A row is little-endian:

    format 1 (u8) | flags (u8)
    | a count for each channel of the layout (i32)
    | with flag 1: a time for each channel, us after the tick (i32)
    | with flag 2: number of extras (u32), and each: place (u32) | channel (u16)
      | us after the tick (i64) | value (f64) | length of the fault (u32) | fault (UTF-8)

A count is the value in steps; `ABSENT` says that no reading stands there. The counts are read in
the layout's order. Whatever does not fit (bad readings, further readings of a channel such as a
contact's edges, values that are not a whole number of steps, readings out of the layout's order)
is an extra with its place in the tick, so that readings come out in the order they went in.
"""

from __future__ import annotations

import math
import struct
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from daemon.errors import StoreError
from sensors.reading import Reading

FORMAT = 1
OWN_TIMES = 1
EXTRAS = 2
ABSENT = -(2**31)
COUNTS_START = 2
_MOST = 2**31 - 1

NUMBER = struct.Struct("<I")
_EXTRA = struct.Struct("<IHqdI")


@dataclass(frozen=True, slots=True)
class Layout:
    """Which channels a packed row has, in which order, each with its step."""

    version: int
    channels: tuple[str, ...]
    steps: tuple[float, ...]
    places: Mapping[str, int]  # channel -> its index in `channels`

    @classmethod
    def of(cls, version: int, columns: Sequence[tuple[str, float]]) -> Layout:
        """The layout of these (channel, step) pairs."""
        channels = tuple(name for name, _ in columns)
        steps = tuple(step for _, step in columns)
        return cls(version, channels, steps, {name: i for i, name in enumerate(channels)})

    @property
    def columns(self) -> tuple[tuple[str, float], ...]:
        return tuple(zip(self.channels, self.steps, strict=True))

    @property
    def counts_end(self) -> int:
        """Offset in bytes of what follows the counts."""
        return COUNTS_START + 4 * len(self.channels)


def pack(layout: Layout, tick_us: int, readings: Sequence[Reading]) -> bytes:
    """The readings of the tick at `tick_us` as one row; StoreError for an unknown channel."""
    width = len(layout.channels)
    counts = [ABSENT] * width
    offsets = [0] * width
    extras: list[bytes] = []
    last = -1
    for place, reading in enumerate(readings):
        index = layout.places.get(reading.channel)
        if index is None:
            raise StoreError(
                f"reading of channel {reading.channel!r}: the database was opened without this "
                "channel; open it with every channel of the site"
            )
        count = _count(reading, layout.steps[index])
        offset = reading.time_us - tick_us
        if count is not None and index > last and abs(offset) <= _MOST:
            counts[index], offsets[index], last = count, offset, index
        else:
            extras.append(packed_extra(place, index, offset, reading.value, reading.fault))
    own_times = any(offsets)
    flags = (OWN_TIMES if own_times else 0) | (EXTRAS if extras else 0)
    parts = [bytes((FORMAT, flags)), struct.pack(f"<{width}i", *counts)]
    if own_times:
        parts.append(struct.pack(f"<{width}i", *offsets))
    if extras:
        parts.append(NUMBER.pack(len(extras)))
    return b"".join(parts + extras)


def packed_extra(place: int, index: int, offset: int, value: float, fault: str) -> bytes:
    """One extra as it stands in a row."""
    told = fault.encode()
    return _EXTRA.pack(place, index, offset, value, len(told)) + told


def unpack(layout: Layout, tick_us: int, row: bytes) -> list[Reading]:
    """The readings that `pack` was given, in their order; StoreError when the row is damaged."""
    check(layout, tick_us, row)
    width = len(layout.channels)
    counts = struct.unpack_from(f"<{width}i", row, COUNTS_START)
    offsets: Sequence[int] = (0,) * width
    if row[1] & OWN_TIMES:
        offsets = struct.unpack_from(f"<{width}i", row, layout.counts_end)
    readings = [
        Reading(channel, count * step, tick_us + offset)
        for channel, step, count, offset in zip(
            layout.channels, layout.steps, counts, offsets, strict=True
        )
        if count != ABSENT
    ]
    # in the order of their places, so each insertion finds what stands before it complete
    for place, reading in extras(layout, tick_us, row):
        readings.insert(place, reading)
    return readings


def extras(
    layout: Layout, tick_us: int, row: bytes, only: int | None = None
) -> Iterator[tuple[int, Reading]]:
    """(place, reading) of each extra of a checked row, in the order of their places.

    With `only`, of the channel at that place of the layout alone.
    """
    if not row[1] & EXTRAS:
        return
    at = layout.counts_end + (4 * len(layout.channels) if row[1] & OWN_TIMES else 0)
    try:
        (number,) = NUMBER.unpack_from(row, at)
        at += NUMBER.size
        for _ in range(number):
            place, index, offset, value, length = _EXTRA.unpack_from(row, at)
            at += _EXTRA.size
            fault = row[at : at + length]
            at += length
            if at > len(row):
                raise _damaged(layout, tick_us, row)
            if only is not None and index != only:
                continue
            yield place, Reading(layout.channels[index], value, tick_us + offset, fault.decode())
    except (struct.error, IndexError, UnicodeDecodeError) as error:
        raise _damaged(layout, tick_us, row) from error


def check(layout: Layout, tick_us: int, row: bytes) -> None:
    """StoreError unless the row has this format and is long enough for its layout."""
    if len(row) >= layout.counts_end and row[0] == FORMAT:
        ends = layout.counts_end + (4 * len(layout.channels) if row[1] & OWN_TIMES else 0)
        if len(row) >= ends:
            return
    raise _damaged(layout, tick_us, row)


def _count(reading: Reading, step: float) -> int | None:
    """The value as a whole number of steps that gives it back to the bit, or None."""
    value = reading.value
    if reading.fault or not math.isfinite(value):
        return None
    steps = value / step
    if not -_MOST <= steps <= _MOST:
        return None
    count = round(steps)
    if count * step != value or (count == 0 and math.copysign(1.0, value) < 0.0):
        return None
    return count


def _damaged(layout: Layout, tick_us: int, row: bytes) -> StoreError:
    return StoreError(
        f"the readings of the tick at {tick_us} us are damaged ({len(row)} bytes that begin with "
        f"{row[:4].hex() or 'nothing'}, expected format {FORMAT} with {len(layout.channels)} "
        "channels): restore a backup of the database"
    )
