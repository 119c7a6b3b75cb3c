"""Readings in the database, behind functions that do not show how they lie there.

The ticks of the hour that runs are one packed row each; finished hours are sealed (`sealing`),
oldest first. So all that is sealed is older than all that is not, whenever one looks, and a reader
that goes on from the last tick it saw meets every tick once, whatever was sealed meanwhile.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from itertools import groupby
from operator import itemgetter
from typing import Any

import numpy as np
from sqlalchemy import Connection, func, insert, select

from daemon.clock import DAY_US, HOUR_US, SECOND_US, format_rfc3339
from daemon.errors import StoreError
from daemon.store import metas, sealed_rows
from daemon.store.columns import Column, unpack_column
from daemon.store.database import Database
from daemon.store.layout_rows import layout_for, read_layouts
from daemon.store.packing import Layout, pack, unpack
from daemon.store.rollups import Part, overlapping, parts_of, steps_of
from daemon.store.sealed_rows import Run
from daemon.store.sealing import open_column, open_times, unseal
from daemon.store.tables import ticks
from daemon.views import SeriesOfReadings, StepsOfReadings
from sensors.reading import Channel, Reading

HOLDS_US = 30 * SECOND_US  # a sampled value that falls silent: three periods of the usual 10 s
_STREAMED = 1000  # rows in memory together when each becomes readings
_IN_A_SERIES = 20_000  # rows in memory together when they become arrays
_RUNS_IN_A_SERIES = 200
_DROPPED = 24  # runs in one transaction
_REACH = "readings.reach_us"


class TickReader:
    """Reads ticks, sealed or not. Another process may write meanwhile."""

    def __init__(self, database: Database, holds_us: int = HOLDS_US) -> None:
        self._database = database
        self._holds_us = holds_us
        with database.read() as connection:
            self._layouts = read_layouts(connection)

    @property
    def reach_us(self) -> int:
        """The furthest that a reading's own time stands from its tick's, over all ticks."""
        with self._database.read() as connection:
            return int(metas.get(connection, _REACH) or 0)

    def last(self) -> int | None:
        """The time of the last tick stored, None before the first."""
        with self._database.read() as connection:
            return _last(connection)

    def first(self) -> int | None:
        """The time of the oldest tick that is still stored, None before the first."""
        with self._database.read() as connection:
            sealed = sealed_rows.first_tick(connection)
            if sealed is not None:
                return sealed
            return connection.execute(select(func.min(ticks.c.at_us))).scalar()

    def stream(self, after_us: int, until_us: int) -> Iterator[tuple[int, list[Reading]]]:
        """(time, readings) of each tick after one time, up to and with another, in order."""
        for passed_us, piece in self._pieces(after_us, until_us, 1, _STREAMED):
            if isinstance(piece, Run):
                layout = self._layout_of(piece.layout)
                times = open_times(piece.first_us, piece.ticks)
                rows = unseal(layout, times, piece.channels)
                for tick_us, row in zip(times.ticks_us.tolist(), rows, strict=True):
                    if passed_us < tick_us <= until_us:
                        yield tick_us, unpack(layout, tick_us, row)
            else:
                for tick_us, version, packed in piece:
                    yield tick_us, unpack(self._layout_of(version), tick_us, packed)

    def series(self, channel: str, from_us: int, to_us: int) -> SeriesOfReadings:
        """The readings of a channel whose own times are at or after one time and before another."""
        column = self._between(channel, from_us, to_us)
        values = column.values
        if any(column.faults):  # one that is not believed is kept as it was given, and not shown
            values = np.where([not fault for fault in column.faults], values, math.nan)
        return SeriesOfReadings(channel, column.times_us, values, tuple(column.faults))

    def steps(self, channel: str, from_us: int, to_us: int, step_us: int) -> StepsOfReadings:
        """What a channel comes to in steps from one time on, the last of which reaches another.

        Whole hours that begin with an hour of UTC come from what was reckoned as they were sealed;
        others are reckoned from the readings.
        """
        number = max(-(-(to_us - from_us) // step_us), 0)
        starts_us = from_us + step_us * np.arange(number, dtype=np.int64)
        end_us = from_us + step_us * number
        if step_us % HOUR_US == 0 and from_us % HOUR_US == 0:
            parts = self._hours(channel, from_us, end_us)
        else:
            column = self._between(channel, from_us, end_us)
            parts = list(parts_of(column, self._holds_us, step_us, from_us))
        parts += self._before(channel, from_us)
        return steps_of(channel, parts, starts_us, step_us, self._holds_us, self.last() or 0)

    def _hours(self, channel: str, from_us: int, to_us: int) -> list[Part]:
        """The parts of a channel's hours from one to another."""
        with self._database.read() as connection:
            sealed_us = sealed_rows.last_tick(connection)
            found = sealed_rows.parts(connection, channel, from_us, to_us)
        tail = parts_of(self._unsealed(channel, sealed_us, from_us, to_us), self._holds_us)
        found += [part for part in tail if from_us <= part.start_us < to_us]
        found.sort(key=lambda part: part.start_us)
        hours = [list(group) for _, group in groupby(found, key=lambda part: part.start_us)]
        return [part for hour in hours for part in self._in_order(channel, hour)]

    def _before(self, channel: str, from_us: int) -> list[Part]:
        """The last part of a channel before a time, if any: its value may hold on."""
        hour_us = from_us // HOUR_US * HOUR_US
        begun = list(parts_of(self._between(channel, hour_us, from_us), self._holds_us))
        if begun:
            return begun
        with self._database.read() as connection:
            sealed_us = sealed_rows.last_tick(connection)
            sealed = sealed_rows.last_part(connection, channel, hour_us)
        column = self._unsealed(channel, sealed_us, hour_us - DAY_US, hour_us)
        column = column.taken(np.flatnonzero(column.times_us < hour_us))
        found = [*([] if sealed is None else [sealed]), *parts_of(column, self._holds_us)]
        return [max(found, key=lambda part: part.ends_us)] if found else []

    def _unsealed(self, channel: str, sealed_us: int | None, from_us: int, to_us: int) -> Column:
        """A channel's readings from about a time to another in ticks after `sealed_us`."""
        after_us = from_us - self.reach_us - 1
        if sealed_us is not None:
            after_us = max(after_us, sealed_us)
        return self._column(channel, after_us, to_us + self.reach_us)

    def _in_order(self, channel: str, parts: list[Part]) -> list[Part]:
        """An hour's parts, reckoned again from its readings where they lie in one another."""
        if not overlapping(parts):
            return parts
        start_us = parts[0].start_us
        again = list(parts_of(self._between(channel, start_us, start_us + HOUR_US), self._holds_us))
        readings = sum(part.good + part.bad for part in parts)
        whole = (
            again and again[0].good + again[0].bad >= readings
        )  # else they are not kept any more
        return again if whole else parts

    def _between(self, channel: str, from_us: int, to_us: int) -> Column:
        """A channel's readings by their own times, in order."""
        if from_us >= to_us:
            return Column.joined(())
        reach_us = self.reach_us
        column = self._column(channel, from_us - reach_us - 1, to_us + reach_us)
        inside = (column.times_us >= from_us) & (column.times_us < to_us)
        if not inside.all():
            column = column.taken(np.flatnonzero(inside))
        if np.any(np.diff(column.times_us) < 0):
            column = column.taken(np.argsort(column.times_us, kind="stable"))
        return column

    def _column(self, channel: str, after_us: int, until_us: int) -> Column:
        """A channel's readings in ticks after one time, up to and with another."""
        columns: list[Column] = []
        pieces = self._pieces(after_us, until_us, _RUNS_IN_A_SERIES, _IN_A_SERIES, channel)
        for passed_us, piece in pieces:
            if isinstance(piece, Run):
                column = self._sealed_column(piece, channel, passed_us)
                columns += [] if column is None else [column]
                continue
            for version, rows in groupby(piece, key=itemgetter(1)):
                times, _, packed = zip(*rows, strict=True)
                columns.append(unpack_column(self._layout_of(version), channel, times, packed))
        return Column.joined(columns)

    def _sealed_column(self, run: Run, channel: str, after_us: int) -> Column | None:
        layout = self._layout_of(run.layout)
        place = layout.places.get(channel)
        blob = None if place is None else run.channels.get(place)
        if place is None or blob is None:
            return None
        times = open_times(run.first_us, run.ticks)
        return open_column(layout.steps[place], times, blob, after_us)

    def _pieces(
        self, after_us: int, until_us: int, runs: int, rows: int, channel: str | None = None
    ) -> Iterator[tuple[int, Run | Sequence[Any]]]:
        """Sealed runs, then pages of rows (time, layout, packed), in order, each with a time.

        They hold the ticks after one time up to and with another. A run may begin before and reach
        beyond: of it only what is after the time that stands with it was not met yet. Each page is
        a read of its own: a slow reader that held one open would keep the write-ahead log from
        shrinking.
        """
        while True:
            positions = None if channel is None else self._positions(channel)
            with self._database.read() as connection:
                sealed = sealed_rows.runs(connection, after_us, until_us, runs, positions)
                page = [] if sealed else _page(connection, after_us, until_us, rows)
            for run in sealed:
                yield after_us, run
            if page:
                yield after_us, page
            if not sealed and len(page) < rows:
                return
            after_us = sealed[-1].last_us if sealed else page[-1][0]

    def _positions(self, channel: str) -> dict[int, int]:
        return {
            version: layout.places[channel]
            for version, layout in self._layouts.items()
            if channel in layout.places
        }

    def _layout_of(self, version: int) -> Layout:
        if version not in self._layouts:  # another process opened the database with more channels
            with self._database.read() as connection:
                self._layouts.update(read_layouts(connection))
        return self._layouts[version]


