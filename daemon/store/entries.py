"""The journal's rows."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from sqlalchemy import Connection, Select, func, insert, select

from daemon.errors import KeyReusedError
from daemon.journal import (
    Acknowledge,
    Blotter,
    Body,
    Drain,
    Entry,
    Gauge,
    SaltCheck,
    Service,
    Shelve,
    Undo,
    Unshelve,
    body_from_json,
    body_to_json,
)
from daemon.store.tables import journal
from daemon.views import Recorded


def add(connection: Connection, body: Body, at_us: int, written_us: int, key: str) -> Recorded:
    """Add an entry with the next number, or find the one that this key brought before.

    A key stands for its content (`body`), not for its time: whoever sends the same drain again
    without a time gets the first entry with the first time. JournalError when the content differs.
    """
    text = body_to_json(body)
    if key:
        found = connection.execute(select(journal).where(journal.c.idempotency_key == key)).first()
        if found is not None:
            if found.body != text:
                raise KeyReusedError(
                    f"key {key!r} was used before for another entry ({found.body}, now {text}): "
                    "send each new entry with a key of its own"
                )
            return Recorded(_entry(found), repeated=True)
    last = connection.execute(select(func.max(journal.c.seq))).scalar() or 0
    entry = Entry(int(last) + 1, at_us, written_us, body, key)
    connection.execute(
        insert(journal).values(
            seq=entry.seq,
            at_us=at_us,
            written_us=written_us,
            subject=_subject(body),
            body=text,
            idempotency_key=key or None,
        )
    )
    return Recorded(entry, repeated=False)


def find(
    connection: Connection,
    after_seq: int = 0,
    from_us: int | None = None,
    to_us: int | None = None,
    trap: str | None = None,
    every: bool = False,
) -> Sequence[Entry]:
    """Entries in the order they were written; `trap` picks the drains of one trap.

    Those that count, without drains that were undone and the undoing itself, unless `every`.
    """
    statement: Select[Any] = (
        select(journal).where(journal.c.seq > after_seq).order_by(journal.c.seq)
    )
    if from_us is not None:
        statement = statement.where(journal.c.at_us >= from_us)
    if to_us is not None:
        statement = statement.where(journal.c.at_us < to_us)
    if trap is not None:
        statement = statement.where(journal.c.subject == trap)
    entries = [_entry(row) for row in connection.execute(statement)]
    if trap is not None:
        entries = [entry for entry in entries if isinstance(entry.body, Drain)]
    if every or not any(isinstance(entry.body, Drain | Undo) for entry in entries):
        return entries
    undone = undoings(connection, min(entry.seq for entry in entries))
    return [
        entry for entry in entries if entry.seq not in undone and not isinstance(entry.body, Undo)
    ]


def one(connection: Connection, seq: int) -> Entry | None:
    """The entry with that number."""
    found = connection.execute(select(journal).where(journal.c.seq == seq)).first()
    return None if found is None else _entry(found)


def undoings(connection: Connection, after_seq: int = 0) -> Mapping[int, Entry]:
    """The entries that undo a drain, by the drain's number; those written after a number."""
    rows = connection.execute(
        select(journal)
        .where(journal.c.seq > after_seq, journal.c.body.like('%"kind": "undo"%'))
        .order_by(journal.c.seq)
    )
    found: dict[int, Entry] = {}
    for entry in map(_entry, rows):
        if isinstance(entry.body, Undo):
            found.setdefault(entry.body.entry, entry)
    return found


def _subject(body: Body) -> str:
    match body:
        case Acknowledge(alarm=subject) | Service(of=subject):
            return subject
        case Shelve(alarm=subject) | Unshelve(alarm=subject):
            return subject
        case Gauge(outlet=subject) | Blotter(outlet=subject) | SaltCheck(sensor=subject):
            return subject
        case _:
            return body.trap


def _entry(row: Any) -> Entry:
    return Entry(
        row.seq, row.at_us, row.written_us, body_from_json(row.body), row.idempotency_key or ""
    )
