"""The keys in a site's database, also while a daemon has it: for `dripleg key`.

A daemon keeps other processes off its database, since two must not write one record. Keys are apart
from the record: each command is one transaction, and the daemon looks a key up for every request.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from contextlib import suppress
from pathlib import Path
from typing import Self

from daemon.errors import InUseError
from daemon.keys import ApiKey, KeyRefused
from daemon.store import copies, key_rows
from daemon.store.database import Database
from daemon.store.store import Store
from sensors.reading import Channel


class KeyStore:
    """The keys of one database."""

    def __init__(self, database: Database) -> None:
        self._database = database

    @classmethod
    def open(cls, path: Path, channels: Mapping[str, Channel]) -> Self:
        """Open the keys of the database at this path, made or brought up to date where no daemon
        has it. StoreError when that cannot be."""
        with suppress(InUseError):  # a daemon that has it has brought it up to date
            Store.open(path, channels).close()
        return cls(copies.beside_daemon(path))

    def add(self, key: ApiKey, digest: bytes) -> None:
        """Keep a new key."""
        with self._database.write() as connection:
            key_rows.add(connection, key, digest)

    def every(self) -> Sequence[ApiKey]:
        """All keys in the order in which they were made, revoked ones too."""
        with self._database.read() as connection:
            return key_rows.every(connection)

    def revoke(self, which: str, at_us: int) -> ApiKey:
        """End a key, by its id or by its name where only one has it; KeyRefused otherwise."""
        with self._database.write() as connection:
            keys = key_rows.every(connection)
            standing = [key for key in keys if key.revoked_us is None]
            named = [key for key in standing if which in (key.id, key.name)]
            if len(named) != 1:
                raise KeyRefused(_why_not(which, named, keys))
            key_rows.revoke(connection, named[0].id, at_us)
        return named[0]

    def close(self) -> None:
        self._database.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()


def _why_not(which: str, named: Sequence[ApiKey], keys: Sequence[ApiKey]) -> str:
    if len(named) > 1:
        ids = ", ".join(key.id for key in named)
        return f'{len(named)} keys are for "{which}": say which by its id ({ids})'
    if any(which in (key.id, key.name) for key in keys):
        return f'the key "{which}" was revoked before'
    known = ", ".join(f"{key.id} ({key.name})" for key in keys if key.revoked_us is None) or "none"
    return f'there is no key "{which}"; those that open the API are: {known}'
