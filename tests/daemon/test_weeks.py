"""ISO weeks in a shop's own time zone. Expected instants: the tz database by `zdump`, from memory
where a rule is named; ISO 8601's week rule by Python's own calendar."""

from __future__ import annotations

from datetime import date

import pytest

from daemon.clock import HOUR_US, parse_rfc3339
from daemon.errors import WeekError
from daemon.site import hours as opening
from daemon.site.reader import parse_site
from daemon.site.types import Hours
from daemon.weekly.weeks import Week, first_hour_us, last_full, midnight_us, week_at
from tests.daemon.shops import SITE


@pytest.mark.parametrize("text", ["2026-W49", "2026W49", " 2026-w49 "])
def test_a_week_is_read_as_people_write_it(text: str) -> None:
    assert Week.read(text) == Week(2026, 49)
    assert str(Week.read(text)) == "2026-W49"


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("2026-49", "write it like 2026-W49"),
        ("last", "write it like 2026-W49"),
        ("", "write it like 2026-W49"),
        ("2025-W53", "there is no week 53 in 2025"),
        ("2026-W54", "there is no week 54 in 2026"),
        ("2026-W00", "there is no week 0 in 2026"),
        ("0001-W01", "no log can be of 1; years go from 1970 to 9998"),
        ("9999-W52", "no log can be of 9999"),
    ],
)
def test_what_is_no_week_is_refused_in_words(text: str, said: str) -> None:
    with pytest.raises(WeekError, match=said):
        Week.read(text)


def test_a_week_belongs_to_the_year_of_its_thursday() -> None:
    """ISO 8601: 2026 has 53 weeks, since its first of January is a Thursday."""
    assert Week.of(date(2025, 12, 29)) == Week(2026, 1)
    assert Week.of(date(2027, 1, 3)) == Week(2026, 53)
    assert Week(2026, 53).after() == Week(2027, 1)
    assert Week(2026, 1).before() == Week(2025, 52)


@pytest.mark.parametrize(
    ("timezone", "week", "begins", "hours"),
    [
        ("UTC", "2026-W49", "2026-11-30T00:00:00Z", 168),
        # Central Europe leaves summer time on Sunday 25 October 2026, and enters it on 29 March
        ("Europe/Berlin", "2026-W43", "2026-10-18T22:00:00Z", 169),
        ("Europe/Berlin", "2026-W13", "2026-03-22T23:00:00Z", 167),
        # the United States on 8 March
        ("America/Chicago", "2026-W10", "2026-03-02T06:00:00Z", 167),
        ("Asia/Kolkata", "2026-W49", "2026-11-29T18:30:00Z", 168),
    ],
)
def test_a_week_is_as_long_as_the_clocks_make_it(
    timezone: str, week: str, begins: str, hours: int
) -> None:
    from_us, to_us = Week.read(week).bounds_us(timezone)
    assert from_us == parse_rfc3339(begins)
    assert (to_us - from_us) / HOUR_US == hours


def test_the_last_full_week_is_over() -> None:
    monday_us = midnight_us("Europe/Lisbon", date(2026, 11, 30))
    assert last_full("Europe/Lisbon", monday_us - 1) == Week(2026, 47)
    assert last_full("Europe/Lisbon", monday_us) == Week(2026, 48)
    assert week_at("Europe/Lisbon", monday_us) == Week(2026, 49)


def test_hours_of_a_zone_off_by_half_an_hour_begin_at_half_past() -> None:
    from_us, _ = Week.read("2026-W49").bounds_us("Asia/Kolkata")
    assert first_hour_us(from_us) - from_us == HOUR_US // 2


# ---- how long a shop is open ----


def minute_by_minute(hours: Hours, timezone: str, from_us: int, to_us: int) -> int:
    """The slow way: every minute by itself."""
    minute_us = HOUR_US // 60
    times = range(from_us, to_us, minute_us)
    return sum(minute_us for at_us in times if opening.is_open(hours, timezone, at_us))


NIGHT = SITE.replace('"08:00-12:00", "13:00-17:30"', '"22:00-24:00", "00:00-02:30"', 1).replace(
    'mon = ["22:00-24:00", "00:00-02:30"]', 'mon = ["00:00-02:30", "22:00-24:00"]'
)


@pytest.mark.parametrize("text", [SITE, NIGHT], ids=["days", "nights"])
@pytest.mark.parametrize("timezone", ["UTC", "Europe/Berlin", "Asia/Kolkata"])
@pytest.mark.parametrize("week", ["2026-W10", "2026-W13", "2026-W43"])
def test_open_time_is_what_every_minute_says(text: str, timezone: str, week: str) -> None:
    hours = parse_site(text, "x.toml").hours
    from_us, to_us = Week.read(week).bounds_us(timezone)
    found = opening.open_us(hours, timezone, from_us, to_us)
    assert found == minute_by_minute(hours, timezone, from_us, to_us) > 0
    part = from_us + 33 * HOUR_US // 2, from_us + 34 * HOUR_US
    assert opening.open_us(hours, timezone, *part) == minute_by_minute(hours, timezone, *part)


def test_an_always_open_shop_is_open_all_along() -> None:
    always = Hours(((),) * 7, frozenset(), always_open=True)
    assert opening.open_us(always, "UTC", 0, 5 * HOUR_US) == 5 * HOUR_US
    assert opening.open_us(always, "UTC", 5, 5) == 0
