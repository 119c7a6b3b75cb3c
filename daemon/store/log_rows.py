"""What the weekly log is made of: hours, days, measured drains, forecasts and their scores.

After the daemon went back for a late entry, the same hours come again and replace what was there.
"""

from __future__ import annotations

import json
import struct
import zlib
from collections.abc import Sequence
from typing import Any

import numpy as np
from sqlalchemy import Connection, Table, delete, insert, select

from daemon.errors import StoreError
from daemon.foresight import Score
from daemon.hour_figures import DayMembers, DrainCheck, Forecast, HourFigures, Noted
from daemon.moisture.ensemble import Array
from daemon.store.tables import (
    day_members,
    drain_checks,
    forecast_scores,
    forecasts,
    hour_figures,
)
from daemon.views import Interval

_LENGTH = struct.Struct("<I")


def add(connection: Connection, noted: Noted, renewed_us: int | None) -> None:
    """Add what ticks left; with `renewed_us`, in place of all that was noted after that time."""
    if renewed_us is not None:
        for table, at in (
            (drain_checks, drain_checks.c.at_us),
            (forecasts, forecasts.c.made_us),
            (forecast_scores, forecast_scores.c.happened_us),
        ):
            connection.execute(delete(table).where(at > renewed_us))
    _replace(
        connection,
        hour_figures,
        [{"hour_us": each.hour_us, "figures": each.to_json()} for each in noted.hours],
        ("hour_us",),
    )
    _replace(
        connection,
        day_members,
        [{"day": each.day, "packed": _pack(each)} for each in noted.days],
        ("day",),
    )
    _replace(connection, drain_checks, [_check(each) for each in noted.drains], ("seq",))
    _replace(
        connection,
        forecasts,
        [{"made_us": each.made_us, "trap": each.trap, **_times(each)} for each in noted.forecasts],
        ("made_us", "trap"),
    )
    _replace(
        connection,
        forecast_scores,
        [
            {
                "happened_us": each.happened_us,
                "trap": each.trap,
                "made_us": each.made_us,
                **_times(each),
            }
            for each in noted.scores
        ],
        ("happened_us", "trap"),
    )


def hours(connection: Connection, from_us: int, to_us: int) -> Sequence[HourFigures]:
    """The hours that begin at or after one time and before another, in order."""
    at = hour_figures.c.hour_us
    rows = connection.execute(
        select(at, hour_figures.c.figures).where(at >= from_us, at < to_us).order_by(at)
    )
    return [HourFigures.from_json(hour_us, text) for hour_us, text in rows]


def days(connection: Connection, first: str, last: str) -> Sequence[DayMembers]:
    """The local days from one to another, both included, in order."""
    day = day_members.c.day
    rows = connection.execute(
        select(day, day_members.c.packed).where(day >= first, day <= last).order_by(day)
    )
    return [DayMembers(name, _unpack(name, packed)) for name, packed in rows]


def measured(connection: Connection, from_us: int, to_us: int) -> Sequence[DrainCheck]:
    """Measured drains at or after one time and before another, in order."""
    table = drain_checks.c
    rows = connection.execute(
        select(drain_checks)
        .where(table.at_us >= from_us, table.at_us < to_us)
        .order_by(table.at_us, table.seq)
    )
    return [
        DrainCheck(
            row.seq,
            row.at_us,
            row.trap,
            row.measured_kg,
            Interval(row.p05_kg, row.p50_kg, row.p95_kg),
            row.learned,
        )
        for row in rows
    ]


def made(connection: Connection, from_us: int, to_us: int) -> Sequence[Forecast]:
    """Forecasts made at or after one time and before another, in order."""
    at = forecasts.c.made_us
    rows = connection.execute(
        select(forecasts).where(at >= from_us, at < to_us).order_by(at, forecasts.c.trap)
    )
    return [Forecast(r.made_us, r.trap, r.p05_us, r.p50_us, r.p95_us) for r in rows]


def scores(connection: Connection, from_us: int, to_us: int) -> Sequence[Score]:
    """Forecasts that were held against what happened in that time, in order."""
    at = forecast_scores.c.happened_us
    rows = connection.execute(
        select(forecast_scores)
        .where(at >= from_us, at < to_us)
        .order_by(at, forecast_scores.c.trap)
    )
    return [Score(r.trap, r.made_us, r.p05_us, r.p50_us, r.p95_us, r.happened_us) for r in rows]


def _replace(
    connection: Connection, table: Table, rows: Sequence[dict[str, Any]], key: Sequence[str]
) -> None:
    """Insert rows in place of those of the same key; of equal ones among them the last counts."""
    latest = {tuple(row[name] for name in key): row for row in rows}
    for values in latest:
        where = [table.c[name] == value for name, value in zip(key, values, strict=True)]
        connection.execute(delete(table).where(*where))
    if latest:
        connection.execute(insert(table), list(latest.values()))


def _check(check: DrainCheck) -> dict[str, Any]:
    low, middle, high = check.expected_kg.values
    return {
        "seq": check.seq,
        "at_us": check.at_us,
        "trap": check.trap,
        "measured_kg": check.measured_kg,
        "p05_kg": low,
        "p50_kg": middle,
        "p95_kg": high,
        "learned": check.learned,
    }


def _times(each: Forecast | Score) -> dict[str, int]:
    return {"p05_us": each.p05_us, "p50_us": each.p50_us, "p95_us": each.p95_us}


def _pack(day: DayMembers) -> bytes:
    """The names and counts as JSON, then the values as float32: they are sums of estimates."""
    head = json.dumps([[name, values.size] for name, values in day.sums.items()]).encode()
    values = b"".join(values.astype("<f4").tobytes() for values in day.sums.values())
    return zlib.compress(_LENGTH.pack(len(head)) + head + values, 1)


def _unpack(day: str, packed: bytes) -> dict[str, Array]:
    try:
        raw = zlib.decompress(packed)
        (length,) = _LENGTH.unpack_from(raw)
        at, found = _LENGTH.size + length, {}
        for name, count in json.loads(raw[_LENGTH.size : at]):
            found[str(name)] = np.frombuffer(raw, "<f4", count, at).astype(np.float64)
            at += 4 * count
    except (zlib.error, struct.error, ValueError) as error:
        raise StoreError(f"the sums of {day} cannot be read: {error}") from error
    return found
