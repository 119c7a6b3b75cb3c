"""Checkpoints of the model's state, from which it goes on after a stop, or goes back.

Kept are all of the last eight days and the newest one before those: an entry dated up to eight days
back always has a checkpoint before it, also when the daemon stood still for longer.
"""

from __future__ import annotations

from sqlalchemy import Connection, delete, func, insert, select

from daemon.clock import DAY_US
from daemon.store.tables import checkpoints

KEPT_US = 8 * DAY_US


def save(connection: Connection, at_us: int, state: bytes) -> None:
    """Keep the state of that time, in place of one of the same time; drop those too old."""
    at = checkpoints.c.at_us
    oldest = connection.execute(select(func.max(at)).where(at <= at_us - KEPT_US)).scalar()
    dropped = at == at_us if oldest is None else (at == at_us) | (at < oldest)
    connection.execute(delete(checkpoints).where(dropped))
    connection.execute(insert(checkpoints), {"at_us": at_us, "state": state})


def before(connection: Connection, at_us: int) -> tuple[int, bytes] | None:
    """The time and the state of the newest checkpoint at or before that time."""
    statement = (
        select(checkpoints.c.at_us, checkpoints.c.state)
        .where(checkpoints.c.at_us <= at_us)
        .order_by(checkpoints.c.at_us.desc())
        .limit(1)
    )
    found = connection.execute(statement).first()
    return None if found is None else (found.at_us, found.state)


def drop_after(connection: Connection, at_us: int) -> None:
    """Drop the checkpoints later than that time."""
    connection.execute(delete(checkpoints).where(checkpoints.c.at_us > at_us))
