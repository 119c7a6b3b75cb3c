"""The daemon's memory: one object that all its threads share.

What a call has written when it returns survives a kill and a power cut. Writers take turns, and
readers never wait for them. Every call raises StoreError, in words, when the database fails;
nothing of that call is stored then, and it may be tried again.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Self

from daemon.alarms import Transition
from daemon.clock import HOUR_US
from daemon.errors import StoreError
from daemon.hour_figures import NOTHING, Noted
from daemon.journal import Body, Entry
from daemon.keys import ApiKey
from daemon.outbox import Message, Waiting
from daemon.store import (
    announcements,
    checkpoints,
    entries,
    key_rows,
    log_rows,
    metas,
    migrations,
    sqlite,
)
from daemon.store.database import Database
from daemon.store.log_reader import LogRows
from daemon.store.ticks import HOLDS_US, TickRows
from daemon.views import Recorded, SeriesOfReadings, StepsOfReadings
from sensors.reading import Channel, Reading

_OPEN = "store.open"  # "yes" while a process has the database: what it says after a crash


class Store(LogRows):
    """Readings, journal, checkpoints, transitions and outbox of one site."""

    def __init__(
        self, database: Database, lock: sqlite.Lock, ticks: TickRows, last_stop_clean: bool
    ) -> None:
        super().__init__(database)
        self._lock = lock
        self._ticks = ticks
        self.last_stop_clean = last_stop_clean

    @classmethod
    def open(
        cls, url_or_path: str | Path, channels: Mapping[str, Channel], holds_us: int = HOLDS_US
    ) -> Self:
        """Open or make the database, bring it up to date, and keep other processes off it.

        `channels` are the site's, in its order; `holds_us` is how long a sampled value is taken to
        hold when its channel falls silent, in what `steps` gives. After a stop that was not clean
        every page is read and checked first. StoreError when the database cannot be used, with
        what to do.
        """
        path = _path(url_or_path)
        lock = sqlite.lock(path)
        database: Database | None = None
        try:
            database = sqlite.connect(path)
            clean = _was_closed(database)
            if not clean:
                sqlite.check(database)
            migrations.upgrade(database)
            ticks = TickRows(database, channels, holds_us)
            with database.write() as connection:
                metas.put(connection, _OPEN, "yes")
                if metas.get(connection, sqlite.COPY_MARK) == "yes":  # a copy that was put back
                    metas.put(connection, sqlite.COPY_MARK, "no")
        except BaseException:
            if database is not None:
                database.close()
            lock.release()
            raise
        return cls(database, lock, ticks, clean)

    def close(self) -> None:
        """Stop cleanly. May be called twice; every other call after it raises StoreError."""
        if self._database.closed:
            return
        try:
            with self._database.write() as connection:
                metas.put(connection, _OPEN, "no")
        finally:
            self._database.close()  # the last connection folds the write-ahead log into the file
            self._lock.release()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    # --- ticks and readings

    def commit_tick(
        self,
        now_us: int,
        readings: Sequence[Reading],
        transitions: Sequence[Transition] = (),
        messages: Sequence[Message] = (),
        checkpoint: bytes | None = None,
        noted: Noted = NOTHING,
        renewed_us: int | None = None,
    ) -> None:
        """All that one tick leaves, in one transaction: the whole of it is stored, or nothing.

        Transitions stored before, and messages with the id of one, are passed over. `noted` is for
        the weekly log; with `renewed_us` it replaces what was noted after that time.
        """
        with self._database.write() as connection:
            self._ticks.insert(connection, now_us, readings)
            announcements.add(connection, transitions, messages)
            if checkpoint is not None:
                checkpoints.save(connection, now_us, checkpoint)
            if noted or renewed_us is not None:
                log_rows.add(connection, noted, renewed_us)
        self._ticks.committed(now_us)

    @property
    def last_tick_us(self) -> int | None:
        """The time of the last tick stored, None before the first."""
        return self._ticks.last_us

    def ticks(self, after_us: int, until_us: int) -> Iterator[tuple[int, list[Reading]]]:
        """(time, readings) of each tick after one time, up to and with another, in order.

        Readings are as they were given: to the bit, in their order. One that was judged bad has its
        reason, and still the value that its part gave.
        """
        return self._ticks.stream(after_us, until_us)

    def readings(self, channel: str, from_us: int, to_us: int) -> SeriesOfReadings:
        """A channel's readings at or after one time and before another, by their own times.

        A bad one has no value, whatever its part gave.
        """
        return self._ticks.series(channel, from_us, to_us)

    def steps(self, channel: str, from_us: int, to_us: int, step_us: int) -> StepsOfReadings:
        """What a channel comes to in steps from one time on, the last of which reaches another.

        Whole hours that begin at an hour of UTC cost next to nothing: they stand in the database.
        Other steps are reckoned from their readings.
        """
        return self._ticks.steps(channel, from_us, to_us, step_us)

    def hours(self, channel: str, from_us: int, to_us: int) -> StepsOfReadings:
        """The hours of UTC of a channel that begin at or after one time and before another."""
        from_us, to_us = (-(-each_us // HOUR_US) * HOUR_US for each_us in (from_us, to_us))
        return self._ticks.steps(channel, from_us, to_us, HOUR_US)

    def seal_next(self) -> bool:
        """Pack the oldest finished hour that is not packed yet; False when there is none.

        One short transaction, which a tick of another thread may have to wait for. Readings come
        out as before.
        """
        return self._ticks.seal_next()

    def drop_readings(self, before_us: int, most_hours: int) -> int:
        """Drop packed hours of readings that ended before a time, at most so many of the oldest.

        Gives how many were dropped. What they came to by the hour (`hours`) stays, as does all that
        is not a reading. Space is given back.
        """
        dropped = self._ticks.drop(before_us, most_hours)
        sqlite.give_back(self._database)
        return dropped

    # --- journal

    def add_entry(self, body: Body, at_us: int, written_us: int, key: str = "") -> Recorded:
        """Commit a journal entry; numbers grow by one.

        The same non-empty key with the same body gives the first entry again, whatever its time;
        with another body JournalError.
        """
        with self._database.write() as connection:
            return entries.add(connection, body, at_us, written_us, key)

    def entry(self, seq: int) -> Entry | None:
        """The entry with that number."""
        with self._database.read() as connection:
            return entries.one(connection, seq)

    def undoings(self) -> Mapping[int, Entry]:
        """The entries that undo a drain, by the drain's number."""
        with self._database.read() as connection:
            return entries.undoings(connection)

    # --- checkpoints

    def save_checkpoint(self, at_us: int, state: bytes) -> None:
        """Keep the model's state of that time; a tick can bring one along instead."""
        with self._database.write() as connection:
            checkpoints.save(connection, at_us, state)

    def checkpoint_before(self, at_us: int) -> tuple[int, bytes] | None:
        """The newest checkpoint at or before that time: its time and state."""
        with self._database.read() as connection:
            return checkpoints.before(connection, at_us)

    def drop_checkpoints_after(self, at_us: int) -> None:
        """Drop the checkpoints later than that time, which a late entry made wrong."""
        with self._database.write() as connection:
            checkpoints.drop_after(connection, at_us)

    # --- transitions and outbox

    def pending(self, limit: int, after_number: int = 0) -> Sequence[Waiting]:
        """The oldest messages of the outbox, at most `limit`, in order."""
        with self._database.read() as connection:
            return announcements.pending(connection, limit, after_number)

    def mark_sent(self, numbers: Sequence[int]) -> None:
        """Take messages out of the outbox that the broker has acknowledged."""
        with self._database.write() as connection:
            announcements.mark_sent(connection, numbers)

    def outbox_waiting(self) -> int:
        """How many messages wait in the outbox."""
        with self._database.read() as connection:
            return announcements.waiting(connection)

    # --- keys (another process may add and end them: see `daemon/keys_store.py`)

    def find_key(self, key_id: str) -> tuple[ApiKey, bytes] | None:
        """The key of that id with its secret's digest; revoked ones too."""
        with self._database.read() as connection:
            return key_rows.find(connection, key_id)

    def key_used(self, key_id: str, at_us: int) -> None:
        """Note when a key was used last."""
        with self._database.write() as connection:
            key_rows.used(connection, key_id, at_us)

    # --- the weekly log

    def announce(self, messages: Sequence[Message], name: str, value: str) -> None:
        """Hand messages to the outbox and set a named value, in one transaction."""
        with self._database.write() as connection:
            announcements.add(connection, (), messages)
            metas.put(connection, name, value)

    # --- the rest

    def set_meta(self, name: str, value: str) -> None:
        """Set a named value. Names that begin with `store.` or `readings.` are the store's own."""
        with self._database.write() as connection:
            metas.put(connection, name, value)

    def backup(self, path: str | Path) -> None:
        """Write a consistent copy, checked, in one file; the daemon goes on meanwhile."""
        sqlite.backup(self._database, Path(path))


def _path(url_or_path: str | Path) -> Path:
    """The path of an SQLite file, from a path or an `sqlite:///` URL."""
    text = str(url_or_path)
    if "://" not in text:
        return Path(text)
    scheme, _, rest = text.partition("://")
    if scheme != "sqlite" or not rest.startswith("/") or rest == "/":
        raise StoreError(
            f"{text}: only SQLite can be used: give the path of a file, or sqlite:///PATH"
        )
    return Path(rest[1:])


def _was_closed(database: Database) -> bool:
    """Whether the last process that had the database closed it; so for a new one."""
    with database.read() as connection:
        if migrations.version_of(connection) == 0:
            return True
        return metas.get(connection, _OPEN) != "yes"
