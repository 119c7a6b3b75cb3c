"""Reminders of an invented shop: when they come, when they keep quiet, what they say."""

from __future__ import annotations

import math
from collections.abc import Sequence

import pytest

from daemon import reminders
from daemon.clock import HOUR_US, MINUTE_US, SECOND_US, format_rfc3339, parse_rfc3339
from daemon.reminders import Reminder, Reminders, Scene
from daemon.site.types import Site
from tests.daemon.shops import site as parsed

HOURS = """
[hours]
mon = ["08:00-12:00", "13:00-17:30"]
tue = ["08:00-12:00", "13:00-17:30"]
wed = ["08:00-12:00"]
sat = ["09:00-13:00"]
"""
SHOP = parsed(HOURS)  # in UTC
MONDAY = "2026-03-02T"
LEAK = 0.001  # kg/s


def at(text: str) -> int:
    return parse_rfc3339(f"{text}Z")


def no_round(before_us: int) -> tuple[Sequence[str], str]:
    return (), ""


def whole_round(before_us: int) -> tuple[Sequence[str], str]:
    return ("bowl", "tank"), f"before {format_rfc3339(before_us)}"


def day(
    shop: Site,
    from_us: int,
    until_us: int,
    used_kg_per_s: object = lambda now_us: 0.0,
    flooded: bool = False,
    round_of: reminders.Round = whole_round,
    every_us: int = 10 * SECOND_US,
) -> list[Reminder]:
    """All reminders of a stretch of time in which air is used at a rate that a function gives."""
    assert callable(used_kg_per_s)
    state, used, found = reminders.begun(shop, from_us), 0.0, []
    for now_us in range(from_us, until_us, every_us):
        used += used_kg_per_s(now_us) * every_us / 1e6
        scene = Scene(now_us, used, flooded)
        state, reminder = reminders.tick(shop, state, scene, LEAK, round_of)
        if now_us % HOUR_US == 0:
            state = reminders.hour(shop, state, now_us)
        found += [] if reminder is None else [reminder]
    return found


def told(found: list[Reminder]) -> list[tuple[str, str]]:
    return [(each.turn, format_rfc3339(each.at_us)[:16]) for each in found]


def test_a_quiet_day_has_its_three_turns() -> None:
    found = day(SHOP, at(f"{MONDAY}06:00:00"), at("2026-03-03T07:00:00"))
    assert told(found) == [
        ("shift start", f"{MONDAY}08:00"),
        ("break", f"{MONDAY}12:00"),
        ("shift end", f"{MONDAY}17:20"),
    ]
    assert [each.text for each in found[1:]] == [
        "before 2026-03-02T17:20:00Z",
        "before 2026-03-03T08:00:00Z",
    ]
    assert found[1].traps == ("bowl", "tank")
    assert found[1].id == "reminder/break/2026-03-02T12:00:00Z"


def test_a_turn_that_nobody_wants_is_passed_over() -> None:
    only_end = parsed(HOURS + '[reminders]\nat = ["shift end"]\n')
    found = day(only_end, at(f"{MONDAY}07:00:00"), at("2026-03-03T12:30:00"))
    assert [each.turn for each in found] == ["shift start", "shift end"]  # it opens up after Sunday
    assert found[0].kind == "opening-up"
    none = parsed(HOURS + "[reminders]\nat = []\n")
    assert day(none, at(f"{MONDAY}07:00:00"), at("2026-03-03T12:30:00")) == []


def test_nothing_to_drain_is_no_reminder() -> None:
    found = day(SHOP, at("2026-03-03T06:00:00"), at("2026-03-04T07:00:00"), round_of=no_round)
    assert found == []


def test_a_reminder_waits_until_the_gun_rests() -> None:
    def gun(now_us: int) -> float:
        return 0.003 if now_us < at(f"{MONDAY}12:07:00") else 0.5 * LEAK

    found = day(SHOP, at(f"{MONDAY}10:00:00"), at(f"{MONDAY}13:00:00"), gun)
    assert told(found) == [("break", f"{MONDAY}12:08")]
    assert found[0].id == "reminder/break/2026-03-02T12:00:00Z"


def test_a_flooded_trap_does_not_wait_for_the_gun() -> None:
    found = day(
        SHOP,
        at(f"{MONDAY}10:00:00"),
        at(f"{MONDAY}13:00:00"),
        lambda now_us: 0.003,
        flooded=True,
    )
    assert told(found) == [("break", f"{MONDAY}12:00")]


@pytest.mark.parametrize("every_us", [10 * SECOND_US, HOUR_US])
def test_a_gun_that_draws_all_morning_leaves_the_break_its_turn(every_us: int) -> None:
    def morning(now_us: int) -> float:
        return 0.003 if now_us <= at(f"{MONDAY}12:00:00") else 0.0

    from_us, until_us = at(f"{MONDAY}07:00:00"), at(f"{MONDAY}16:00:00")
    found = day(SHOP, from_us, until_us, morning, every_us=every_us)
    assert [each.turn for each in found] == ["break"]


