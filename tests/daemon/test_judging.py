"""Readings that are not believed: on record with their reason, never used, the same in a replay."""

from __future__ import annotations

import logging
import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from daemon.advance import Core
from daemon.checkpoint import encode
from daemon.clock import HOUR_US
from daemon.journal import Entry, Service
from daemon.judging import alike
from daemon.replay import Result, replay
from daemon.shell import Shell
from daemon.store.store import Store
from sensors.quality import DISAGREES, FROZEN, SATURATED_ELEMENT, TOO_FAST
from sensors.reading import Reading
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, flat, site, working
from tests.daemon.test_shell import HandClock, Played

SHOP = site()
Record = list[tuple[int, list[Reading]]]
Change = Callable[[int, Reading], Reading]


def record(ticks: int, change: Change) -> Record:
    """Birch Works at work, with some readings changed, by tick."""
    return [
        (now_us, [change(number, each) for each in readings])
        for number, (now_us, readings) in enumerate(working(SHOP, ticks))
    ]


def of(channel: str, value: float, first: int, last: int) -> Change:
    def change(number: int, each: Reading) -> Reading:
        here = each.channel == channel and first <= number < last
        return replace(each, value=value) if here else each

    return change


def wild(number: int, each: Reading) -> Reading:
    """One of each kind of lie, at its own time."""
    for lie in (
        of("pipe-end.temperature", 380.0, 50, 53),
        of("pipe-end.temperature", 330.0, 80, 95),  # stays, and is believed in the end
        of("intake-air.relative_humidity", 1.0, 100, 340),
    ):
        each = lie(number, each)
    if each.channel.startswith("intake-air.") and 400 <= number < 560:
        frozen = {"temperature": 294.0, "relative_humidity": 0.6, "pressure": 101_300.0}
        each = replace(each, value=frozen[each.channel.split(".")[1]])
    if each.channel == "tank-gauge.pressure" and 600 <= number < 700:
        each = replace(each, value=6.8e5)
    return each


def faults(result_or_store: Store, channel: str) -> dict[str, int]:
    """How often a channel's readings are bad, by reason; they then have no value."""
    series = result_or_store.readings(channel, 0, BEGUN_US + 100 * HOUR_US)
    assert [math.isnan(value) for value in series.values] == [bool(f) for f in series.faults]
    return {f: series.faults.count(f) for f in set(series.faults) if f}


class Daemon:
    """A live shell over a record, that can be killed."""

    def __init__(self, path: Path, played: Record) -> None:
        self.path, self.sampler, self.clock = path, Played(played), HandClock(BEGUN_US)
        self.open()

    def open(self) -> None:
        self.store = Store.open(self.path, SHOP.channels)
        self.shell = Shell(SHOP, self.clock, self.sampler, self.store)
        self.shell.recover()

    def run(self, kills: frozenset[int] = frozenset()) -> None:
        for number, now_us in enumerate(sorted(self.sampler.record)):
            if number in kills:
                self.store.close()
                self.open()
            self.clock.wall_us = now_us
            self.shell.tick(now_us)

    @property
    def bits(self) -> bytes:
        assert self.shell._state is not None
        return encode(self.shell._state, "")


def bits(result: Result) -> bytes:
    return encode(result.state, "")


@pytest.mark.parametrize("kills", [frozenset(), frozenset({52, 84, 300, 450, 530, 650, 899})])
def test_lies_are_judged_alike_live_after_a_kill_and_in_a_replay(
    tmp_path: Path, kills: frozenset[int]
) -> None:
    played = record(900, wild)
    daemon = Daemon(tmp_path / "a.db", played)
    daemon.run(kills)
    assert daemon.bits == bits(replay(Core(SHOP), flat(played), []))
    found = {name: faults(daemon.store, name) for name in SHOP.channels}
    daemon.store.close()
    # three spikes; then a step that its second reading makes likely, there and back
    assert found["pipe-end.temperature"] == {TOO_FAST: 3 + 1 + 1}
    assert found["intake-air.relative_humidity"].keys() == {SATURATED_ELEMENT, FROZEN}
    assert found["intake-air.temperature"] == {FROZEN: found["intake-air.pressure"][FROZEN]}
    assert found["tank-gauge.pressure"].keys() == {FROZEN}
    assert found["motor.contact"] == {}


@pytest.mark.parametrize(
    ("killed", "length"), [(52, 53), (82, 84), (320, 330), (540, 550), (650, 660)]
)
def test_a_kill_in_the_middle_of_a_lie_forgets_nothing_of_it(
    tmp_path: Path, killed: int, length: int
) -> None:
    played = record(length, wild)
    daemon = Daemon(tmp_path / "a.db", played)
    daemon.run(frozenset({killed}))
    assert daemon.bits == bits(replay(Core(SHOP), flat(played), []))
    daemon.store.close()


