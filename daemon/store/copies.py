"""Copies of a database that another process may be using, and which files they may replace."""

from __future__ import annotations

import os
import pwd
import sqlite3
from collections.abc import Callable
from contextlib import closing
from pathlib import Path

from daemon.errors import StoreError
from daemon.store import migrations, sqlite
from daemon.store.database import Database


def refuse_unreadable(path: Path) -> None:
    """StoreError where there is no database, or this user may not read it.

    A database that nobody has open is read by writing two small files beside it, which its owner
    may; beside a daemon they are there already.
    """
    if not path.is_file():
        raise StoreError(f"{path}: there is no database: name it with --store")
    beside = path.with_name(path.name + "-shm")
    may_write = all(os.access(each, os.W_OK, effective_ids=True) for each in (path, path.parent))
    if not os.access(path, os.R_OK, effective_ids=True) or not (may_write or beside.exists()):
        owner = path.stat().st_uid
        try:
            name = pwd.getpwuid(owner).pw_name
        except KeyError:
            name = f"#{owner}"
        raise StoreError(
            f"{path}: it belongs to the user {name}, and this one cannot read it while no daemon "
            f"has it: put sudo -u '{name}' before the command"
        )


def beside_daemon(path: Path) -> Database:
    """Connect to a database that a daemon has; StoreError where it is of another version."""
    return connected(
        path,
        lambda found, known: (
            f"the running daemon's database has version {found}, this dripleg wants {known}: start "
            "the daemon anew, with this same dripleg"
        ),
    )


def connected(path: Path, otherwise: Callable[[int, int], str]) -> Database:
    """Connect to a database of this dripleg's version, which stays as it is.

    StoreError for one of another version, in the words that `otherwise` has for the version found
    and the one that is known.
    """
    database = sqlite.connect(path)
    try:
        with database.read() as connection:
            found, known = migrations.version_of(connection), migrations.MIGRATIONS[-1].version
        if found != known:
            raise StoreError(f"{path}: {otherwise(found, known)}")
    except BaseException:
        database.close()
        raise
    return database


def copy(
    source: Path,
    target: Path,
    copied: Callable[[float], None] = lambda share: None,
    checking: Callable[[], None] = lambda: None,
) -> None:
    """Copy the database at `source` to `target`, consistent and checked.

    `copied` and `checking` hear how far it is, as in `sqlite.backup`.

    Only a copy that dripleg made is ever replaced. StoreError, with what to do, for everything
    else that is there, and when there is no database.
    """
    refuse_unreadable(source)
    if target.is_dir():
        raise StoreError(f"{target}: this is a directory: name the copy's file, like shop.backup")
    if target.exists():
        _refuse_to_replace(source, target)
    database = sqlite.connect(source)
    try:
        with database.read() as connection:
            if migrations.version_of(connection) == 0:
                raise StoreError(f"{source}: the database is empty: let the daemon run first")
        sqlite.backup(database, target, copied, checking)
    finally:
        database.close()


def _refuse_to_replace(source: Path, target: Path) -> None:
    if target.samefile(source):
        raise StoreError(f"{target}: this is the database itself: give another path for the copy")
    try:
        with closing(sqlite3.connect(f"{target.absolute().as_uri()}?mode=ro", uri=True)) as found:
            marked = sqlite.is_copy(found)
    except sqlite3.Error:
        marked = False
    if not marked:
        raise StoreError(
            f"{target}: there is a file already that is no copy of a dripleg database: it is left "
            "as it is; give another path"
        )
