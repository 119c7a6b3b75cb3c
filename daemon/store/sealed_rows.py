"""The rows of finished hours in the database: written in one transaction, read run by run."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from sqlalchemy import Connection, delete, func, insert, select

from daemon.clock import HOUR_US
from daemon.store.columns import unpack_column
from daemon.store.packing import Layout
from daemon.store.rollups import Part, parts_of
from daemon.store.sealing import seal
from daemon.store.tables import channel_hours, sealed_ticks, sealed_values, ticks

_PART = tuple(column for column in channel_hours.c if column.name not in {"channel", "run_us"})


@dataclass(frozen=True, slots=True)
class Run:
    """A sealed run as it stands in the database."""

    first_us: int
    last_us: int
    layout: int
    ticks: bytes
    channels: Mapping[int, bytes]


def seal_oldest(
    connection: Connection, layouts: Mapping[int, Layout], last_us: int, holds_us: int
) -> bool:
    """Seal the oldest run of ticks whose hour is over; whether there was one.

    An hour is over once a tick of a later one is stored: ticks go forward, so none can follow.
    The caller's transaction has all of it or nothing.
    """
    first = connection.execute(
        select(ticks.c.at_us, ticks.c.layout).order_by(ticks.c.at_us).limit(1)
    ).first()
    if first is None or last_us // HOUR_US <= first.at_us // HOUR_US:
        return False
    end_us = (first.at_us // HOUR_US + 1) * HOUR_US
    statement = select(ticks).where(ticks.c.at_us < end_us).order_by(ticks.c.at_us)
    rows = []
    for row in connection.execute(statement):
        if row.layout != first.layout:  # the site's channels changed within the hour
            break
        rows.append(row)
    layout = layouts[first.layout]
    times, packed = [row.at_us for row in rows], [row.packed for row in rows]
    _insert(connection, layout, times, packed, holds_us)
    connection.execute(delete(ticks).where(ticks.c.at_us <= times[-1]))
    return True


def _insert(
    connection: Connection,
    layout: Layout,
    times: Sequence[int],
    packed: Sequence[bytes],
    holds_us: int,
) -> None:
    sealed = seal(layout, times, packed)
    connection.execute(
        insert(sealed_ticks),
        {
            "first_us": times[0],
            "last_us": times[-1],
            "layout": layout.version,
            "packed": sealed.ticks,
        },
    )
    if not sealed.channels:
        return
    connection.execute(
        insert(sealed_values),
        [
            {"first_us": times[0], "position": position, "packed": blob}
            for position, blob in sealed.channels.items()
        ],
    )
    hours = [
        _values(layout.channels[position], times[0], part)
        for position in sealed.channels
        for part in parts_of(
            unpack_column(layout, layout.channels[position], times, packed), holds_us
        )
    ]
    connection.execute(insert(channel_hours), hours)


def _values(channel: str, run_us: int, part: Part) -> dict[str, object]:
    return {
        "channel": channel,
        "hour_us": part.start_us,
        "run_us": run_us,
        "good": part.good,
        "bad": part.bad,
        "least": part.least,
        "greatest": part.greatest,
        "total": part.total,
        "begins_us": part.begins_us,
        "ends_us": part.ends_us,
        "last_value": part.last_value,
        "held_us": part.held_us,
        "held_total": part.held_total,
        "sampled": part.sampled,
    }


def last_tick(connection: Connection) -> int | None:
    """The last tick that is sealed, None before the first: later ones stand in `ticks`."""
    statement = select(sealed_ticks.c.last_us).order_by(sealed_ticks.c.first_us.desc()).limit(1)
    return connection.execute(statement).scalar()


def first_tick(connection: Connection) -> int | None:
    """The first tick that is sealed and still kept."""
    return connection.execute(select(func.min(sealed_ticks.c.first_us))).scalar()


def runs(
    connection: Connection,
    after_us: int,
    until_us: int,
    most: int,
    positions: Mapping[int, int] | None = None,
) -> list[Run]:
    """The oldest sealed runs that reach beyond one time and begin by another, in order.

    With `positions`, by layout, only the blobs of the channel that stands there.
    """
    begins = sealed_ticks.c.first_us
    statement = (
        select(sealed_ticks)
        # a run lies within one hour, so that the key finds those that reach beyond
        .where(begins > after_us - HOUR_US, begins <= until_us, sealed_ticks.c.last_us > after_us)
        .order_by(begins)
        .limit(most)
    )
    found = connection.execute(statement).all()
    if not found:
        return []
    values = select(sealed_values).where(
        sealed_values.c.first_us >= found[0].first_us,
        sealed_values.c.first_us <= found[-1].first_us,
    )
    if positions is not None:
        values = values.where(sealed_values.c.position.in_(set(positions.values())))
    blobs: dict[int, dict[int, bytes]] = {row.first_us: {} for row in found}
    for first_us, position, packed in connection.execute(values):
        blobs[first_us][position] = packed
    return [
        Run(row.first_us, row.last_us, row.layout, row.packed, blobs[row.first_us]) for row in found
    ]


def parts(connection: Connection, channel: str, from_us: int, to_us: int) -> list[Part]:
    """The sealed parts of a channel's hours that begin from a time on and before another."""
    statement = (
        select(*_PART)
        .where(
            channel_hours.c.channel == channel,
            channel_hours.c.hour_us >= from_us,
            channel_hours.c.hour_us < to_us,
        )
        .order_by(channel_hours.c.hour_us, channel_hours.c.run_us)
    )
    return [Part(*row) for row in connection.execute(statement)]


def last_part(connection: Connection, channel: str, before_us: int) -> Part | None:
    """The sealed part of a channel with the latest reading in the hours before a time."""
    mine = channel_hours.c.channel == channel
    hour = connection.execute(
        select(func.max(channel_hours.c.hour_us)).where(mine, channel_hours.c.hour_us < before_us)
    ).scalar()
    if hour is None:
        return None
    statement = (
        select(*_PART)
        .where(mine, channel_hours.c.hour_us == hour)
        .order_by(channel_hours.c.ends_us.desc())
        .limit(1)
    )
    found = connection.execute(statement).first()
    return None if found is None else Part(*found)


def drop(connection: Connection, before_us: int, most: int) -> int:
    """Drop the readings of sealed runs that ended before a time, the oldest `most` runs at once.

    Gives how many runs were dropped. What their hours came to stays.
    """
    oldest = (
        select(sealed_ticks.c.first_us)
        .where(sealed_ticks.c.last_us < before_us)
        .order_by(sealed_ticks.c.first_us)
        .limit(most)
    )
    dropped = connection.execute(oldest).scalars().all()
    if dropped:
        last = dropped[-1]
        connection.execute(delete(sealed_values).where(sealed_values.c.first_us <= last))
        connection.execute(delete(sealed_ticks).where(sealed_ticks.c.first_us <= last))
    return len(dropped)