class TickRows(TickReader):
    """Writes ticks as well. The caller brings the transaction it writes in."""

    def __init__(
        self, database: Database, channels: Mapping[str, Channel], holds_us: int = HOLDS_US
    ) -> None:
        super().__init__(database, holds_us)
        with database.write() as connection:
            self._layout = layout_for(connection, self._layouts, channels)
            self._reach_now_us = self._reach_kept_us = int(metas.get(connection, _REACH) or 0)
            self.last_us = _last(connection)
        self._all_sealed_us: int | None = None  # the last tick when nothing was left to seal

    @property
    def reach_us(self) -> int:
        return self._reach_now_us

    def last(self) -> int | None:
        return self.last_us

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
        self._reach_now_us = max(self._reach_now_us, reach)
        if self._reach_now_us > self._reach_kept_us:
            metas.put(connection, _REACH, str(self._reach_now_us))

    def committed(self, tick_us: int) -> None:
        """Remember what `insert` wrote, once its transaction stands."""
        self.last_us = tick_us
        self._reach_kept_us = self._reach_now_us

    def seal_next(self) -> bool:
        """Seal the oldest finished hour that is not, in a transaction; False: there is none."""
        last_us = self.last_us
        if last_us is None or self._nothing_since(last_us):
            return False
        with self._database.write() as connection:
            sealed = sealed_rows.seal_oldest(connection, self._layouts, last_us, self._holds_us)
        if not sealed:
            self._all_sealed_us = last_us
        return sealed

    def drop(self, before_us: int, most: int) -> int:
        """Drop sealed runs that ended before a time, at most so many; gives how many."""
        dropped = 0
        while dropped < most:
            with self._database.write() as connection:
                some = sealed_rows.drop(connection, before_us, min(_DROPPED, most - dropped))
            if not some:
                break
            dropped += some
        return dropped

    def _nothing_since(self, last_us: int) -> bool:
        """Whether no hour has ended since there was nothing to seal: asked without the database."""
        known_us = self._all_sealed_us
        return known_us is not None and known_us // HOUR_US == last_us // HOUR_US


def _page(connection: Connection, after_us: int, until_us: int, size: int) -> Sequence[Any]:
    statement = (
        select(ticks.c.at_us, ticks.c.layout, ticks.c.packed)
        .where(ticks.c.at_us > after_us, ticks.c.at_us <= until_us)
        .order_by(ticks.c.at_us)
        .limit(size)
    )
    return connection.execute(statement).all()


def _last(connection: Connection) -> int | None:
    last: int | None = connection.execute(select(func.max(ticks.c.at_us))).scalar()
    return sealed_rows.last_tick(connection) if last is None else last
