"""When the shop is open, and when its working days begin and end. Pure; times in microseconds UTC.

A working day lasts from its first opening to its last closing; what runs past midnight
("22:00-24:00", then "00:00-06:00") belongs to the day on which it began. A shop that is always
open works every calendar day, from local midnight to local midnight. Where clocks go forward, a
time that is skipped means the moment of the change; where they go back, a shop opens at the first
and closes at the second of two equal times.
"""

from __future__ import annotations

from collections.abc import Iterator
from datetime import UTC, date, datetime, timedelta
from functools import lru_cache
from itertools import pairwise
from zoneinfo import ZoneInfo

from daemon.clock import DAY_US, SECOND_US, to_datetime
from daemon.site.types import Hours

DAY_MINUTES = 24 * 60
_DAYS_AHEAD = 800  # a shop closed for longer has no next shift

Span = tuple[int, int]


def is_open(hours: Hours, timezone: str, at_us: int) -> bool:
    """Whether the shop is open at a time; the closing minute itself is closed."""
    if hours.always_open:
        return True
    today = local_day(timezone, at_us)
    return any(
        opens_us <= at_us < closes_us
        for day in (today - timedelta(1), today, today + timedelta(1))
        for opens_us, closes_us in _openings(hours, timezone, day)
    )


def open_us(hours: Hours, timezone: str, from_us: int, to_us: int) -> int:
    """How long the shop is open between two times."""
    if to_us <= from_us:
        return 0
    if hours.always_open:
        return to_us - from_us
    day, last = local_day(timezone, from_us) - timedelta(1), local_day(timezone, to_us)
    total = reached_us = 0
    while day <= last:
        for opens_us, closes_us in _openings(hours, timezone, day):
            begins_us = max(opens_us, from_us, reached_us)
            ends_us = min(closes_us, to_us)
            total += max(ends_us - begins_us, 0)
            reached_us = max(reached_us, ends_us)
        day += timedelta(1)
    return total


def is_working_day(hours: Hours, day: date) -> bool:
    """Whether a shift begins on this calendar day."""
    return hours.always_open or bool(_own_spans(hours, day))


@lru_cache(maxsize=256)
def working_day(hours: Hours, timezone: str, day: date) -> tuple[int, int] | None:
    """The first opening and the last closing of a calendar day's work; None on a day off."""
    if hours.always_open:
        return _instant(timezone, day, 0, closing=False), _instant(
            timezone, day, DAY_MINUTES, closing=False
        )
    own = _own_spans(hours, day)
    if not own:
        return None
    begins_us = _instant(timezone, day, own[0][0], closing=False)
    if _runs_on(hours, day):
        after = day + timedelta(1)
        ends_us = _instant(timezone, after, _spans(hours, after)[0][1], closing=True)
    else:
        ends_us = _instant(timezone, day, own[-1][1], closing=True)
    return begins_us, max(begins_us, ends_us)


def breaks(hours: Hours, timezone: str, day: date) -> tuple[tuple[int, int], ...]:
    """The stretches between the openings of a calendar day's work in which the shop is closed."""
    if hours.always_open:
        return ()
    own = _own_spans(hours, day)
    found = (
        (
            _instant(timezone, day, before[1], closing=True),
            _instant(timezone, day, after[0], closing=False),
        )
        for before, after in pairwise(own)
    )
    return tuple((from_us, until_us) for from_us, until_us in found if from_us < until_us)


def next_shift_end(hours: Hours, timezone: str, after_us: int) -> int | None:
    """The end of a working day next after a time; None when the shop works no more."""
    ends = (end for _, end in _from(hours, timezone, after_us) if end > after_us)
    return next(ends, None)


def next_shift_start(hours: Hours, timezone: str, after_us: int) -> int | None:
    """The start of a working day next after a time; None when the shop works no more."""
    starts = (start for start, _ in _from(hours, timezone, after_us) if start > after_us)
    return next(starts, None)


def last_shift_end(hours: Hours, timezone: str, at_us: int) -> int | None:
    """The latest end of a working day that is not after a time; None when there was none."""
    ends = (end for _, end in _back_from(hours, timezone, at_us) if end <= at_us)
    return next(ends, None)


