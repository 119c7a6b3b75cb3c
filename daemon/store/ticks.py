"""Readings in the database: one packed row a tick now, behind functions that do not show it.

Later, finished hours are sealed into one row a channel; `TickRows.stream` and `TickRows.series`
are where those rows will be read too.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from itertools import groupby
from operator import itemgetter
from typing import Any

import numpy as np
from sqlalchemy import Connection, func, insert, select

from daemon.clock import format_rfc3339
from daemon.errors import StoreError
from daemon.store import metas
from daemon.store.columns import Column, unpack_column
from daemon.store.database import Database
from daemon.store.packing import Layout, pack, unpack
from daemon.store.tables import layout_channels, layouts, ticks
from daemon.views import SeriesOfReadings
from sensors.reading import Channel, Reading

_STREAMED = 1000  # rows in memory together when each becomes readings
_IN_A_SERIES = 20_000  # rows in memory together when they become arrays
_REACH = "readings.reach_us"


class TickRows:
    """The ticks' rows and their layouts. The caller brings the transaction it writes in."""

    def __init__(self, database: Database, channels: Mapping[str, Channel]) -> None:
        self._database = database
        with database.write() as connection:
            self._layouts = _layouts(connection)
            self._layout = _layout_for(connection, self._layouts, channels)
            # the furthest that a reading's own time stands from its tick's, over all ticks
            self._reach_us = self._reach_kept_us = int(metas.get(connection, _REACH) or 0)
            self.last_us: int | None = connection.execute(select(func.max(ticks.c.at_us))).scalar()

    def insert(self, connection: Connection, tick_us: int, readings: Sequence[Reading]) -> None:
        """Add a tick's row; StoreError when it is not after the last one."""
        if self.last_us is not None and tick_us <= self.last_us:
            raise StoreError(
                f"tick at {format_rfc3339(tick_us)}: the last one stored is at "
                f"{format_rfc3339(self.last_us)}, and ticks go forward only; if the clock was set "
                "back, wait until it has passed that time"
            )
        packed = pack(self._layout, tick_us, readings)
        connection.execute(
            insert(ticks), {"at_us": tick_us, "layout": self._layout.version, "packed": packed}
        )
        reach = max((abs(reading.time_us - tick_us) for reading in readings), default=0)
        self._reach_us = max(self._reach_us, reach)
        if self._reach_us > self._reach_kept_us:
            metas.put(connection, _REACH, str(self._reach_us))

    def committed(self, tick_us: int) -> None:
        """Remember what `insert` wrote, once its transaction stands."""
        self.last_us = tick_us
        self._reach_kept_us = self._reach_us

    def stream(self, after_us: int, until_us: int) -> Iterator[tuple[int, list[Reading]]]:
        """(time, readings) of each tick after one time, up to and with another, in order."""
        for page in self._pages(after_us, until_us, _STREAMED):
            for tick_us, version, packed in page:
                yield tick_us, unpack(self._layout_of(version), tick_us, packed)

    def series(self, channel: str, from_us: int, to_us: int) -> SeriesOfReadings:
        """The readings of a channel whose own times are at or after one time and before another."""
        after, until = from_us - self._reach_us - 1, to_us + self._reach_us
        columns: list[Column] = []
        for page in self._pages(after, until, _IN_A_SERIES):
            for version, rows in groupby(page, key=itemgetter(1)):
                times, _, packed = zip(*rows, strict=True)
                columns.append(unpack_column(self._layout_of(version), channel, times, packed))
        column = Column.joined(columns)
        inside = (column.times_us >= from_us) & (column.times_us < to_us)
        if not inside.all():
            column = column.taken(np.flatnonzero(inside))
        if np.any(np.diff(column.times_us) < 0):
            column = column.taken(np.argsort(column.times_us, kind="stable"))
        values = column.values
        if any(column.faults):  # one that is not believed is kept as it was given, and not shown
            values = np.where([not fault for fault in column.faults], values, math.nan)
        return SeriesOfReadings(channel, column.times_us, values, tuple(column.faults))

    def _pages(self, after_us: int, until_us: int, size: int) -> Iterator[Sequence[Any]]:
        """Rows (time, layout, packed) after one time, up to and with another, in pages.

        Each page is a read of its own: a slow reader that held one open would keep the
        write-ahead log from shrinking.
        """
        full = True
        while full:
            statement = (
                select(ticks.c.at_us, ticks.c.layout, ticks.c.packed)
                .where(ticks.c.at_us > after_us, ticks.c.at_us <= until_us)
                .order_by(ticks.c.at_us)
                .limit(size)
            )
            with self._database.read() as connection:
                page = connection.execute(statement).all()
            if page:
                yield page
                after_us = page[-1][0]
            full = len(page) == size

    def _layout_of(self, version: int) -> Layout:
        return self._layouts[version]


def _layouts(connection: Connection) -> dict[int, Layout]:
    """Every layout in the database, by its version."""
    columns: dict[int, list[tuple[str, float]]] = {
        version: [] for version in connection.execute(select(layouts.c.layout)).scalars()
    }
    rows = select(layout_channels).order_by(layout_channels.c.layout, layout_channels.c.position)
    for version, _, channel, step in connection.execute(rows):
        columns[version].append((channel, step))
    return {version: Layout.of(version, pairs) for version, pairs in columns.items()}


def _layout_for(
    connection: Connection, known: dict[int, Layout], channels: Mapping[str, Channel]
) -> Layout:
    """The layout of these channels: the newest one when it is the same, else a new one."""
    columns = tuple((channel.name, channel.step) for channel in channels.values())
    for name, step in columns:
        if not 0.0 < step < math.inf:
            raise StoreError(f"channel {name!r} has the step {step:g}: it must be above 0")
    newest = max(known, default=0)
    if known and known[newest].columns == columns:
        return known[newest]
    layout = known[newest + 1] = Layout.of(newest + 1, columns)
    connection.execute(insert(layouts).values(layout=layout.version))
    for position, (name, step) in enumerate(columns):
        connection.execute(
            insert(layout_channels).values(
                layout=layout.version, position=position, channel=name, step=step
            )
        )
    return layout
