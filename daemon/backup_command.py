"""`dripleg backup`: a consistent, checked copy of the database, also while a daemon runs."""

from __future__ import annotations

from pathlib import Path
from typing import TextIO

from daemon.clock import Clock, format_rfc3339
from daemon.errors import StoreError
from daemon.progress import Progress
from daemon.site.types import Site
from daemon.store import copies
from daemon.store.reader import StoreReader


def make_backup(site: Site, target: Path, store_path: Path, stream: TextIO, clock: Clock) -> str:
    """Copy the database; what to say about it. StoreError when that cannot be.

    Where `stream` is a terminal it is told there how far that is, unless it is done at once.
    """
    with _Told(stream, clock) as told:
        copies.copy(store_path, target, told.copied, told.checking)
    try:
        with StoreReader.open(target) as reader:
            last_us = reader.last_tick_us
    except StoreError:  # of another version, which a copy may well be
        last_us = None
    until = "" if last_us is None else f", up to {format_rfc3339(last_us)}"
    size_mb = target.stat().st_size / 1e6
    return f"{site.name}: copied to {target} and checked{until} ({size_mb:.1f} MB)"


class _Told:
    """Says how far a backup is: how much is copied, then that the copy is being checked."""

    def __init__(self, stream: TextIO, clock: Clock) -> None:
        self._stream, self._clock = stream, clock
        self._line, self._copies = Progress(stream, clock, "copying"), True

    def __enter__(self) -> _Told:
        return self

    def __exit__(self, *error: object) -> None:
        self._line.end()

    def copied(self, share: float) -> None:
        """So much of the database is copied."""
        self._line.at(share)

    def checking(self) -> None:
        """All of it is, and is being read again."""
        if self._copies:
            self._line.end()
            self._line, self._copies = Progress(self._stream, self._clock, "checking"), False
        self._line.at()
