"""A span of time in a query: `from` and `to`."""

from __future__ import annotations

from fastapi import Query

from api.problems import Point, Problem
from api.quantities import time_us
from api.validation import shown
from daemon.clock import format_rfc3339

FROM = Query(
    alias="from",
    json_schema_extra={"format": "date-time"},
    description="RFC 3339 with an offset, from this time on",
    examples=["2026-12-01T09:00:00Z"],
)
TO = Query(
    json_schema_extra={"format": "date-time"},
    description="RFC 3339 with an offset, up to but not including this time; left out: now",
    examples=["2026-12-01T10:00:00Z"],
)


def span(from_: str | None, to: str | None, now_us: int, length_us: int) -> tuple[int, int]:
    """The two times: now without `to`, `length_us` before it without `from`. Raises Problem."""
    points: list[Point] = []
    end_us = _read("query.to", to, now_us, points)
    start_us = _read("query.from", from_, max(0, end_us - length_us), points)
    if not points and start_us >= end_us:
        remedy = f"it is not before to ({format_rfc3339(end_us)}); give an earlier from"
        points.append(Point("query.from", format_rfc3339(start_us), remedy))
    if points:
        raise Problem("invalid-request", points=points)
    return start_us, end_us


def _read(where: str, text: str | None, otherwise_us: int, points: list[Point]) -> int:
    if text is None:
        return otherwise_us
    try:
        return time_us(text)
    except ValueError as error:
        points.append(Point(where, shown(text), str(error)))
        return otherwise_us
