"""One database that several threads use: one writer at a time, readers beside it.

Everything that only SQLite has is in `sqlite.py`; everything else speaks to this class.
"""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager

from sqlalchemy import Connection, Engine
from sqlalchemy.exc import SQLAlchemyError

from daemon.errors import StoreError

WRITES = {"dripleg_writes": True}  # execution options of the connection that writes


class Database:
    """An engine with its one writing connection. `explain` turns driver errors into words."""

    def __init__(
        self, engine: Engine, where: str, explain: Callable[[str, SQLAlchemyError], StoreError]
    ) -> None:
        self.engine = engine
        self.where = where
        self._explain = explain
        self._lock = threading.RLock()
        self.closed = False
        with self._in_words():
            self._writer = engine.connect().execution_options(**WRITES)

    @contextmanager
    def write(self) -> Iterator[Connection]:
        """One transaction: committed at the end of the block, undone by any error in it."""
        with self._lock, self._in_words():
            self._refuse_when_closed()
            with self._writer.begin():
                yield self._writer

    @contextmanager
    def read(self) -> Iterator[Connection]:
        """A connection that sees one state of the database throughout the block."""
        with self._in_words():
            self._refuse_when_closed()
            with self.engine.connect() as connection:
                yield connection

    def close(self) -> None:
        """Close every connection. May be called twice."""
        with self._lock:
            if not self.closed:
                self.closed = True
                self._writer.close()
                self.engine.dispose()

    def _refuse_when_closed(self) -> None:
        if self.closed:
            raise StoreError(f"{self.where}: the database was closed")

    @contextmanager
    def _in_words(self) -> Iterator[None]:
        try:
            yield
        except SQLAlchemyError as error:
            raise self._explain(self.where, error) from error
