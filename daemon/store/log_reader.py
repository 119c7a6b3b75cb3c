"""What the weekly log is read from: of the store itself, or beside a running daemon.

Readers never wait for the writer and it never waits for them: each call sees one committed state.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Self

from daemon.alarms import Transition
from daemon.foresight import Score
from daemon.hour_figures import DayMembers, DrainCheck, Forecast, HourFigures
from daemon.journal import Entry
from daemon.store import announcements, copies, entries, log_rows, metas
from daemon.store.database import Database


class LogRows:
    """The rows of a database that the log is made of."""

    def __init__(self, database: Database) -> None:
        self._database = database

    def hour_figures(self, from_us: int, to_us: int) -> Sequence[HourFigures]:
        """The hours that begin at or after one time and before another, in order."""
        with self._database.read() as connection:
            return log_rows.hours(connection, from_us, to_us)

    def day_members(self, first: str, last: str) -> Sequence[DayMembers]:
        """The sums of the local days from one to another ("2026-12-01"), both included."""
        with self._database.read() as connection:
            return log_rows.days(connection, first, last)

    def drain_checks(self, from_us: int, to_us: int) -> Sequence[DrainCheck]:
        """Measured drains beside what was expected, at or after one time and before another."""
        with self._database.read() as connection:
            return log_rows.measured(connection, from_us, to_us)

    def forecasts(self, from_us: int, to_us: int) -> Sequence[Forecast]:
        """Forecasts made at or after one time and before another, in order."""
        with self._database.read() as connection:
            return log_rows.made(connection, from_us, to_us)

    def forecast_scores(self, from_us: int, to_us: int) -> Sequence[Score]:
        """Levels that were reached in that time, with what had been foreseen, in order."""
        with self._database.read() as connection:
            return log_rows.scores(connection, from_us, to_us)

    def transitions(
        self, from_us: int, to_us: int, alarms: Sequence[str] | None = None
    ) -> Sequence[Transition]:
        """The transitions at or after one time and before another, in order; of all alarms, or of
        some."""
        with self._database.read() as connection:
            return announcements.find(connection, from_us, to_us, alarms)

    def entries(
        self,
        after_seq: int = 0,
        from_us: int | None = None,
        to_us: int | None = None,
        trap: str | None = None,
        every: bool = False,
    ) -> Sequence[Entry]:
        """Entries with a greater number, by when they happened (from, up to but not including).

        In the order they were written. `trap` picks the drains of one trap. Those that count,
        without drains that were undone and the undoing itself, unless `every`.
        """
        with self._database.read() as connection:
            return entries.find(connection, after_seq, from_us, to_us, trap, every)

    def get_meta(self, name: str) -> str | None:
        """A named value, None when it was never set."""
        with self._database.read() as connection:
            return metas.get(connection, name)


class LogReader(LogRows):
    """Reads what the log needs beside a running daemon, and writes nothing."""

    @classmethod
    def open(cls, path: Path) -> Self:
        """Open the database that a daemon has; StoreError when it is another dripleg's."""
        return cls(copies.beside_daemon(path))

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self._database.close()
