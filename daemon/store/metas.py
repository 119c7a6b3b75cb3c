"""Named values that are one of a kind: the grid's origin, whether the last stop was clean."""

from __future__ import annotations

from sqlalchemy import Connection, insert, select, update

from daemon.store.tables import meta


def get(connection: Connection, name: str) -> str | None:
    """The value of that name, None when it was never put."""
    return connection.execute(select(meta.c.value).where(meta.c.name == name)).scalar()


def put(connection: Connection, name: str, value: str) -> None:
    """Set the value of that name."""
    changed = connection.execute(update(meta).where(meta.c.name == name).values(value=value))
    if not changed.rowcount:
        connection.execute(insert(meta).values(name=name, value=value))
