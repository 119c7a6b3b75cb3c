"""A Pi whose clock says 1970 until a time server answers: nothing is lost, nothing is misdated."""

from __future__ import annotations

import threading
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from daemon.clock import HOUR_US, SECOND_US
from daemon.shell import Shell
from daemon.store.store import Store
from daemon.unset_clock import PATIENCE_S, HeldSamples
from sensors.reading import Reading
from sensors.sampling import HungBus
from tests.daemon.shops import BEGUN_US, PERIOD_US, site, working
from tests.daemon.test_shell import HandClock

SHOP = site()
LATE_1970_US = 30 * SECOND_US + 123


class Asked:
    """A sampler that gives the next readings whenever it is asked, stamped as it is told."""

    def __init__(self) -> None:
        self.record = [readings for _, readings in working(SHOP, 400)]
        self.times: list[int] = []

    def sample(self, now_us: int, deadline_s: float) -> list[Reading]:
        self.times.append(now_us)
        return [replace(each, time_us=now_us) for each in self.record[len(self.times)]]

    def hung_buses(self) -> tuple[HungBus, ...]:
        return ()


class SetLater(HandClock):
    """A clock that a time server sets after so many waits, and that ends the run after others."""

    def __init__(self, now_us: int, set_after: int, stop_after: int, stop: threading.Event) -> None:
        super().__init__(now_us)
        self.waits, self.set_after, self.stop_after, self.stop = 0, set_after, stop_after, stop
        self.problems: list[tuple[str, ...]] = []
        self.shell: Shell | None = None

    def wait(self, seconds: float, stop: threading.Event) -> bool:
        super().wait(seconds, stop)
        self.waits += 1
        if self.shell is not None:
            self.problems.append(self.shell.health().problems)
        if self.waits == self.set_after:
            self.wall_us = BEGUN_US + round(self.seconds * 1e6)
        if self.waits >= self.stop_after:
            self.stop.set()
        return stop.is_set()


def run(path: Path, set_after: int, stop_after: int) -> tuple[Store, Shell, SetLater, Asked]:
    stop = threading.Event()
    clock = SetLater(LATE_1970_US, set_after, stop_after, stop)
    sampler = Asked()
    store = Store.open(path, SHOP.channels)
    shell = Shell(SHOP, clock, sampler, store)
    shell.recover()
    clock.shell = shell
    shell.run(stop)
    return store, shell, clock, sampler


def test_what_was_sampled_before_the_clock_was_set_gets_its_time(tmp_path: Path) -> None:
    store, shell, clock, sampler = run(tmp_path / "a.db", set_after=12, stop_after=30)
    series = store.readings("tank-gauge.pressure", 0, BEGUN_US + 10 * HOUR_US)
    assert len(series.times_us) == len(sampler.times)  # all of them are there
    assert series.times_us[0] >= BEGUN_US - PERIOD_US
    assert set(np.diff(series.times_us)) == {PERIOD_US}
    assert set(series.times_us % PERIOD_US) == {0}  # so ticks meet full hours
    assert any("the clock is not set: it says 1970-01-01" in p for p in clock.problems[3])
    assert not any("clock" in p for p in shell.health().problems)
    assert {each.id: each.state for each in shell.alarms()}["clock-not-set"] == "normal"
    store.close()


def test_a_clock_that_nobody_sets_is_worked_with_and_said_to_be_wrong(tmp_path: Path) -> None:
    waits = round(PATIENCE_S / 10) + 40
    store, shell, _, sampler = run(tmp_path / "a.db", set_after=10**6, stop_after=waits)
    (alarm,) = [each for each in shell.alarms() if each.id == "clock-not-set"]
    assert alarm.state == "unacknowledged"
    assert "set its clock" in alarm.text
    assert len(store.readings("tank-gauge.pressure", 0, HOUR_US).times_us) == len(sampler.times)
    store.close()


def test_a_clock_set_after_that_begins_again_with_what_traps_hold(tmp_path: Path) -> None:
    waits = round(PATIENCE_S / 10) + 40
    store, shell, _, sampler = run(tmp_path / "a.db", set_after=waits, stop_after=waits + 20)
    state = shell._state
    assert state is not None
    assert state.begun_us > BEGUN_US
    assert not state.alarms["clock-not-set"].raised
    before = store.checkpoint_before(HOUR_US)
    assert before is not None  # of 1970, with what was in the traps then
    assert float(np.median(state.model.water.trap[1])) > 0.0
    assert shell._ticks < len(sampler.times) + 5  # no tick an hour for fifty years
    store.close()


@pytest.mark.parametrize("drift_s", [0.0, 4.0, -4.0])
def test_held_samples_move_by_whole_periods_and_stay_in_order(drift_s: float) -> None:
    held = HeldSamples(PERIOD_US)
    for number in range(5):
        held.add(number * 10.0, number * PERIOD_US, [Reading("a.b", 1.0, number * PERIOD_US)])
    told = held.told(50.0, BEGUN_US + round((50.0 + drift_s) * 1e6))
    times = [at_us for at_us, _ in told]
    assert times == [BEGUN_US + number * PERIOD_US for number in range(5)]
    assert [readings[0].time_us for _, readings in told] == times
