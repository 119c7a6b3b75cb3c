"""One channel out of many packed rows at once, as arrays."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from daemon.store import packing
from daemon.store.packing import Layout
from sensors.reading import Reading

_NO_TIME = b"\0\0\0\0"


@dataclass(frozen=True, slots=True)
class Column:
    """One channel's readings, in the order of the rows and of the readings within a row."""

    times_us: npt.NDArray[np.int64]
    values: npt.NDArray[np.float64]  # NaN where the reading is bad
    faults: list[str]  # "" where it is good

    @classmethod
    def joined(cls, columns: Sequence[Column]) -> Column:
        """The columns one after the other."""
        if not columns:
            return cls(np.empty(0, np.int64), np.empty(0, np.float64), [])
        return cls(
            np.concatenate([column.times_us for column in columns]),
            np.concatenate([column.values for column in columns]),
            [fault for column in columns for fault in column.faults],
        )

    def taken(self, chosen: npt.NDArray[np.int64]) -> Column:
        """The readings at these indices, in that order."""
        return Column(
            self.times_us[chosen], self.values[chosen], [self.faults[i] for i in chosen.tolist()]
        )


def unpack_column(
    layout: Layout, channel: str, ticks_us: Sequence[int], rows: Sequence[bytes]
) -> Column:
    """The readings of one channel in rows of one layout; StoreError when a row is damaged.

    What stands among a row's counts, nearly everything, is decoded together; extras one by one.
    """
    index = layout.places.get(channel)
    if index is None or not rows:
        return Column.joined(())
    for tick_us, row in zip(ticks_us, rows, strict=True):
        packing.check(layout, tick_us, row)
    start = packing.COUNTS_START + 4 * index
    counts = np.frombuffer(b"".join([row[start : start + 4] for row in rows]), "<i4")
    own = start + 4 * len(layout.channels)
    offsets = [row[own : own + 4] if row[1] & packing.OWN_TIMES else _NO_TIME for row in rows]
    times = np.asarray(ticks_us, np.int64) + np.frombuffer(b"".join(offsets), "<i4")
    column = Column(times, counts * layout.steps[index], [""] * len(rows))
    present = counts != packing.ABSENT
    several = _take_extras(layout, channel, ticks_us, rows, column, present)
    if several:
        return _spread(column, present, several)
    return column if present.all() else column.taken(np.flatnonzero(present))


def _take_extras(
    layout: Layout,
    channel: str,
    ticks_us: Sequence[int],
    rows: Sequence[bytes],
    column: Column,
    present: npt.NDArray[np.bool_],
) -> dict[int, list[Reading]]:
    """Write lone extras of the channel into the column; return the rows with several readings."""
    index = layout.places[channel]
    several: dict[int, list[Reading]] = {}
    for number, row in enumerate(rows):
        if not row[1] & packing.EXTRAS:
            continue
        tick_us = ticks_us[number]
        own = [reading for _, reading in packing.extras(layout, tick_us, row, only=index)]
        if len(own) == 1 and not present[number]:
            column.times_us[number], column.values[number] = own[0].time_us, own[0].value
            column.faults[number] = own[0].fault
            present[number] = True
        elif own:
            everything = packing.unpack(layout, tick_us, row)
            several[number] = [r for r in everything if r.channel == channel]
    return several


def _spread(
    column: Column, present: npt.NDArray[np.bool_], several: Mapping[int, Sequence[Reading]]
) -> Column:
    """The column with each row that has several readings opened into as many places."""
    each = present.astype(np.int64)
    for number, readings in several.items():
        each[number] = len(readings)
    spread = column.taken(np.repeat(np.arange(len(each)), each))
    ends = np.cumsum(each)
    for number, readings in several.items():
        first = int(ends[number]) - len(readings)
        for place, reading in enumerate(readings, first):
            spread.times_us[place], spread.values[place] = reading.time_us, reading.value
            spread.faults[place] = reading.fault
    return spread
