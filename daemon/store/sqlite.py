"""All that only SQLite has: its settings, its lock, its checks, its errors, its backup.

Settings: write-ahead log, so that readers never wait for the writer; `synchronous=FULL`, so that
what a transaction committed survives a power cut (sqlite.org/pragma.html#pragma_synchronous:
with WAL, NORMAL may lose the last transactions); foreign keys, which SQLite leaves off.
"""

from __future__ import annotations

import errno
import fcntl
import os
import sqlite3
from collections.abc import Callable
from contextlib import closing
from pathlib import Path
from typing import Any

from sqlalchemy import URL, Connection, create_engine, event
from sqlalchemy.exc import DBAPIError, SQLAlchemyError

from daemon.errors import InUseError, StoreError
from daemon.store.database import Database

BUSY_MS = 5000
COPY_MARK = "store.copy"  # in the table `meta`
_MOST_FINDINGS = 5
_INCREMENTAL = 2  # what `PRAGMA auto_vacuum` answers
_RESERVE_PAGES = 256  # 1 MB: the running hour's rows come and go
_PAGES_AT_ONCE = 256
_PAGES_A_STEP = 256  # of a backup: 1 MB, which takes a slow card some 0.1 s
_STEPS_A_WORD = 10_000  # of SQLite's virtual machine, between two words about a check


