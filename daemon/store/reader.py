"""Reads a database that another process may be writing: for exports."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Self

from daemon.alarms import Transition
from daemon.journal import Entry
from daemon.store import announcements, copies, entries
from daemon.store.database import Database
from daemon.store.ticks import TickReader
from sensors.reading import Reading


class StoreReader:
    """What a database holds, page by page as it stands at that moment. Writes nothing."""

    def __init__(self, database: Database) -> None:
        self._database = database
        self._ticks = TickReader(database)

    @classmethod
    def open(cls, path: Path) -> Self:
        """Open the database at this path; StoreError when there is none, or of another version."""
        copies.refuse_unreadable(path)
        database = copies.connected(
            path,
            lambda found, known: (
                f"the database has version {found}, and this dripleg reads version {known}: start "
                "the daemon once with this same dripleg, which brings an older one up to date"
            ),
        )
        try:
            return cls(database)
        except BaseException:
            database.close()
            raise

    def close(self) -> None:
        """Close it. May be called twice."""
        self._database.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    @property
    def first_tick_us(self) -> int | None:
        """The oldest tick whose readings are kept."""
        return self._ticks.first()

    @property
    def last_tick_us(self) -> int | None:
        return self._ticks.last()

    @property
    def reach_us(self) -> int:
        """The furthest that a reading's own time stands from its tick's."""
        return self._ticks.reach_us

    def ticks(self, after_us: int, until_us: int) -> Iterator[tuple[int, list[Reading]]]:
        """(time, readings) of each tick after one time, up to and with another, in order."""
        return self._ticks.stream(after_us, until_us)

    def entries(self, from_us: int, to_us: int) -> tuple[Sequence[Entry], Sequence[Entry]]:
        """The journal's entries of a span: all of them, and those that count (see `undoing`)."""
        with self._database.read() as connection:
            every = entries.find(connection, from_us=from_us, to_us=to_us, every=True)
            return every, entries.find(connection, from_us=from_us, to_us=to_us)

    def transitions(self, from_us: int, to_us: int) -> Sequence[Transition]:
        """The transitions at or after one time and before another, in order."""
        with self._database.read() as connection:
            return announcements.find(connection, from_us, to_us)
