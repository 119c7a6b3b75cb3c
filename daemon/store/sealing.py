"""A finished hour's rows as one blob a channel, and back to the same bytes; pure, no database.

A *run* is what is sealed together: ticks that follow one another within one hour, all of one
layout. It becomes

- one blob of its ticks' times, with the readings' own times where they differ from their tick's:
  each such list once, however many channels share it;
- for each channel that said anything, one blob: its counts as differences, which ticks lack one,
  and its extras (see `packing`) as columns.

Blobs are compressed with zlib, whose checksum tells damage. Columns are as `integers` has them.

    of ticks: format 1 (u8) | steps between ticks | number of lists (u16) | us after the tick, each
    of a channel: format 1 (u8) | flags (u8) | which list of own times (u16), 0 for none
      | with flag 1: counts | with flag 2: a bit a tick, set where there is none
      | with flag 4: ticks, places, us after the tick, reasons' numbers of the extras, their values
        (f64 by planes); how many extras of the channel stand before the count, for each tick that
        has both; number of reasons (u16), each its length (u32) and UTF-8
"""

from __future__ import annotations

import struct
import zlib
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from daemon.errors import StoreError
from daemon.store import packing
from daemon.store.columns import Column
from daemon.store.integers import Damaged, Integers, Source, planes, put
from daemon.store.packing import Layout

FORMAT = 1
_COUNTS, _GAPS, _EXTRAS = 1, 2, 4
_TICKS_HEAD = struct.Struct("<B")
_HEAD = struct.Struct("<BBH")
_SHORT = struct.Struct("<H")
_LENGTH = struct.Struct("<I")
_LEVEL = 6


@dataclass(frozen=True, slots=True)
class Sealed:
    """A run as it is stored."""

    ticks: bytes
    channels: Mapping[int, bytes]  # by the channel's place in the layout; the silent ones left out


@dataclass(frozen=True, slots=True)
class _Extras:
    """The extras of one channel, as columns in order of tick and place."""

    ticks: Integers
    places: Integers
    offsets: Integers
    faults: tuple[str, ...]
    values: npt.NDArray[np.float64]
    before: Integers  # of each tick with a count and extras: how many of these stand before it


@dataclass(frozen=True, slots=True)
class _Channel:
    """One channel of a run, taken apart again."""

    counts: Integers  # `packing.ABSENT` where there is none
    own_times: int  # which list, 0 for none
    extras: _Extras | None

    def from_tick(self, first: int) -> _Channel:
        """The same without what stands in earlier ticks."""
        counts, extras = self.counts.copy(), self.extras
        counts[:first] = packing.ABSENT
        if extras is not None:
            both = np.intersect1d(np.flatnonzero(self.counts != packing.ABSENT), extras.ticks)
            kept = int(np.searchsorted(extras.ticks, first))
            extras = _Extras(
                extras.ticks[kept:],
                extras.places[kept:],
                extras.offsets[kept:],
                extras.faults[kept:],
                extras.values[kept:],
                extras.before[int(np.searchsorted(both, first)) :],
            )
        return _Channel(counts, self.own_times, extras)


@dataclass(frozen=True, slots=True)
class Times:
    """The times of a run: of its ticks, and the lists of the readings' own, us after the tick."""

    ticks_us: Integers
    own: tuple[Integers, ...]


def seal(layout: Layout, ticks_us: Sequence[int], rows: Sequence[bytes]) -> Sealed:
    """Seal rows as `packing.pack` made them; StoreError when they would not come back the same."""
    sealed = _sealed(layout, ticks_us, rows)
    times = open_times(ticks_us[0], sealed.ticks)
    if list(unseal(layout, times, sealed.channels)) != list(rows):
        raise StoreError(
            f"the readings of the hour after the tick at {ticks_us[0]} us cannot be packed without "
            "a loss; they stay as they are"
        )
    return sealed


def _sealed(layout: Layout, ticks_us: Sequence[int], rows: Sequence[bytes]) -> Sealed:
    width = len(layout.channels)
    for tick_us, row in zip(ticks_us, rows, strict=True):
        packing.check(layout, tick_us, row)
    start, end = packing.COUNTS_START, layout.counts_end
    counts = np.frombuffer(b"".join([row[start:end] for row in rows]), "<i4").reshape(-1, width)
    none = bytes(4 * width)
    own = b"".join(
        [row[end : end + 4 * width] if row[1] & packing.OWN_TIMES else none for row in rows]
    )
    offsets = np.frombuffer(own, "<i4").reshape(-1, width)
    extras = _extras_by_channel(layout, ticks_us, rows, counts)
    lists: dict[bytes, int] = {}
    channels: dict[int, bytes] = {}
    for index in range(width):
        column, mine = counts[:, index].astype(np.int64), offsets[:, index]
        number = lists.setdefault(mine.tobytes(), len(lists) + 1) if mine.any() else 0
        if (column != packing.ABSENT).any() or index in extras:
            channels[index] = _put_channel(_Channel(column, number, extras.get(index)))
    parts = [_TICKS_HEAD.pack(FORMAT), put(_steps(ticks_us))]
    parts += [_SHORT.pack(len(lists))]
    parts += [put(np.frombuffer(each, "<i4").astype(np.int64)) for each in lists]
    return Sealed(_compressed(parts), channels)


