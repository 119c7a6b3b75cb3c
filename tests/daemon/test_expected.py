"""The words for when a drain is expected. The shop is invented; it works on Lisbon's clock."""

from __future__ import annotations

from dataclasses import replace

import pytest

from daemon.clock import parse_rfc3339
from daemon.expected import AGAINST_RUST, expected_words, when
from daemon.moisture.forecast import Due
from tests.daemon.shops import SITE
from tests.daemon.shops import site as parsed

SHOP = replace(parsed(SITE), timezone="Europe/Lisbon")
TANK, RISER = SHOP.line.stations[1], SHOP.line.stations[2]
NOW = parse_rfc3339("2026-07-13T09:00:00Z")  # a Monday, 10:00 in Lisbon


def due(*times: str | None, because: str = "volume") -> Due:
    p05, p50, p95 = (None if each is None else parse_rfc3339(f"{each}Z") for each in times)
    return Due(p05, p50, p95, because)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("time", "words"),
    [
        ("2026-07-13T08:59:00Z", "now"),
        ("2026-07-13T14:20:00Z", "15:15"),
        ("2026-07-13T22:59:00Z", "tomorrow 00:00"),
        ("2026-07-14T08:58:00Z", "tomorrow 10:00"),
        ("2026-07-16T10:31:00Z", "Thu 12:00"),
        ("2026-07-22T10:00:00Z", "Wed 22 Jul"),
    ],
)
def test_times_are_said_as_people_say_them(time: str, words: str) -> None:
    assert when(SHOP, parse_rfc3339(time), NOW) == words


def test_a_due_time_has_its_interval() -> None:
    found = due("2026-07-13T13:00:00", "2026-07-13T15:00:00", "2026-07-14T09:00:00")
    words = expected_words(SHOP, RISER, found, 0.05, NOW)
    assert words == "due 16:00 (14:00 to tomorrow 10:00)"
    far = due("2026-07-16T13:00:00", "2026-07-20T15:00:00", None)
    assert expected_words(SHOP, RISER, far, 0.05, NOW) == "due Mon 20 Jul (Thu 14:00 or later)"


def test_what_is_not_expected_is_said_so() -> None:
    none = due(None, None, None)
    assert expected_words(SHOP, RISER, none, 0.0, NOW) == "not expected within 10 days"
    early = due("2026-07-16T13:00:00", None, None)
    words = "not expected within 10 days, Thu 14:00 at the earliest"
    assert expected_words(SHOP, RISER, early, 0.0, NOW) == words


def test_what_is_due_is_due_now() -> None:
    found = due("2026-07-13T08:00:00", "2026-07-13T09:00:00", "2026-07-13T19:00:00")
    assert expected_words(SHOP, RISER, found, 0.2, NOW) == "due now"


def test_a_date_has_no_interval() -> None:
    date = "2026-07-13T16:30:00"
    found = due(date, date, date, because="calendar")
    assert expected_words(SHOP, RISER, found, 0.1, NOW) == "due 17:30"
    assert expected_words(SHOP, TANK, found, 0.5, NOW) == "due 17:30"


# Common practice, no source: a steel tank rusts however little water stands in it.
@pytest.mark.parametrize(
    ("found", "p95_kg"),
    [
        (due(None, None, None), 0.0),
        (due("2026-07-16T13:00:00", None, None), 0.1),
        (due(*["2026-07-13T16:30:00"] * 3, because="calendar"), 0.1),
    ],
)
def test_a_steel_tank_never_reads_as_leave_to_wait(found: Due, p95_kg: float) -> None:
    found = replace(found, because="calendar" if found.p50_us else None)
    words = expected_words(SHOP, TANK, found, p95_kg, NOW)
    assert words == AGAINST_RUST == "little water expected; drain daily against rust all the same"


def test_a_tank_that_fills_before_its_date_is_due_by_then() -> None:
    found = due("2026-07-13T12:00:00", "2026-07-13T13:00:00", "2026-07-13T14:00:00")
    assert expected_words(SHOP, TANK, found, 0.3, NOW) == "due 14:00 (13:00 to 15:00)"
