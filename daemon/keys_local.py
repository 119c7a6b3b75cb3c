"""The key of the machine itself: for `dripleg drained` and `dripleg check` beside a daemon.

An API that others can reach asks everybody for a key, also whoever comes from this machine: behind
a program that passes requests on, all of them would seem to. So a daemon makes a key of its own at
each start, keeps it in memory, and writes it into a file beside its database that only its own user
can read. Whoever can read that could write the database as well.
"""

from __future__ import annotations

import os
from pathlib import Path

from daemon.errors import StoreError
from daemon.site.types import Site


def key_file(store_path: Path) -> Path:
    """Where the key of the daemon with that database is."""
    return store_path.with_name(store_path.name + ".key")


def usual_store(site: Site) -> Path:
    """The database of a site, unless another was named: beside the site file."""
    return Path(site.path).resolve().with_name(f"{site.id}.db")


def write_key(store_path: Path, key: str) -> None:
    """Leave the key for commands on this machine. StoreError when it cannot be written."""
    path = key_file(store_path)
    try:
        path.unlink(missing_ok=True)  # so that the new one has the right mode and owner
        descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL | os.O_CLOEXEC, 0o600)
        with open(descriptor, "w", encoding="ascii") as file:
            file.write(f"{key}\n")
    except OSError as error:
        raise StoreError(
            f"{path}: the key for commands on this machine cannot be written "
            f"({error.strerror}): let the user that runs dripleg write to {path.parent}"
        ) from error


def read_key(store_path: Path) -> str:
    """The running daemon's key; "" where there is none. StoreError when it may not be read."""
    path = key_file(store_path)
    try:
        return path.read_text(encoding="ascii").strip()
    except FileNotFoundError:
        return ""
    except (OSError, UnicodeDecodeError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise StoreError(
            f"{path}: the daemon's key for commands on this machine cannot be read ({reason}): "
            "run this as the user that runs the daemon"
        ) from error


def remove_key(store_path: Path) -> None:
    """At a stop. A file that stays opens nothing: the next daemon makes another key."""
    key_file(store_path).unlink(missing_ok=True)