def test_a_reading_that_is_not_believed_changes_no_estimate() -> None:
    """Spikes cost three readings, which is not enough to be stale: all else stays as it was."""
    spiked = record(400, of("pipe-end.temperature", 380.0, 200, 203))
    left_out = [(t, [each for each in readings if each.value != 380.0]) for t, readings in spiked]
    with_spikes = replay(Core(SHOP), flat(spiked), []).state.model
    without = replay(Core(SHOP), flat(left_out), []).state.model
    assert np.array_equal(with_spikes.water.trap, without.water.trap)
    honest = replay(Core(SHOP), flat(list(working(SHOP, 400))), []).state.model
    assert not np.array_equal(with_spikes.water.trap, honest.water.trap)


def test_a_verdict_raises_the_sensor_s_alarm_and_returns_it(tmp_path: Path) -> None:
    played = record(300, of("pipe-end.temperature", 380.0, 100, 104))
    result = replay(Core(SHOP), flat(played), [])
    mine = [each for each in result.transitions if each.alarm == "pipe-end-sensor-fault"]
    assert [each.after for each in mine] == ["unacknowledged", "returned unacknowledged"]
    assert "pipe-end.temperature is not usable: changes too fast" in mine[0].text
    assert mine[0].at_us - (BEGUN_US + 100 * PERIOD_US) <= 2 * PERIOD_US


def test_the_log_says_when_a_channel_is_doubted_and_when_it_is_believed_again(
    tmp_path: Path, caplog: pytest.LogCaptureFixture
) -> None:
    caplog.set_level(logging.INFO, "dripleg")
    daemon = Daemon(tmp_path / "a.db", record(60, of("pipe-end.temperature", 380.0, 30, 32)))
    daemon.run()
    daemon.store.close()
    told = [each.message for each in caplog.records if "pipe-end.temperature" in each.message]
    assert "pipe-end.temperature: changes too fast (290.25 to 380 in 10 s)" in told
    assert "pipe-end.temperature: is believed again, after: changes too fast" in told


TWO_GAUGES = SITE.replace(
    '[[sensor]]\nid = "pipe-end"',
    '[[sensor]]\nid = "bowl-gauge"\ndriver = "pressure-transducer"\naddress = 0x48\n'
    'input = 1\nrange = "0-12 bar"\n\n[[sensor]]\nid = "pipe-end"',
).replace('after = "riser"\ntrap', 'after = "riser"\npressure = "bowl-gauge.pressure"\ntrap')


def test_gauges_on_one_line_should_agree_and_those_behind_a_regulator_not() -> None:
    shop = site(TWO_GAUGES)
    found = {each.channels for each in alike(shop)}
    assert ("tank-gauge.pressure", "bowl-gauge.pressure") in found
    behind = (
        TWO_GAUGES.replace(
            'kind = "coalescer"\nafter = "riser"\npressure = "bowl-gauge.pressure"',
            'kind = "coalescer"\nafter = "riser"',
        )
        + '\n[[station]]\nid = "end"\nkind = "pipe"\nafter = "booth-regulator"\n'
        'pressure = "bowl-gauge.pressure"\n'
    )
    apart = site(behind.replace('after = "booth-regulator"\n\n[model]', 'after = "end"\n\n[model]'))
    assert not any("bowl-gauge.pressure" in each.channels for each in alike(apart))


def test_gauges_that_disagree_with_the_compressor_long_off_raise_an_alarm() -> None:
    shop = site(TWO_GAUGES)
    readings = []
    for number in range(800):
        at_us = BEGUN_US + number * PERIOD_US
        readings += [
            Reading("tank-gauge.pressure", 7.0e5 + 10.0 * (number % 3), at_us),
            Reading("bowl-gauge.pressure", 5.0e5 + 10.0 * (number % 3), at_us),
            Reading("motor.contact", 0.0, at_us),
        ]
    result = replay(Core(shop), readings, [])
    raised = [t for t in result.transitions if t.alarm == "bowl-gauge-sensor-fault"]
    assert [each.after for each in raised] == ["unacknowledged"]
    assert DISAGREES in raised[0].text
    waited_us = raised[0].at_us - BEGUN_US
    assert 2 * HOUR_US <= waited_us <= 2 * HOUR_US + 3 * PERIOD_US


def test_a_replaced_sensor_is_judged_afresh() -> None:
    core = Core(SHOP)
    state = replay(core, flat(record(100, lambda _, each: each)), []).state
    replaced = Entry(1, state.time_us, state.time_us, Service("sensor replaced", "intake-air"))
    after = core.take(state, [replaced])[0]
    assert not any(name.startswith("intake-air.") for name in after.quality.channels)
    assert "pipe-end.temperature" in after.quality.channels


def test_health_says_what_an_alarm_of_a_sensor_says_though_its_channels_answer(
    tmp_path: Path,
) -> None:
    """A sensor that has fallen silent has no bad reading, and one that is doubted has none."""
    played = [
        (t, [each for each in readings if each.channel != "pipe-end.temperature" or n < 20])
        for n, (t, readings) in enumerate(working(SHOP, 40))
    ]
    daemon = Daemon(tmp_path / "a.db", played)
    daemon.run()
    health = daemon.shell.health()
    daemon.store.close()
    assert not health.ok
    (problem,) = health.problems
    assert problem.startswith("pipe-end: pipe-end.temperature has said nothing for 3 periods")
