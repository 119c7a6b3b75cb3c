"""Alarm transitions, and the outbox: what the outside has yet to hear."""

from __future__ import annotations

from collections.abc import Sequence

from sqlalchemy import Connection, delete, func, insert, select

from daemon.alarms import Transition
from daemon.outbox import Message, Waiting
from daemon.store.tables import outbox, transitions


def add(connection: Connection, changes: Sequence[Transition], messages: Sequence[Message]) -> None:
    """Add transitions and messages, except those whose id is a transition's that is stored.

    A replay after a restart gives the same transitions again: neither they nor the events that
    announce them are stored a second time. A message without an id is always added.
    """
    if not changes and not messages:
        return
    ids = {change.id for change in changes} | {message.id for message in messages}
    stored = set(
        connection.execute(select(transitions.c.id).where(transitions.c.id.in_(ids))).scalars()
    )
    new_changes = {change.id: _values(change) for change in changes if change.id not in stored}
    if new_changes:
        connection.execute(insert(transitions), list(new_changes.values()))
    new_messages = [
        {
            "id": message.id,
            "topic": message.topic,
            "payload": message.payload,
            "qos": message.qos,
            "retain": message.retain,
        }
        for message in messages
        if message.id not in stored
    ]
    if new_messages:
        connection.execute(insert(outbox), new_messages)


def find(
    connection: Connection, from_us: int, to_us: int, alarms: Sequence[str] | None = None
) -> Sequence[Transition]:
    """The transitions at or after one time and before another, in order; all, or of some alarms."""
    at = transitions.c.at_us
    statement = (
        select(*transitions.c).where(at >= from_us, at < to_us).order_by(at, transitions.c.number)
    )
    if alarms is not None:
        statement = statement.where(transitions.c.alarm.in_(alarms))
    return [Transition(*row[1:]) for row in connection.execute(statement)]


def pending(connection: Connection, limit: int, after_number: int = 0) -> Sequence[Waiting]:
    """The oldest messages in the outbox beyond that number, at most `limit`, in order."""
    statement = (
        select(outbox).where(outbox.c.number > after_number).order_by(outbox.c.number).limit(limit)
    )
    return [
        Waiting(row.number, Message(row.topic, row.payload, row.qos, row.retain, row.id))
        for row in connection.execute(statement)
    ]


def mark_sent(connection: Connection, numbers: Sequence[int]) -> None:
    """Take messages that the broker has acknowledged out of the outbox."""
    connection.execute(delete(outbox).where(outbox.c.number.in_(numbers)))


def waiting(connection: Connection) -> int:
    """How many messages the outbox holds."""
    return connection.execute(select(func.count()).select_from(outbox)).scalar_one()


def _values(change: Transition) -> dict[str, object]:
    return {
        "id": change.id,
        "at_us": change.at_us,
        "alarm": change.alarm,
        "kind": change.kind,
        "source": change.source,
        "state_before": change.before,
        "state_after": change.after,
        "priority": change.priority,
        "text": change.text,
        "by_whom": change.by,
    }