def _steps(ticks_us: Sequence[int]) -> Integers:
    at_us = np.array(ticks_us, np.int64)
    return at_us[1:] - at_us[:-1]


def open_times(first_us: int, blob: bytes) -> Times:
    """The times of a run whose first tick is at `first_us`; StoreError when damaged."""
    with _words(first_us):
        source = Source(_decompressed(blob))
        _check_format(*source.fields(_TICKS_HEAD))
        steps = source.integers()
        ticks_us = first_us + np.concatenate([np.zeros(1, np.int64), np.cumsum(steps)])
        (number,) = source.fields(_SHORT)
        return Times(ticks_us, tuple(source.integers() for _ in range(number)))


def unseal(layout: Layout, times: Times, channels: Mapping[int, bytes]) -> Iterator[bytes]:
    """The rows of a run, as `packing.pack` made them; StoreError when damaged."""
    with _words(int(times.ticks_us[0])):
        number, width = len(times.ticks_us), len(layout.channels)
        counts = np.full((number, width), packing.ABSENT, "<i4")
        offsets = np.zeros((number, width), "<i4")
        extras: dict[int, list[tuple[int, bytes]]] = {}
        for index, blob in channels.items():
            channel = _open_channel(blob, number)
            counts[:, index] = channel.counts
            if channel.own_times:
                offsets[:, index] = times.own[channel.own_times - 1]
            for tick, place, extra in _packed_extras(index, channel.extras):
                extras.setdefault(tick, []).append((place, extra))
        own_times = [bool(each) for each in np.any(offsets != 0, axis=1)]
    for tick in range(number):
        flags = packing.OWN_TIMES if own_times[tick] else 0
        parts = [counts[tick].tobytes(), offsets[tick].tobytes() if own_times[tick] else b""]
        if tick in extras:
            flags |= packing.EXTRAS
            parts.append(packing.NUMBER.pack(len(extras[tick])))
            parts += [extra for _, extra in sorted(extras[tick])]
        yield bytes((packing.FORMAT, flags)) + b"".join(parts)


def open_column(step: float, times: Times, blob: bytes, after_us: int) -> Column:
    """One channel's readings in ticks after a time, in the order of the ticks and within a tick."""
    with _words(int(times.ticks_us[0])):
        channel = _open_channel(blob, len(times.ticks_us))
        passed = int(np.searchsorted(times.ticks_us, after_us, side="right"))
        channel = channel.from_tick(passed) if passed else channel
        at_us = times.ticks_us
        if channel.own_times:
            at_us = at_us + times.own[channel.own_times - 1]
        there = np.flatnonzero(channel.counts != packing.ABSENT)
        column = Column(
            at_us[there], channel.counts[there].astype(np.float64) * step, [""] * len(there)
        )
        extras = channel.extras
        if extras is None:
            return column
        both = np.intersect1d(there, extras.ticks)
        before = np.zeros(len(times.ticks_us), np.int64)
        before[both] = extras.before
        ranks = np.arange(len(extras.ticks)) - np.searchsorted(extras.ticks, extras.ticks)
        # where the count itself stands among the channel's readings of its tick
        places = np.concatenate([2 * before[there], 2 * ranks + 1])
        order = np.lexsort((places, np.concatenate([there, extras.ticks])))
        extra = Column(
            times.ticks_us[extras.ticks] + extras.offsets, extras.values, list(extras.faults)
        )
        return Column.joined([column, extra]).taken(order)


def _extras_by_channel(
    layout: Layout,
    ticks_us: Sequence[int],
    rows: Sequence[bytes],
    counts: npt.NDArray[np.int32],
) -> dict[int, _Extras]:
    found: dict[int, list[tuple[int, int, int, str, float]]] = {}
    before: dict[int, list[int]] = {}
    for tick, (tick_us, row) in enumerate(zip(ticks_us, rows, strict=True)):
        if not row[1] & packing.EXTRAS:
            continue
        order = [(int(each), True) for each in np.flatnonzero(counts[tick] != packing.ABSENT)]
        for place, reading in packing.extras(layout, tick_us, row):
            index = layout.places[reading.channel]
            order.insert(place, (index, False))
            offset = reading.time_us - tick_us
            found.setdefault(index, []).append((tick, place, offset, reading.fault, reading.value))
        for place, (index, counted) in enumerate(order):
            earlier = order[:place].count((index, False))
            if counted and earlier + order[place:].count((index, False)):
                before.setdefault(index, []).append(earlier)
    return {index: _columns(one, before.get(index, ())) for index, one in found.items()}


