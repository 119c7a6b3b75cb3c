"""A week's log from a live daemon, against its stored readings, journal and alarms.

Five and a half hours over Monday's midnight in a zone ten hours behind UTC: the end of one week and
the beginning of another, with a gap and a fault. Moist air by CoolProp's `HAPropsSI`; the rest is
counted from the rows. The shop is invented.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
import pytest
from CoolProp.HumidAirProp import HAPropsSI

from daemon.clock import HOUR_US, MINUTE_US
from daemon.journal import Acknowledge, Drain
from daemon.shell import Shell
from daemon.store.store import Store
from daemon.weekly.records import WeekLog
from daemon.weekly.weeks import Week
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, site, working
from tests.daemon.test_shell import HandClock, Played

TEXT = (
    SITE.replace("[hours]", 'timezone = "Etc/GMT+10"\n\n[hours]', 1)
    .replace('mon = ["08:00-12:00", "13:00-17:30"]', 'mon = ["00:30-12:00"]')
    .replace('tue = ["08:00-12:00", "13:00-17:30"]', 'sun = ["21:30-22:30"]')
)
SHOP = site(TEXT)
TICKS = 1980
MIDNIGHT_US = BEGUN_US + 3 * HOUR_US  # 10:00 UTC, Monday 00:00 there
OPEN = (  # 21:30 to 22:30 on Sunday, from 00:30 on Monday
    (BEGUN_US + HOUR_US // 2, BEGUN_US + 3 * HOUR_US // 2),
    (MIDNIGHT_US + HOUR_US // 2, MIDNIGHT_US + 12 * HOUR_US),
)
GONE = (BEGUN_US + 20 * MINUTE_US, BEGUN_US + 40 * MINUTE_US)
DEAF = (MIDNIGHT_US + 70 * MINUTE_US, MIDNIGHT_US + 95 * MINUTE_US)
FAULTY = "pipe-end.temperature"


@dataclass
class Lived:
    """What the daemon stored, and the two logs it makes of that."""

    store: Store
    before: WeekLog  # the week that ended in the record
    after: WeekLog  # the one that began


@pytest.fixture(scope="module")
def lived(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Lived]:
    record = [
        (
            now_us,
            [
                replace(each, fault="no answer")
                if each.channel == FAULTY and DEAF[0] <= now_us < DEAF[1]
                else each
                for each in readings
            ],
        )
        for now_us, readings in working(SHOP, TICKS)
    ]
    clock = HandClock(BEGUN_US)
    path = tmp_path_factory.mktemp("lived") / "a.db"
    with Store.open(path, SHOP.channels) as store:
        shell = Shell(SHOP, clock, Played(record), store)
        for now_us, _ in record:
            if GONE[0] < now_us <= GONE[1]:
                continue
            clock.wall_us = now_us
            shell.tick(now_us)
            minutes = (now_us - MIDNIGHT_US) / MINUTE_US
            if minutes == 60.0:
                shell.record(Drain("tank", "emptied", 0.1, "AM"))
                shell.record(Drain("riser", "empty"))
            if minutes == 90.0:
                for alarm in shell.alarms():
                    if alarm.state == "unacknowledged":
                        shell.record(Acknowledge(alarm.id, "JK"))
        yield Lived(store, shell.week(Week(2026, 9)), shell.week(Week(2026, 10)))


def open_s(from_us: int, to_us: int) -> float:
    """Open seconds between two times, by hand."""
    return sum(max(min(to_us, b) - max(from_us, a), 0) for a, b in OPEN) / 1e6


def on_s(lived: Lived, spans: list[tuple[int, int]]) -> float:
    """Seconds that the contact was closed in these spans, by its stored readings."""
    told = lived.store.readings("motor.contact", 0, 2**62)
    total = 0.0
    for at_us, until_us, level in zip(
        told.times_us[:-1], told.times_us[1:], told.values[:-1], strict=True
    ):
        within = sum(max(min(until_us, b) - max(at_us, a), 0) for a, b in spans)
        total += within / 1e6 * level
    return total


def test_what_was_watched_is_what_was_ticked(lived: Lived) -> None:
    ticks = np.array([at_us for at_us, _ in lived.store.ticks(0, 2**62)])
    assert len(ticks) == TICKS - 120
    before, after = lived.before.watched, lived.after.watched
    assert before.of_s == 3 * 3600.0
    # a tick vouches for the ten seconds before it; the first one after the gap for none
    ticked = 10.0 * (np.count_nonzero(ticks <= MIDNIGHT_US) - 1)
    assert before.watched_s == pytest.approx(ticked, abs=10.0)
    assert before.gaps == ((BEGUN_US, BEGUN_US + HOUR_US),)
    assert before.gaps_s[0] == pytest.approx(20 * 60.0, abs=10.0)
    assert after.watched_s == after.of_s == 2 * 3600.0
    assert after.complete
    assert lived.before.over
    assert not lived.after.over
    assert lived.before.begun_us == BEGUN_US


def test_open_hours_are_the_site_file_s(lived: Lived) -> None:
    assert lived.before.watched.open_s == open_s(BEGUN_US, MIDNIGHT_US) == 3600.0
    assert lived.after.watched.open_s == open_s(MIDNIGHT_US, MIDNIGHT_US + 2 * HOUR_US) == 5400.0
    # ten minutes of the gap lie in the first open hour
    assert lived.before.watched.open_watched_s == pytest.approx(3000.0, abs=10.0)
    (gun,) = lived.before.outlets
    assert gun.verdict_s["not watched"] == pytest.approx(600.0, abs=10.0)
    assert sum(gun.verdict_s.values()) == pytest.approx(3600.0)


def test_duty_is_what_the_contact_says(lived: Lived) -> None:
    until_us = MIDNIGHT_US + 2 * HOUR_US
    running = on_s(lived, [(MIDNIGHT_US, until_us)])
    plant = lived.after.plant
    assert plant.on_s is not None
    assert plant.on_s.values == pytest.approx((running,) * 3, rel=1e-6)
    duty = plant.duty(lived.after.watched.open_watched_s)
    assert duty is not None
    working_s = on_s(lived, [(OPEN[1][0], until_us)])
    assert duty.p50 == pytest.approx(working_s / 5400.0, rel=1e-6)


def test_water_in_is_what_the_readings_say(lived: Lived) -> None:
    def said(channel: str) -> np.ndarray:
        until_us = MIDNIGHT_US + 2 * HOUR_US + 1
        return lived.store.readings(channel, MIDNIGHT_US, until_us).values

    temperature, pressure = said("intake-air.temperature"), said("intake-air.pressure")
    humidity, contact = said("intake-air.relative_humidity"), said("motor.contact")
    water = 0.0
    for i in range(1, len(temperature)):
        state = ("T", temperature[i], "P", pressure[i], "R", humidity[i])
        dry_kg = 0.150 / 60.0 * 10.0 * contact[i - 1] / HAPropsSI("Vda", *state)
        water += dry_kg * HAPropsSI("W", *state)
    found = lived.after.water_in_kg
    assert found is not None
    assert found.p50 == pytest.approx(water, rel=0.02)  # the middle of 32 members
    assert found.p05 < water < found.p95


def test_fault_hours_are_those_of_the_bad_readings(lived: Lived) -> None:
    told = lived.store.readings(FAULTY, MIDNIGHT_US, MIDNIGHT_US + 2 * HOUR_US + 1)
    bad = sum(bool(fault) for fault in told.faults)
    assert lived.after.faults_s == {FAULTY: pytest.approx(10.0 * bad)}
    assert bad == 150
    assert lived.before.faults_s == {}


def test_drains_and_acknowledgements_are_the_journal_s(lived: Lived) -> None:
    entries = lived.store.entries()
    drains = [each for each in entries if isinstance(each.body, Drain)]
    assert [line.at_us for line in lived.after.drains] == [each.at_us for each in drains]
    assert lived.before.drains == ()
    acknowledged = {e.body.alarm: e.at_us for e in entries if isinstance(e.body, Acknowledge)}
    changes = lived.store.transitions(MIDNIGHT_US, 2**62)
    raised = {e.alarm: e.at_us for e in changes if e.after == "unacknowledged"}
    assert acknowledged.keys() & raised.keys()
    delays = [
        (at_us - raised[alarm]) / 1e6 for alarm, at_us in acknowledged.items() if alarm in raised
    ]
    longest = max(each.longest_s or 0.0 for each in lived.after.alarms)
    assert longest == pytest.approx(max(delays), abs=10.0)  # taken in at the next tick
    assert sum(each.raised for each in lived.after.alarms) == len(
        [each for each in changes if each.after == "unacknowledged"]
    )


def test_measured_drains_are_held_against_their_interval(lived: Lived) -> None:
    checks = lived.store.drain_checks(MIDNIGHT_US, 2**62)
    held = [c.expected_kg.p05 <= c.measured_kg <= c.expected_kg.p95 for c in checks]
    assert [check.measured_kg for check in checks] == [0.1, 0.0]
    assert (lived.after.intervals.hit, lived.after.intervals.of) == (sum(held), 2)
    # the cup's own error makes the interval wider than the contents' (5 % and 5 ml, k = 2)
    assert all(c.expected_kg.p95 - c.expected_kg.p05 > 0.002 for c in checks)


def test_the_days_add_up_to_the_week(lived: Lived) -> None:
    for log in (lived.before, lived.after):
        for trap in log.traps:
            assert trap.shed_kg is not None
            by_day = sum(day.shed_kg.get(trap.trap, 0.0) for day in log.days)
            assert by_day == pytest.approx(trap.shed_kg.p50, rel=1e-5)  # one day each
    assert [day.day for day in lived.before.days if day.watched_s] == ["2026-03-01"]
    assert [day.day for day in lived.after.days if day.watched_s] == ["2026-03-02"]


def test_ticks_are_ten_seconds_apart() -> None:
    """What the counts above are made with."""
    assert PERIOD_US == 10_000_000
