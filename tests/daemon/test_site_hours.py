"""Opening hours: shifts, days off, and the two nights a year when clocks are changed.

Changes of clock are those of the IANA time zone database: in the EU at 01:00 UTC on the last Sunday
of March and October (2026-03-29, 2026-10-25); in New York on 2026-03-08 at 07:00 UTC.
"""

from __future__ import annotations

from datetime import date

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from daemon.clock import HOUR_US, parse_rfc3339
from daemon.site import hours as opening
from daemon.site.calendar import ALWAYS_OPEN, Span
from daemon.site.types import Hours

Spans = tuple[Span, ...]


def minutes(text: str) -> Spans:
    """ "08:00-12:00 13:00-17:30" as the site file's reader gives it."""
    found = []
    for span in text.split():
        ends = [int(end[:2]) * 60 + int(end[3:]) for end in span.split("-")]
        found.append((ends[0], ends[1]))
    return tuple(found)


def week(**days: str) -> Hours:
    names = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")
    return Hours(tuple(minutes(days.get(name, "")) for name in names), frozenset(), False)


DAYS = week(
    mon="08:00-12:00 13:00-17:30",
    tue="08:00-12:00 13:00-17:30",
    wed="08:00-12:00 13:00-17:30",
    sat="09:00-13:00",
)
LISBON = "Europe/Lisbon"  # UTC in winter, one hour ahead in summer


def us(text: str) -> int:
    return parse_rfc3339(text)


# 2026-03-02 is a Monday.
@pytest.mark.parametrize(
    ("at", "is_open"),
    [
        ("2026-03-02T07:59:59Z", False),
        ("2026-03-02T08:00:00Z", True),
        ("2026-03-02T11:59:59Z", True),
        ("2026-03-02T12:00:00Z", False),  # lunch
        ("2026-03-02T13:00:00Z", True),
        ("2026-03-02T17:30:00Z", False),
        ("2026-03-05T10:00:00Z", False),  # a Thursday, not named
        ("2026-03-30T07:30:00Z", True),  # summer time: 08:30 there
    ],
)
def test_a_shop_is_open_within_its_spans(at: str, is_open: bool) -> None:
    assert opening.is_open(DAYS, LISBON, us(at)) is is_open


def test_the_next_shift_end_skips_lunch_and_days_off() -> None:
    def end(at: str) -> int | None:
        return opening.next_shift_end(DAYS, LISBON, us(at))

    assert end("2026-03-02T09:00:00Z") == us("2026-03-02T17:30:00Z")
    assert end("2026-03-02T17:29:59Z") == us("2026-03-02T17:30:00Z")
    assert end("2026-03-02T17:30:00Z") == us("2026-03-03T17:30:00Z")
    assert end("2026-03-04T18:00:00Z") == us("2026-03-07T13:00:00Z")  # Thursday, Friday off


def test_the_last_shift_end_is_not_after_the_time() -> None:
    def end(at: str) -> int | None:
        return opening.last_shift_end(DAYS, LISBON, us(at))

    assert end("2026-03-02T09:00:00Z") == us("2026-02-28T13:00:00Z")
    assert end("2026-03-02T17:30:00Z") == us("2026-03-02T17:30:00Z")
    assert end("2026-03-06T09:00:00Z") == us("2026-03-04T17:30:00Z")


def test_a_working_day_starts_at_its_first_opening() -> None:
    def start(at: str) -> int | None:
        return opening.working_day_start(DAYS, LISBON, us(at))

    assert start("2026-03-03T14:00:00Z") == us("2026-03-03T08:00:00Z")
    assert start("2026-03-03T20:00:00Z") == us("2026-03-03T08:00:00Z")
    assert start("2026-03-03T07:00:00Z") == us("2026-03-02T08:00:00Z")
    assert start("2026-03-06T12:00:00Z") == us("2026-03-04T08:00:00Z")
    assert opening.next_shift_start(DAYS, LISBON, us("2026-03-03T08:00:00Z")) == us(
        "2026-03-04T08:00:00Z"
    )


def test_holidays_are_days_off() -> None:
    hours = Hours(DAYS.spans, frozenset({"2026-03-03"}), False)
    assert not opening.is_open(hours, LISBON, us("2026-03-03T10:00:00Z"))
    assert not opening.is_working_day(hours, date(2026, 3, 3))
    assert opening.is_working_day(hours, date(2026, 3, 4))
    after = opening.next_shift_end(hours, LISBON, us("2026-03-02T18:00:00Z"))
    assert after == us("2026-03-04T17:30:00Z")


def test_a_night_shift_belongs_to_the_day_on_which_it_began() -> None:
    nights = week(mon="22:00-24:00", tue="00:00-06:00 22:00-24:00", wed="00:00-06:00")
    monday = (us("2026-03-02T22:00:00Z"), us("2026-03-03T06:00:00Z"))
    tuesday = (us("2026-03-03T22:00:00Z"), us("2026-03-04T06:00:00Z"))
    assert opening.working_day(nights, "UTC", date(2026, 3, 2)) == monday
    assert opening.working_day(nights, "UTC", date(2026, 3, 3)) == tuesday
    assert opening.working_day(nights, "UTC", date(2026, 3, 4)) is None
    assert opening.next_shift_end(nights, "UTC", us("2026-03-02T23:00:00Z")) == monday[1]
    assert opening.working_day_start(nights, "UTC", us("2026-03-03T03:00:00Z")) == monday[0]
    assert opening.is_open(nights, "UTC", us("2026-03-03T00:00:00Z"))