class Lock:
    """Keeps other processes off a database. The system drops it when the process dies, however.

    An advisory lock (flock) on a file beside the database; the file stays, with the number of
    the last process that held it.
    """

    def __init__(self, path: Path) -> None:
        self._path = path.with_name(path.name + ".lock")
        self._descriptor = os.open(self._path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o644)
        try:
            fcntl.flock(self._descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError as error:
            holder = os.read(self._descriptor, 20).decode(errors="replace").strip()
            os.close(self._descriptor)
            if error.errno not in (errno.EAGAIN, errno.EACCES):
                raise
            raise InUseError(
                f"{path}: another dripleg (process {holder or 'unknown'}) is using this database: "
                "stop it first, or give this one another path"
            ) from None
        os.ftruncate(self._descriptor, 0)
        os.write(self._descriptor, f"{os.getpid()}\n".encode())

    def release(self) -> None:
        """Let others have the database. May be called twice."""
        if self._descriptor >= 0:
            os.close(self._descriptor)
            self._descriptor = -1


def lock(path: Path) -> Lock:
    """Take the database at this path for this process, or say in words why that cannot be."""
    if path.is_dir():
        raise StoreError(f"{path}: this is a directory: give the path of a database file")
    try:
        taken = Lock(path)
    except OSError as error:
        raise _unusable(path, error) from error
    if path.exists() and not os.access(path, os.W_OK, effective_ids=True):
        taken.release()
        raise _unusable(path, PermissionError(errno.EACCES, "file cannot be written"))
    return taken


def connect(path: Path) -> Database:
    """The database at this path with the production settings; StoreError when it is none."""
    url = URL.create("sqlite+pysqlite", database=str(path))
    engine = create_engine(url, max_overflow=-1, connect_args={"timeout": BUSY_MS / 1000})
    event.listen(engine, "connect", _settings)
    event.listen(engine, "begin", _begin)
    return Database(engine, str(path), explain)


def check(database: Database) -> None:
    """Read every page (`PRAGMA quick_check`); StoreError with what is damaged."""
    with database.read() as connection:
        rows = connection.exec_driver_sql("PRAGMA quick_check").scalars().all()
    _refuse_damage(database.where, [str(row) for row in rows])


def backup(
    database: Database,
    target: Path,
    copied: Callable[[float], None] = lambda share: None,
    checking: Callable[[], None] = lambda: None,
) -> None:
    """A consistent, checked copy of a database in use; `target` is replaced when it is good.

    SQLite's own backup runs within one reading transaction, so the copy is one moment's state;
    writers go on. `copied` hears how much of it is copied, 0 to 1, and `checking`, from time to
    time, that the copy is being checked.
    """
    source = Path(database.where)
    if target.exists() and source.exists() and target.samefile(source):
        raise StoreError(f"{target}: this is the database itself: give another path for the copy")
    part = target.with_name(target.name + ".part")
    try:
        part.unlink(missing_ok=True)
        with closing(sqlite3.connect(part)) as copy:
            with database.read() as connection:
                # It begins with a look: what is seen then is what is copied, in all the steps.
                connection.exec_driver_sql("SELECT count(*) FROM sqlite_master").scalar_one()
                _raw(connection).backup(
                    copy,
                    pages=_PAGES_A_STEP,
                    progress=lambda _, left, pages: copied(1.0 - left / max(pages, 1)),
                )
            _mark(copy)
            copy.set_progress_handler(checking, _STEPS_A_WORD)
            rows = [str(row) for (row,) in copy.execute("PRAGMA quick_check")]
        _refuse_damage(str(part), rows)
        os.replace(part, target)
    except OSError as error:
        raise _unusable(target, error) from error
    except sqlite3.Error as error:
        raise _in_words(str(target), error) from error
    finally:
        part.unlink(missing_ok=True)


def _mark(copy: sqlite3.Connection) -> None:
    """Write into a copy that it is one, so that the next may take its place."""
    copy.execute("DELETE FROM meta WHERE name = ?", (COPY_MARK,))
    copy.execute("INSERT INTO meta VALUES (?, 'yes')", (COPY_MARK,))
    copy.commit()


def is_copy(connection: sqlite3.Connection) -> bool:
    """Whether this is a copy that `backup` made, and that no daemon has taken into use since."""
    rows = connection.execute("SELECT value FROM meta WHERE name = ?", (COPY_MARK,)).fetchall()
    return rows == [("yes",)]


def give_back(database: Database) -> None:
    """Give pages that stand empty back to the file system, a few at a time, but for a reserve.

    A database that was made before `auto_vacuum` was set keeps its size, and fills those pages.
    """
    while True:
        with database.write() as connection:
            mode = connection.exec_driver_sql("PRAGMA auto_vacuum").scalar_one()
            free = connection.exec_driver_sql("PRAGMA freelist_count").scalar_one()
            if mode != _INCREMENTAL or free <= _RESERVE_PAGES:
                return
            number = min(free - _RESERVE_PAGES, _PAGES_AT_ONCE)
            # it goes on by one page for each row, which the driver's own cursor alone fetches
            _raw(connection).execute(f"PRAGMA incremental_vacuum({number})").fetchall()


def explain(where: str, error: SQLAlchemyError) -> StoreError:
    """A driver's error as what is wrong and what to do."""
    original = error.orig if isinstance(error, DBAPIError) else None
    if isinstance(original, sqlite3.Error):
        return _in_words(where, original)
    return StoreError(f"{where}: {error}")


def _in_words(where: str, error: sqlite3.Error) -> StoreError:
    code = getattr(error, "sqlite_errorcode", 0) & 0xFF  # the primary code
    told = {
        sqlite3.SQLITE_FULL: "no space left for the database: free some space on that disk",
        sqlite3.SQLITE_CORRUPT: "the database is damaged: stop dripleg and restore a backup",
        sqlite3.SQLITE_NOTADB: "this is not a dripleg database: give another path",
        sqlite3.SQLITE_READONLY: "the database cannot be written: check who owns the file and "
        "its directory, and whether the disk went read-only",
        sqlite3.SQLITE_CANTOPEN: "the database cannot be opened: check that its directory exists "
        "and may be written",
        sqlite3.SQLITE_BUSY: f"another program kept the database locked for {BUSY_MS // 1000} s: "
        "close it",
        sqlite3.SQLITE_IOERR: "the disk failed to read or write the database: check the disk or "
        "card, and restore a backup on a good one",
    }
    return StoreError(f"{where}: {told.get(code, 'the database refused')} ({error})")


def _unusable(path: Path, error: OSError) -> StoreError:
    reason = error.strerror or str(error)
    if error.errno == errno.ENOSPC:
        remedy = "free some space on that disk"
    elif not path.parent.is_dir():
        remedy = f"make the directory {path.parent} first"
    else:
        remedy = f"let the user that runs dripleg write to {path.parent} and the files in it"
    return StoreError(f"{path}: the database cannot be written ({reason}): {remedy}")


def _raw(connection: Connection) -> sqlite3.Connection:
    """The driver's own connection, outside any transaction of ours."""
    raw = connection.connection.driver_connection
    assert isinstance(raw, sqlite3.Connection)
    return raw


def _refuse_damage(where: str, findings: list[str]) -> None:
    if findings != ["ok"]:
        shown = "; ".join(findings[:_MOST_FINDINGS])
        raise StoreError(f"{where}: the database is damaged: restore a backup ({shown})")


def _settings(raw: Any, _record: object) -> None:
    raw.isolation_level = None  # transactions are begun by `_begin`, also around CREATE TABLE
    if raw.execute("PRAGMA page_count").fetchone() == (0,):  # it is made now: see `give_back`
        raw.execute("PRAGMA auto_vacuum=INCREMENTAL").close()
    for setting in (
        f"busy_timeout={BUSY_MS}",
        "journal_mode=WAL",
        "synchronous=FULL",
        "foreign_keys=ON",
    ):
        raw.execute(f"PRAGMA {setting}").close()


def _begin(connection: Connection) -> None:
    writes = connection.get_execution_options().get("dripleg_writes")
    # a transaction that will write says so at once: begun as a reader's it could not always go on
    connection.exec_driver_sql("BEGIN IMMEDIATE" if writes else "BEGIN")