def test_after_days_without_a_tick_it_goes_on_with_the_turn_that_is_on() -> None:
    state = reminders.begun(SHOP, at(f"{MONDAY}07:00:00"))
    back = at("2026-03-10T08:30:00")
    for now_us in range(back, back + 5 * MINUTE_US, 10 * SECOND_US):
        state, reminder = reminders.tick(SHOP, state, Scene(now_us, 0.0, False), LEAK, whole_round)
        if reminder is not None:
            break
    assert told([reminder] if reminder else []) == [("shift start", "2026-03-10T08:31")]


def test_a_gun_that_never_rests_leaves_it_at_the_alarms() -> None:
    found = day(SHOP, at(f"{MONDAY}10:00:00"), at(f"{MONDAY}23:00:00"), lambda now_us: 0.003)
    assert found == []


def test_a_gun_that_rests_after_hours_is_too_late() -> None:
    def late(now_us: int) -> float:
        return 0.003 if now_us < at(f"{MONDAY}17:40:00") else 0.0

    found = day(SHOP, at(f"{MONDAY}16:00:00"), at("2026-03-03T07:59:00"), late)
    assert found == []


def test_where_nobody_knows_whether_air_is_used_nobody_waits() -> None:
    found = day(SHOP, at(f"{MONDAY}10:00:00"), at(f"{MONDAY}13:00:00"), lambda now_us: math.nan)
    assert told(found) == [("break", f"{MONDAY}12:00")]


def test_it_is_quiet_outside_working_hours() -> None:
    found = day(SHOP, at(f"{MONDAY}17:31:00"), at("2026-03-03T07:59:00"), flooded=True)
    assert found == []
    # nothing is made up for what was missed: the shop's day is over
    found = day(SHOP, at(f"{MONDAY}17:29:00"), at("2026-03-03T07:59:00"))
    assert found == []


def test_after_a_long_closure_there_is_the_list_for_opening_up() -> None:
    found = day(SHOP, at(f"{MONDAY}07:00:00"), at(f"{MONDAY}09:00:00"), round_of=no_round)
    (reminder,) = found
    assert (reminder.kind, reminder.id) == ("opening-up", "opening-up/2026-03-02T08:00:00Z")
    # the list of the trade: common practice, no source
    for words in (
        "drain everything",
        "the tank last",
        "dryer for 15 minutes",
        "blow the hose for a minute into a rag",
        "blotter test",
        "surface's temperature",
    ):
        assert words in reminder.text


@pytest.mark.parametrize(
    ("opens", "long"),
    [("2026-03-03T08:00:00", False), ("2026-03-07T09:00:00", True), ("2026-03-02T08:00:00", True)],
)
def test_a_night_is_no_long_closure_and_three_days_are(opens: str, long: bool) -> None:
    found = day(SHOP, at(opens) - HOUR_US, at(opens) + HOUR_US)
    assert [each.kind for each in found] == ["opening-up" if long else "round"]


def test_a_shop_without_hours_has_no_turns() -> None:
    assert reminders.next_turn(parsed(""), at(f"{MONDAY}08:00:00")) is None
    assert reminders.begun(parsed(""), 0) == Reminders(None)


def test_a_daemon_that_begins_in_the_middle_of_a_turn_goes_on_from_there() -> None:
    turn = reminders.next_turn(SHOP, at(f"{MONDAY}08:30:00"))
    assert turn is not None
    assert (turn.turn, turn.at_us) == ("break", at(f"{MONDAY}12:00:00"))
    assert turn.until_us == turn.next_us == at(f"{MONDAY}17:20:00")


def test_changed_hours_are_heeded_within_the_hour() -> None:
    before = reminders.begun(SHOP, at(f"{MONDAY}08:30:00"))
    later = parsed(HOURS.replace("08:00-12:00", "08:00-12:30"))
    after = reminders.hour(later, before, at(f"{MONDAY}09:00:00"))
    assert after.turn is not None
    assert after.turn.at_us == at(f"{MONDAY}12:30:00")
    # one that is being waited for stays as it is
    waiting = reminders.hour(later, before, at(f"{MONDAY}12:00:00") - 30 * SECOND_US)
    assert waiting == before


def test_only_the_last_few_are_kept() -> None:
    state = reminders.begun(SHOP, at(f"{MONDAY}06:00:00"))
    for now_us in range(at(f"{MONDAY}06:00:00"), at("2026-03-11T00:00:00"), MINUTE_US):
        state, _ = reminders.tick(SHOP, state, Scene(now_us, 0.0, False), LEAK, whole_round)
    assert len(state.recent) == reminders.MOST_RECENT
    assert [each.at_us for each in state.recent] == sorted(each.at_us for each in state.recent)
    assert format_rfc3339(state.recent[-1].at_us) == "2026-03-10T17:20:00Z"
