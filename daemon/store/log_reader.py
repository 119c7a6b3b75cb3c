"""The weekly log's rows read beside a running daemon, which has the database to itself otherwise.

Readers never wait for the writer and it never waits for them: each call sees one committed state.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Self

from daemon.alarms import Transition
from daemon.errors import StoreError
from daemon.foresight import Score
from daemon.hour_figures import DayMembers, DrainCheck, HourFigures
from daemon.journal import Entry
from daemon.store import announcements, entries, log_rows, metas, migrations, sqlite
from daemon.store.database import Database


class LogReader:
    """Reads what the log needs, and writes nothing."""

    def __init__(self, database: Database) -> None:
        self._database = database

    @classmethod
    def open(cls, path: Path) -> Self:
        """Open the database that a daemon has; StoreError when it is another dripleg's."""
        database = sqlite.connect(path)
        with database.read() as connection:
            found, known = migrations.version_of(connection), migrations.MIGRATIONS[-1].version
        if found != known:
            database.close()
            raise StoreError(
                f"{path}: the running daemon's database has version {found}, this dripleg wants "
                f"{known}: start the daemon anew, with this same dripleg"
            )
        return cls(database)

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self._database.close()

    def hour_figures(self, from_us: int, to_us: int) -> Sequence[HourFigures]:
        with self._database.read() as connection:
            return log_rows.hours(connection, from_us, to_us)

    def day_members(self, first: str, last: str) -> Sequence[DayMembers]:
        with self._database.read() as connection:
            return log_rows.days(connection, first, last)

    def drain_checks(self, from_us: int, to_us: int) -> Sequence[DrainCheck]:
        with self._database.read() as connection:
            return log_rows.measured(connection, from_us, to_us)

    def forecast_scores(self, from_us: int, to_us: int) -> Sequence[Score]:
        with self._database.read() as connection:
            return log_rows.scores(connection, from_us, to_us)

    def transitions(
        self, from_us: int, to_us: int, alarms: Sequence[str] | None = None
    ) -> Sequence[Transition]:
        with self._database.read() as connection:
            return announcements.find(connection, from_us, to_us, alarms)

    def entries(
        self, after_seq: int = 0, from_us: int | None = None, to_us: int | None = None
    ) -> Sequence[Entry]:
        with self._database.read() as connection:
            return entries.find(connection, after_seq, from_us, to_us)

    def get_meta(self, name: str) -> str | None:
        with self._database.read() as connection:
            return metas.get(connection, name)