def _columns(extras: Sequence[tuple[int, int, int, str, float]], before: Sequence[int]) -> _Extras:
    ticks, places, offsets, faults, values = zip(*extras, strict=True)
    numbers = (np.array(each, np.int64) for each in (ticks, places, offsets, before))
    at, place, offset, earlier = numbers
    return _Extras(at, place, offset, tuple(faults), np.array(values, np.float64), earlier)


def _packed_extras(index: int, extras: _Extras | None) -> Iterator[tuple[int, int, bytes]]:
    """(tick, place, bytes as in a row) of each extra of the channel at that place."""
    if extras is None:
        return
    columns = (extras.ticks, extras.places, extras.offsets, extras.values)
    for (tick, place, offset, value), fault in zip(
        zip(*(each.tolist() for each in columns), strict=True), extras.faults, strict=True
    ):
        yield tick, place, packing.packed_extra(place, index, offset, value, fault)


def _put_channel(channel: _Channel) -> bytes:
    there = channel.counts != packing.ABSENT
    flags, parts = 0, []
    if there.any():
        flags |= _COUNTS
        # where there is none, the one before it: a difference of 0 costs next to nothing
        last = np.maximum.accumulate(np.where(there, np.arange(len(there)), -1))
        parts.append(put(channel.counts[np.where(last < 0, int(np.argmax(there)), last)]))
        if not there.all():
            flags |= _GAPS
            parts.append(np.packbits(~there).tobytes())
    extras = channel.extras
    if extras is not None:
        flags |= _EXTRAS
        reasons = {fault: number for number, fault in enumerate(dict.fromkeys(extras.faults))}
        numbers = np.array([reasons[fault] for fault in extras.faults], np.int64)
        parts += [put(each) for each in (extras.ticks, extras.places, extras.offsets, numbers)]
        parts += [planes(extras.values), put(extras.before), _SHORT.pack(len(reasons))]
        parts += [_LENGTH.pack(len(each)) + each for each in map(str.encode, reasons)]
    return _compressed([_HEAD.pack(FORMAT, flags, channel.own_times), *parts])


def _open_channel(blob: bytes, number: int) -> _Channel:
    source = Source(_decompressed(blob))
    form, flags, own_times = source.fields(_HEAD)
    _check_format(form)
    counts = np.full(number, packing.ABSENT, np.int64)
    if flags & _COUNTS:
        counts = source.integers()
        if len(counts) != number:
            raise Damaged(f"{len(counts)} counts for {number} ticks")
    if flags & _GAPS:
        bits = np.frombuffer(source.taken(-(-number // 8)), np.uint8)
        counts[np.unpackbits(bits, count=number).astype(np.bool_)] = packing.ABSENT
    return _Channel(counts, own_times, _open_extras(source) if flags & _EXTRAS else None)


def _open_extras(source: Source) -> _Extras:
    ticks, places, offsets, numbers = (source.integers() for _ in range(4))
    values = source.array("<f8", len(ticks)).astype(np.float64)
    before = source.integers()
    (number,) = source.fields(_SHORT)
    reasons = [source.taken(*source.fields(_LENGTH)).decode() for _ in range(number)]
    faults = tuple(reasons[each] for each in numbers.tolist())
    return _Extras(ticks, places, offsets, faults, values, before)


def _compressed(parts: Sequence[bytes]) -> bytes:
    # Z_FILTERED: zlib's own strategy for small numbers with a random part, such as differences
    pressed = zlib.compressobj(_LEVEL, strategy=zlib.Z_FILTERED)
    return pressed.compress(b"".join(parts)) + pressed.flush()


def _decompressed(blob: bytes) -> bytes:
    return zlib.decompress(blob)


def _check_format(found: int) -> None:
    if found != FORMAT:
        raise Damaged(f"format {found}, expected {FORMAT}")


class _words:  # noqa: N801 # used like a function
    """Turns what damaged bytes raise into words."""

    def __init__(self, first_us: int) -> None:
        self._first_us = first_us

    def __enter__(self) -> None: ...

    def __exit__(self, _kind: object, error: BaseException | None, _trace: object) -> None:
        if isinstance(error, zlib.error | ValueError | IndexError | struct.error):
            raise StoreError(
                f"the readings packed with the tick at {self._first_us} us are damaged ({error}): "
                "restore a backup of the database"
            ) from error
