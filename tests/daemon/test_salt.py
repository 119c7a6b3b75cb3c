"""A humidity sensor checked over salt: its bias is narrowed, remembered, and asked for again."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from daemon import accept
from daemon.advance import Core
from daemon.alarm_rules import SALT_CHECK_EVERY_US
from daemon.checkpoint import encode
from daemon.clock import DAY_US, SECOND_US
from daemon.errors import JournalError
from daemon.journal import Entry, SaltCheck, Service, body_from_json, body_to_json
from daemon.moisture.beliefs import bias_of
from daemon.moisture.ensemble import Array
from daemon.moisture.salt import over_sodium_chloride
from daemon.replay import replay
from daemon.state import CoreState, Inputs
from sensors.reading import Reading
from tests.daemon.shops import BEGUN_US, PERIOD_US, flat, site, working
from tests.daemon.test_shell import Rig

SHOP = site()
CHANNEL = "intake-air.relative_humidity"


# L. Greenspan, Journal of Research of the National Bureau of Standards 81A (1977), from memory.
@pytest.mark.parametrize(
    ("temperature_c", "percent"), [(20.0, 75.5), (25.0, 75.3), (30.0, 75.1), (22.5, 75.4)]
)
def test_the_humidity_over_wet_table_salt(temperature_c: float, percent: float) -> None:
    found = over_sodium_chloride(temperature_c + 273.15)
    assert 100.0 * found == pytest.approx(percent, abs=0.01)


def bias(state: CoreState) -> Array:
    """By how much each member takes the sensor to read too high, a fraction."""
    found: Array = state.model.beliefs[bias_of(CHANNEL)] * 0.015
    return found


def checked(reads: float, at_us: int = BEGUN_US + 99 * PERIOD_US) -> tuple[CoreState, CoreState]:
    core = Core(SHOP)
    before = replay(core, flat(list(working(SHOP, 100))), []).state
    entry = Entry(1, at_us, at_us, SaltCheck("intake-air", reads, 0.754))
    return before, core.take(before, [entry])[0]


def test_a_check_moves_and_narrows_the_bias() -> None:
    before, after = checked(0.774)
    assert float(bias(before).mean()) == pytest.approx(0.0, abs=0.002)
    assert 0.012 < float(bias(after).mean()) < 0.020
    assert float(bias(after).std()) < 0.6 * float(bias(before).std())
    assert after.sensed.salted == {"intake-air": after.time_us}


def test_a_check_that_finds_nothing_narrows_it_all_the_same() -> None:
    before, after = checked(0.754)
    assert abs(float(bias(after).mean())) < 0.002
    assert float(bias(after).std()) < 0.6 * float(bias(before).std())


def test_a_part_that_is_far_off_is_taken_to_be_off() -> None:
    _, after = checked(0.754 + 0.07)
    assert 0.04 < float(bias(after).mean()) <= 0.07


def test_a_sensor_that_the_line_does_not_use_is_remembered_too() -> None:
    core = Core(SHOP)
    state = replay(core, flat(list(working(SHOP, 20))), []).state
    after = core.sensing.salt_check(state, SaltCheck("booth-air", 0.77, 0.754))
    assert after.model is state.model
    assert after.sensed.salted == {"booth-air": state.time_us}


def test_a_check_survives_a_kill_and_a_replay_has_it(tmp_path: Path) -> None:
    record = list(working(SHOP, 300))
    rig = Rig(tmp_path / "a.db", record)
    for number, (now_us, _) in enumerate(record):
        if number == 100:
            rig.clock.wall_us = now_us - SECOND_US
            rig.shell.record(SaltCheck("intake-air", 0.78, 0.754, by="AM"))
        if number in (101, 250):
            rig.kill()
        rig.tick(now_us)
    entries = rig.store.entries()
    live = rig.state
    rig.store.close()
    assert live.sensed.salted == {"intake-air": entries[0].at_us}
    assert encode(live, "") == encode(replay(Core(SHOP), flat(record), entries).state, "")


def test_the_journal_gives_back_what_it_was_given() -> None:
    check = SaltCheck("intake-air", 0.775, 0.754, "AM")
    assert body_from_json(body_to_json(check)) == check


@pytest.mark.parametrize(
    ("check", "words"),
    [
        (SaltCheck("motor", 0.75, 0.754), '"motor" is not a humidity sensor of this site'),
        (SaltCheck("intake-air", 75.0, 0.754), "cannot be: relative humidities are fractions"),
        (SaltCheck("intake-air", 0.45, 0.754), "so far off is no bias"),
        (SaltCheck("intake-air", 0.75, 0.754, "x" * 41), "at most 40"),
    ],
)
def test_a_check_that_cannot_be_is_refused(check: SaltCheck, words: str) -> None:
    with pytest.raises(JournalError, match=words):
        accept.check(SHOP, check, BEGUN_US, BEGUN_US, BEGUN_US)


def test_after_three_months_it_asks_to_be_checked_again() -> None:
    _, state = checked(0.774)
    core = Core(SHOP)
    long_ago = state.time_us - SALT_CHECK_EVERY_US + DAY_US
    state = replace(state, sensed=replace(state.sensed, salted={"intake-air": long_ago}))
    said, at_us = [], state.time_us
    for _ in range(2 * 24):
        at_us += DAY_US // 24
        readings = [
            Reading("intake-air.temperature", 293.15, at_us),
            Reading(CHANNEL, 0.5, at_us),
            Reading("intake-air.pressure", 101_300.0, at_us),
        ]
        state, _, transitions = core.advance(state, at_us, Inputs(readings))
        said += [each for each in transitions if each.kind == "salt-check-due"]
    (due,) = said
    assert (due.alarm, due.priority) == ("intake-air-salt-check-due", "low")
    assert "run `dripleg check --salt intake-air` again" in due.text
    again = Entry(2, state.time_us, state.time_us, SaltCheck("intake-air", 0.77, 0.754))
    state = core.take(state, [again])[0]
    after = core.advance(state, state.time_us + PERIOD_US, Inputs())[2]
    assert [t.after for t in after if t.kind == "salt-check-due"] == ["returned unacknowledged"]


def test_a_replaced_sensor_was_never_checked() -> None:
    _, state = checked(0.774)
    entry = Entry(2, state.time_us, state.time_us, Service("sensor replaced", "intake-air"))
    after = Core(SHOP).take(state, [entry])[0]
    assert after.sensed.salted == {}
    assert np.std(bias(after)) > 0.012
