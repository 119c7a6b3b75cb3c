"""Reads the `[hours]` table: when the shop works."""

from __future__ import annotations

import datetime
import re

from daemon.site.notes import Notes, written
from daemon.site.table import Table
from daemon.site.types import DAY_NAMES, Hours

HOURS_KEYS = (*DAY_NAMES, "holidays")
DAY_MINUTES = 24 * 60
ALWAYS_OPEN = Hours(spans=((),) * 7, holidays=frozenset(), always_open=True)

_SPAN = re.compile(r"(\d{1,2}):(\d{2})\s*(?:-|\u2013|to)\s*(\d{1,2}):(\d{2})\Z")
_DAY = re.compile(r"\d{4}-\d{2}-\d{2}\Z")

Span = tuple[int, int]


def read_hours(notes: Notes, raw: object) -> Hours:
    """The shop's hours; without a table it is always open."""
    if raw is None:
        notes.default("hours", "", "always open", "no [hours] table")
        return ALWAYS_OPEN
    table = Table(notes, "hours", raw, HOURS_KEYS)
    closed: tuple[Span, ...] = ()
    no_days: frozenset[str] = frozenset()
    spans = tuple(table.read(day, _spans, closed) for day in DAY_NAMES)
    holidays = table.read("holidays", _holidays, no_days)
    if not any(spans) and table.ok(*HOURS_KEYS):
        notes.problem(
            "hours",
            "",
            None,
            'names no time at which the shop works; write e.g. mon = ["08:00-17:00"], '
            "or leave the table out for a shop that is always open",
        )
    return Hours(spans=spans, holidays=holidays, always_open=False)


def _spans(raw: object) -> tuple[Span, ...]:
    if isinstance(raw, str):
        raw = [raw]
    if not isinstance(raw, list):
        raise ValueError('must be a list of times, like ["08:00-12:00", "13:00-17:30"]')
    spans = tuple(_span(each) for each in raw)
    for (_, closes), (opens, _) in zip(sorted(spans), sorted(spans)[1:], strict=False):
        if opens < closes:
            raise ValueError(
                f"the times overlap at {_clock(opens)}; let one end before the next begins"
            )
    return tuple(sorted(spans))


def _span(raw: object) -> Span:
    match = _SPAN.match(raw.strip()) if isinstance(raw, str) else None
    if match is None:
        raise ValueError(f'{written(raw)} is no span of time; write it like "08:00-12:00"')
    hour, minute, end_hour, end_minute = (int(part) for part in match.groups())
    opens, closes = hour * 60 + minute, end_hour * 60 + end_minute
    if minute > 59 or end_minute > 59 or opens >= DAY_MINUTES or closes > DAY_MINUTES:
        raise ValueError(f"{written(raw)}: there is no such time; a day ends at 24:00")
    if closes <= opens:
        raise ValueError(
            f"{written(raw)} ends before it begins; write a night as two days' times, "
            f'"{_clock(opens)}-24:00" and the next day "00:00-{_clock(closes)}"'
        )
    return opens, closes


def _clock(minutes: int) -> str:
    return f"{minutes // 60:02d}:{minutes % 60:02d}"


def _holidays(raw: object) -> frozenset[str]:
    if not isinstance(raw, list):
        raise ValueError('must be a list of days, like ["2026-12-25"]')
    return frozenset(_day(each) for each in raw)


def _day(raw: object) -> str:
    if isinstance(raw, datetime.date) and not isinstance(raw, datetime.datetime):
        return raw.isoformat()
    if not isinstance(raw, str) or not _DAY.match(raw):
        raise ValueError(f'{written(raw)} is no day; write it like "2026-12-25"')
    try:
        return datetime.date.fromisoformat(raw).isoformat()
    except ValueError:
        raise ValueError(f"{written(raw)}: there is no such day in the calendar") from None