def working_day_start(hours: Hours, timezone: str, at_us: int) -> int | None:
    """The first opening of the working day that holds a time, or of the last one before it."""
    starts = (start for start, _ in _back_from(hours, timezone, at_us) if start <= at_us)
    return next(starts, None)


def _from(hours: Hours, timezone: str, at_us: int) -> Iterator[tuple[int, int]]:
    """Working days in order, beginning early enough to hold one that is still going on."""
    first = local_day(timezone, at_us) - timedelta(2)
    for ahead in range(_DAYS_AHEAD):
        found = working_day(hours, timezone, first + timedelta(ahead))
        if found is not None:
            yield found


def _back_from(hours: Hours, timezone: str, at_us: int) -> Iterator[tuple[int, int]]:
    last = local_day(timezone, at_us) + timedelta(1)
    for back in range(_DAYS_AHEAD):
        found = working_day(hours, timezone, last - timedelta(back))
        if found is not None:
            yield found


def _spans(hours: Hours, day: date) -> tuple[Span, ...]:
    """The spans of a calendar day; none on a holiday."""
    return () if day.isoformat() in hours.holidays else hours.spans[day.weekday()]


def _runs_on(hours: Hours, day: date) -> bool:
    """Whether a day's work goes on past its midnight. A whole day stands for itself."""
    today, tomorrow = _spans(hours, day), _spans(hours, day + timedelta(1))
    return bool(
        today
        and tomorrow
        and today[-1][1] == DAY_MINUTES
        and tomorrow[0][0] == 0
        and tomorrow[0][1] < DAY_MINUTES
    )


def _own_spans(hours: Hours, day: date) -> tuple[Span, ...]:
    """A day's spans without what belongs to the working day before it."""
    spans = _spans(hours, day)
    return spans[1:] if _runs_on(hours, day - timedelta(1)) else spans


@lru_cache(maxsize=256)
def _openings(hours: Hours, timezone: str, day: date) -> tuple[Span, ...]:
    """When the spans of a calendar day begin and end."""
    found = []
    for opens, closes in _spans(hours, day):
        opens_us = _instant(timezone, day, opens, closing=False)
        found.append((opens_us, max(opens_us, _instant(timezone, day, closes, closing=True))))
    return tuple(found)


def local_day(timezone: str, at_us: int) -> date:
    """The calendar day of a time."""
    return to_datetime(at_us).astimezone(_zone(timezone)).date()


@lru_cache(maxsize=8)
def _zone(name: str) -> ZoneInfo:
    return ZoneInfo(name)


@lru_cache(maxsize=4096)
def _instant(timezone: str, day: date, minute: int, *, closing: bool) -> int:
    """When a local time of day is, with 24:00 as the next midnight."""
    zone = _zone(timezone)
    day += timedelta(minute // DAY_MINUTES)
    fold = 1 if closing and minute < DAY_MINUTES else 0
    hour, minute = divmod(minute % DAY_MINUTES, 60)
    local = datetime(day.year, day.month, day.day, hour, minute, tzinfo=zone, fold=fold)
    moment = local.astimezone(UTC)
    if moment.astimezone(zone).replace(tzinfo=None) != local.replace(tzinfo=None):
        return _skipped(zone, moment)
    return int(moment.timestamp()) * SECOND_US


def _skipped(zone: ZoneInfo, near: datetime) -> int:
    """The moment at which clocks went forward, somewhere within a day of `near`."""
    low = int(near.timestamp()) - DAY_US // SECOND_US
    high = int(near.timestamp()) + DAY_US // SECOND_US

    def offset(second: int) -> timedelta | None:
        return datetime.fromtimestamp(second, zone).utcoffset()

    before = offset(low)
    while high - low > 1:
        middle = (low + high) // 2
        if offset(middle) == before:
            low = middle
        else:
            high = middle
    return high * SECOND_US


def open_around(hours: Hours, timezone: str, at_us: int) -> tuple[Span, ...] | None:
    """The openings of a local day and of the days beside it, as [opens, closes) in microseconds;
    None for a shop that is always open."""
    if hours.always_open:
        return None
    today = local_day(timezone, at_us)
    return tuple(
        span
        for day in (today - timedelta(1), today, today + timedelta(1))
        for span in _openings(hours, timezone, day)
    )
