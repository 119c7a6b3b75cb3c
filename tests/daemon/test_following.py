"""Reminders, plant and learned week in the running daemon: outbox, kills, changed site files."""

from __future__ import annotations

import json
from collections.abc import Iterator, Sequence
from pathlib import Path

import pytest

from daemon.advance import Core
from daemon.clock import HOUR_US, MINUTE_US, parse_rfc3339
from daemon.expected import AGAINST_RUST
from daemon.moisture.week import OPEN
from daemon.replay import replay, summarise
from daemon.site.types import Site
from sensors.reading import Reading
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, a_tick
from tests.daemon.shops import site as parsed
from tests.daemon.test_outlets_live import Rig

SHOP = parsed()
CLOSING = parse_rfc3339("2026-03-02T17:30:00Z")  # the Monday's shift ends
FIRST = (CLOSING - 15 * MINUTE_US - BEGUN_US) // PERIOD_US
LAST = (CLOSING + 2 * MINUTE_US - BEGUN_US) // PERIOD_US


def idle(shop: Site, first: int, last: int, duty: float = 0.0) -> list[Reading]:
    """A shop in which nobody uses air; with a duty the compressor runs that part of each hour."""
    found = []
    for number in range(first, last + 1):
        now_us = BEGUN_US + number * PERIOD_US
        values = {
            "intake-air.temperature": 293.15,
            "intake-air.relative_humidity": 0.55,
            "intake-air.pressure": 101_300.0,
            "tank-gauge.pressure": 7e5,
            "pipe-end.temperature": 291.15,
            "motor.contact": float(now_us % HOUR_US < duty * HOUR_US),
        }
        found += a_tick(shop, now_us, values)
    return found


@pytest.fixture
def rig(tmp_path: Path) -> Iterator[Rig]:
    made = Rig(tmp_path / "a.db", idle(SHOP, FIRST, LAST), SHOP)
    yield made
    made.store.close()


def reminders_in(rig: Rig) -> list[dict[str, object]]:
    payloads = [json.loads(each.message.payload) for each in rig.store.pending(1000)]
    return [each for each in payloads if each.get("kind") in ("round", "opening-up")]


def test_a_reminder_is_told_once_however_often_the_daemon_is_killed(rig: Rig) -> None:
    for number in range(FIRST, LAST):
        rig.tick(number)
        if number % 7 == 0:
            rig.kill()
    (told,) = reminders_in(rig)
    assert told["id"] == "reminder/shift-end/2026-03-02T17:20:00Z"
    assert told["source"] == "shift end"
    assert told["traps"] == ["tank"]
    assert told["text"] == f"Drain, in this order: tank ({AGAINST_RUST})."
    (recent,) = rig.shell.reminders()
    assert recent.id == told["id"]


def test_a_replay_has_the_same_reminders(rig: Rig) -> None:
    for number in range(FIRST, LAST):
        rig.tick(number)
    core = Core(SHOP)
    result = replay(core, idle(SHOP, FIRST, LAST - 1), [])
    assert [each.id for each in result.reminders] == [each["id"] for each in reminders_in(rig)]
    assert summarise(core, result, [])["reminders"] == 1


@pytest.mark.parametrize(("litres_a_minute", "reminders"), [(12.0, 1), (40.0, 0)])
def test_a_leak_does_not_hold_a_reminder_back_and_a_gun_does(
    litres_a_minute: float, reminders: int
) -> None:
    """A tank of 100 L that nobody fills: a litre at 1 bar is 1000 Pa of it."""
    record: list[Reading] = []
    for number in range(FIRST, LAST + 1):
        now_us = BEGUN_US + number * PERIOD_US
        minutes = (number - FIRST) * PERIOD_US / MINUTE_US
        gauge_pa = 8e5 - 1000.0 * litres_a_minute * minutes
        record += a_tick(SHOP, now_us, {"tank-gauge.pressure": gauge_pa, "motor.contact": 0.0})
    assert len(replay(Core(SHOP), record, []).reminders) == reminders


def test_the_outside_can_ask_for_the_plant_and_the_scores(rig: Rig) -> None:
    assert rig.shell.plant() is None
    assert rig.shell.reminders() == ()
    rig.tick(FIRST)
    plant = rig.shell.plant()
    assert plant is not None
    assert plant.leak_m3_per_s is None  # nothing was measured yet
    assert plant.delivered_times == 0
    assert rig.shell.forecast_scores() == ()


def hours_of_work(shop: Site, first_hour: int, last_hour: int) -> Sequence[Reading]:
    per_hour = HOUR_US // PERIOD_US
    return idle(shop, first_hour * per_hour, last_hour * per_hour, duty=0.5)


def test_the_learned_week_outlives_a_change_of_the_site_file(tmp_path: Path) -> None:
    made = Rig(tmp_path / "a.db", hours_of_work(SHOP, 0, 4), SHOP)
    for number in range(0, 4 * 360 + 1):
        made.tick(number)
    learned = made.state.followed.foresight.week
    assert learned.count[OPEN].sum() == 3.0  # eight, nine and ten o'clock
    assert learned.duty[OPEN].sum() == pytest.approx(1.5, rel=0.01)
    recent = made.state.followed.reminders.recent
    assert [each.kind for each in recent] == ["opening-up"]  # at eight, after days off
    made.shell.checkpoint()
    made.store.close()
    changed = parsed(SITE.replace('set = "3 bar"', 'set = "4 bar"'))
    again = Rig(tmp_path / "a.db", hours_of_work(changed, 4, 5), changed)
    again.tick(4 * 360 + 1)
    assert again.state.followed.foresight.week.count[OPEN].sum() == 3.0
    assert again.state.followed.reminders.recent == recent
    again.store.close()
