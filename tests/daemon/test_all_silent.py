"""A daemon that did not run blames no sensor for its own silence."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pytest

from daemon.advance import Core
from daemon.alarms import Transition
from daemon.clock import DAY_US, HOUR_US, MINUTE_US
from daemon.replay import replay
from sensors.reading import Reading
from tests.daemon.shops import BEGUN_US, SITE, a_tick, flat, site, working

SHOP = site()
STOPPED_US, STARTED_US = BEGUN_US + 30 * MINUTE_US, BEGUN_US + 50 * MINUTE_US
WHOLE = flat(list(working(SHOP, 7 * 60)))


def faults(readings: Sequence[Reading]) -> list[Transition]:
    """What is told of sensors."""
    found = replay(Core(SHOP), readings, []).transitions
    return [each for each in found if each.kind == "sensor-fault"]


def test_twenty_minutes_without_power_are_no_fault_of_any_sensor() -> None:
    assert not faults([each for each in WHOLE if not STOPPED_US < each.time_us < STARTED_US])


def test_one_that_stays_silent_when_the_others_speak_again_is_at_fault() -> None:
    away = [each for each in WHOLE if not STOPPED_US < each.time_us < STARTED_US]
    (fault,) = faults(
        [e for e in away if e.time_us <= STOPPED_US or e.channel != "pipe-end.temperature"]
    )
    assert (fault.source, fault.after) == ("pipe-end", "unacknowledged")
    assert 0 <= fault.at_us - STARTED_US <= MINUTE_US


def test_one_that_was_at_fault_before_stays_so_while_nobody_speaks() -> None:
    def told(each: Reading) -> bool:
        if each.channel == "pipe-end.temperature":
            return each.time_us < BEGUN_US + 20 * MINUTE_US or each.time_us >= STARTED_US
        return not STOPPED_US < each.time_us < STARTED_US

    raised, returned = faults([each for each in WHOLE if told(each)])
    assert raised.at_us < STOPPED_US
    assert returned.at_us >= STARTED_US


def test_a_contact_that_fails_at_work_is_missed_within_what_working_hours_were_like() -> None:
    """Nights in which the compressor is switched off tell nothing of it. Half of the time by day,
    by definition of the record."""
    slow = '[site]\nsample_every = "60 s"\n'
    all_days = 'mon = ["07:00-17:00"]\ntue = ["07:00-17:00"]\nwed = ["07:00-17:00"]\n'
    hours = SITE[SITE.index("mon =") : SITE.index("[compressor]")]
    without_gauge = SITE.replace('pressure = "tank-gauge.pressure"\n', "")
    shop = site(without_gauge.replace("[site]\n", slow).replace(hours, all_days + "\n"))
    readings: list[Reading] = []
    fails_us = BEGUN_US + 2 * DAY_US + 3 * HOUR_US
    for number in range(51 * 60):
        now_us = BEGUN_US + number * MINUTE_US
        works = (now_us - BEGUN_US) % DAY_US < 10 * HOUR_US
        readings += a_tick(shop, now_us, {"motor.contact": float(works and number % 2)})
    readings += a_tick(shop, fails_us + HOUR_US, {"intake-air.temperature": 293.15})
    marks = replay(Core(shop), readings, []).marks
    hour = next(each.hour for each in marks if each.at_us == fails_us + HOUR_US)
    assert hour is not None
    low, high = np.percentile(hour.on_s, (5.0, 95.0)) / 3600.0
    assert low < 0.5 < high
    assert np.median(hour.on_s) / 3600.0 == pytest.approx(0.5, abs=0.1)
