"""The rows of the keys: everything but the secrets."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from sqlalchemy import Connection, insert, select, update

from daemon.keys import SCOPES, ApiKey
from daemon.store.tables import api_keys


def add(connection: Connection, key: ApiKey, digest: bytes) -> None:
    """A new key."""
    connection.execute(
        insert(api_keys).values(
            id=key.id,
            digest=digest,
            name=key.name,
            may=",".join(scope for scope in SCOPES if scope in key.may),
            made_us=key.made_us,
            used_us=key.used_us,
            revoked_us=key.revoked_us,
        )
    )


def find(connection: Connection, key_id: str) -> tuple[ApiKey, bytes] | None:
    """The key of that id with its digest; revoked ones too."""
    row = connection.execute(select(api_keys).where(api_keys.c.id == key_id)).first()
    return None if row is None else (_key(row), bytes(row.digest))


def every(connection: Connection) -> Sequence[ApiKey]:
    """All keys in the order in which they were made, revoked ones too."""
    statement = select(api_keys).order_by(api_keys.c.made_us, api_keys.c.id)
    return [_key(row) for row in connection.execute(statement)]


def used(connection: Connection, key_id: str, at_us: int) -> None:
    """Note when a key was used last."""
    connection.execute(update(api_keys).where(api_keys.c.id == key_id).values(used_us=at_us))


def revoke(connection: Connection, key_id: str, at_us: int) -> None:
    """End a key; the row stays, so that whoever still has it is told what happened."""
    connection.execute(update(api_keys).where(api_keys.c.id == key_id).values(revoked_us=at_us))


def _key(row: Any) -> ApiKey:
    # a scope that a later version knew is not one here
    may = frozenset(scope for scope in SCOPES if scope in row.may.split(","))
    return ApiKey(row.id, row.name, may, row.made_us, row.used_us, row.revoked_us)