def test_a_holiday_ends_a_night_shift_at_midnight() -> None:
    nights = week(mon="22:00-24:00", tue="00:00-06:00")
    hours = Hours(nights.spans, frozenset({"2026-03-03"}), False)
    assert opening.working_day(hours, "UTC", date(2026, 3, 2)) == (
        us("2026-03-02T22:00:00Z"),
        us("2026-03-03T00:00:00Z"),
    )


def test_a_shop_open_day_and_night_has_a_working_day_for_each_calendar_day() -> None:
    around = week(**dict.fromkeys(("mon", "tue", "wed", "thu", "fri", "sat", "sun"), "00:00-24:00"))
    for hours in (around, ALWAYS_OPEN):
        assert opening.is_open(hours, LISBON, us("2026-03-02T03:00:00Z"))
        assert opening.working_day(hours, LISBON, date(2026, 3, 2)) == (
            us("2026-03-02T00:00:00Z"),
            us("2026-03-03T00:00:00Z"),
        )
    assert opening.is_working_day(ALWAYS_OPEN, date(2026, 12, 25))
    assert opening.next_shift_end(ALWAYS_OPEN, LISBON, us("2026-07-01T10:00:00Z")) == us(
        "2026-07-01T23:00:00Z"
    )


def test_a_day_with_a_change_of_clock_is_shorter_or_longer() -> None:
    spring = opening.working_day(ALWAYS_OPEN, LISBON, date(2026, 3, 29))
    autumn = opening.working_day(ALWAYS_OPEN, LISBON, date(2026, 10, 25))
    assert spring is not None
    assert autumn is not None
    assert spring[1] - spring[0] == 23 * HOUR_US
    assert autumn[1] - autumn[0] == 25 * HOUR_US


def test_a_time_that_is_skipped_means_the_moment_of_the_change() -> None:
    # In New York clocks go from 02:00 to 03:00 on 2026-03-08, at 07:00 UTC.
    early = week(sun="01:00-02:30")
    late = week(sun="02:30-05:00")
    new_york = "America/New_York"
    assert opening.working_day(early, new_york, date(2026, 3, 8)) == (
        us("2026-03-08T06:00:00Z"),
        us("2026-03-08T07:00:00Z"),
    )
    assert opening.working_day(late, new_york, date(2026, 3, 8)) == (
        us("2026-03-08T07:00:00Z"),
        us("2026-03-08T09:00:00Z"),
    )


def test_a_time_that_comes_twice_opens_at_the_first_and_closes_at_the_second() -> None:
    # In Lisbon 01:00-02:00 comes twice on 2026-10-25: at 00:00 and at 01:00 UTC.
    hours = week(sun="01:15-01:45")
    assert opening.working_day(hours, LISBON, date(2026, 10, 25)) == (
        us("2026-10-25T00:15:00Z"),
        us("2026-10-25T01:45:00Z"),
    )


def test_a_shop_that_never_opens_again_has_no_next_shift() -> None:
    shut = week()
    assert opening.next_shift_end(shut, "UTC", 0) is None
    assert opening.next_shift_start(shut, "UTC", 0) is None
    assert opening.last_shift_end(shut, "UTC", 10**15) is None
    assert opening.working_day_start(shut, "UTC", 10**15) is None


TIMES = st.integers(us("2025-01-01T00:00:00Z"), us("2027-12-31T00:00:00Z"))
ZONES = st.sampled_from(["UTC", LISBON, "America/New_York", "Asia/Kolkata", "Pacific/Apia"])


@st.composite
def any_hours(draw: st.DrawFn) -> Hours:
    """Up to two spans a day, now and then to midnight; the last day of the week is off."""
    spans: list[Spans] = []
    for _ in range(6):
        ends = sorted(draw(st.sets(st.integers(0, 96), min_size=4, max_size=4)))
        pairs = [(ends[0] * 15, ends[1] * 15), (ends[2] * 15, ends[3] * 15)]
        spans.append(tuple(pairs[: draw(st.integers(0, 2))]))
    return Hours((*spans, ()), frozenset(), False)


@settings(max_examples=60, deadline=None)
@given(any_hours(), ZONES, TIMES)
def test_starts_and_ends_of_working_days_alternate(hours: Hours, zone: str, at_us: int) -> None:
    end = opening.next_shift_end(hours, zone, at_us)
    if end is None:
        assert not any(hours.spans)
        return
    assert end > at_us
    start = opening.working_day_start(hours, zone, end - 1)
    assert start is not None
    assert start < end
    assert opening.last_shift_end(hours, zone, end) == end
    assert opening.is_open(hours, zone, end - 1)
    assert opening.is_open(hours, zone, start)
    last = opening.last_shift_end(hours, zone, at_us)
    assert last is None or last <= at_us
    # the working day that ends next has its start after the one before it ended
    assert last is None or start >= last


def test_breaks_lie_between_the_openings_of_a_day() -> None:
    hours = week(mon="08:00-12:00 13:00-17:30 17:30-18:00")
    monday = date(2026, 3, 2)
    noon = parse_rfc3339("2026-03-02T12:00:00+01:00")
    assert opening.breaks(hours, "Europe/Berlin", monday) == ((noon, noon + HOUR_US),)
    assert opening.breaks(hours, "Europe/Berlin", date(2026, 3, 3)) == ()
