"""Verdicts on readings that a part gave without complaint. All figures here are invented."""

from __future__ import annotations

import math
from collections.abc import Mapping

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sensors.emulated.hardware import EmulatedHardware
from sensors.quality import (
    DISAGREES,
    FROZEN,
    OUT_OF_RANGE,
    SATURATED_ELEMENT,
    TOO_FAST,
    Judged,
    QualityState,
    Verdict,
    as_given,
    forget,
    judge,
)
from sensors.quality_rules import (
    ACCEPT_AFTER,
    FROZEN_RUNNING_S,
    FROZEN_S,
    LIVELY_MOVES,
    OFF_LONG_S,
    SATURATED_S,
    Agreement,
    Rule,
    Rules,
    rules_for,
)
from sensors.reading import Reading
from sensors.registry import DRIVERS, SensorConfig
from tests.sensors.support import SECOND_US, START_US, config, open_part

PERIOD_S = 10
AIR = [config("a", "bme280", address=0x76), config("b", "bme280", address=0x77)]
GAUGE = config("tank", "pressure-transducer", input=0, range="0-12 bar")


def rules_of(*sensors: SensorConfig, **more: object) -> Rules:
    channels = [channel for one in sensors for channel in DRIVERS[one.driver].channels(one)]
    return rules_for(channels, **more)  # type: ignore[arg-type]  # passed through


class Bench:
    """Feeds values tick by tick and keeps the verdicts."""

    def __init__(self, rules: Rules) -> None:
        self.rules = rules
        self.state = QualityState()
        self.now_us = START_US
        self.verdicts: list[Verdict] = []

    def tick(
        self, said: Mapping[str, float], running: bool | None = None, seconds: int = PERIOD_S
    ) -> Judged:
        self.now_us += seconds * SECOND_US
        readings = [Reading(name, value, self.now_us) for name, value in said.items()]
        judged = judge(self.rules, self.state, readings, running=running)
        self.state = judged.state
        self.verdicts += judged.verdicts
        return judged

    def fault(self, name: str, value: float, running: bool | None = None) -> str:
        (one,) = self.tick({name: value}, running).readings
        assert one.value == value  # it is kept as it was given
        return one.fault

    def live(self, said: Mapping[str, float], step: float, running: bool | None = None) -> None:
        """Let the channels move at every reading, as real ones do."""
        for number in range(LIVELY_MOVES + 2):
            self.tick({name: value + step * (number % 2) for name, value in said.items()}, running)


def test_a_quiet_channel_is_believed() -> None:
    bench = Bench(rules_of(AIR[0]))
    for step in range(50):
        assert bench.fault("a.temperature", 293.15 + 0.01 * (step % 3)) == ""
    assert bench.verdicts == []


def test_a_value_out_of_range_is_bad_and_its_end_is_recorded() -> None:
    bench = Bench(Rules({"x": Rule(200.0, 400.0)}))
    assert bench.fault("x", 500.0) == OUT_OF_RANGE
    assert bench.fault("x", 300.0) == ""
    began, ended = bench.verdicts
    assert (began.reason, began.began, began.severity) == (OUT_OF_RANGE, True, "bad")
    assert began.detail == "500 is not within 200 to 400"
    assert (ended.reason, ended.began, ended.at_us) == (OUT_OF_RANGE, False, bench.now_us)


def test_a_spike_is_bad_and_the_next_good_value_is_believed() -> None:
    bench = Bench(rules_of(AIR[0]))
    bench.fault("a.temperature", 293.0)
    assert bench.fault("a.temperature", 340.0) == TOO_FAST
    assert bench.fault("a.temperature", 293.1) == ""
    assert [one.began for one in bench.verdicts] == [True, False]
    assert bench.verdicts[0].detail == "293 to 340 in 10 s"


STIFF = Rules({"x": Rule(0.0, 1.0, fastest_per_s=0.0, jump=0.1)})


def test_a_step_that_stays_becomes_true() -> None:
    bench = Bench(STIFF)
    faults = [bench.fault("x", 0.2), *(bench.fault("x", 0.9) for _ in range(ACCEPT_AFTER + 1))]
    assert faults == ["", *[TOO_FAST] * (ACCEPT_AFTER - 1), "", ""]


def test_readings_that_jump_about_are_never_accepted() -> None:
    bench = Bench(STIFF)
    bench.fault("x", 0.5)
    for number in range(4 * ACCEPT_AFTER):
        assert bench.fault("x", 0.9 if number % 2 else 0.1) == TOO_FAST


def test_after_a_long_silence_a_different_value_is_no_jump() -> None:
    bench = Bench(rules_of(AIR[0]))
    bench.tick({"a.temperature": 293.0})
    (one,) = bench.tick({"a.temperature": 313.0}, seconds=3600).readings
    assert one.good


def air(name: str, step: float = 0.0, pressure: float = 101_325.0) -> dict[str, float]:
    return {
        f"{name}.temperature": 293.15 + step,
        f"{name}.relative_humidity": 0.5,
        f"{name}.pressure": pressure,
    }


def test_a_part_that_repeats_itself_is_frozen_in_all_its_channels() -> None:
    bench = Bench(rules_of(AIR[0]))
    bench.live(air("a"), 0.01)
    bench.tick(air("a"))
    ticks = int(FROZEN_S / PERIOD_S)
    for _ in range(ticks - 1):
        assert all(one.good for one in bench.tick(air("a")).readings)
    assert {one.fault for one in bench.tick(air("a")).readings} == {FROZEN}
    assert len(bench.verdicts) == 3
    assert all(one.good for one in bench.tick(air("a", step=0.01)).readings)
    assert [one.began for one in bench.verdicts] == [True] * 3 + [False] * 3


def test_what_has_never_moved_is_not_frozen() -> None:
    """A record made by hand, or of a coarse part, may stand still for days."""
    bench = Bench(rules_of(AIR[0], GAUGE))
    for number in range(3000):
        still = air("a", step=number // 700) | {"tank.pressure": 6e5 + number // 900}
        assert all(one.good for one in bench.tick(still, running=True).readings)


def test_two_equal_rows_of_a_sparse_record_are_not_frozen() -> None:
    bench = Bench(rules_of(AIR[0]))
    for hour in range(60):
        step = 0.01 * (hour // 2 % 2) if hour > LIVELY_MOVES + 2 else 0.01 * (hour % 2)
        readings = bench.tick(air("a", step=step), seconds=3600).readings
        assert all(one.good for one in readings)


def test_one_channel_that_moves_shows_that_the_part_lives() -> None:
    bench = Bench(rules_of(AIR[0]))
    for number in range(300):
        readings = bench.tick(air("a", pressure=101_325.0 + number % 2)).readings
        assert all(one.good for one in readings)


def test_a_gauge_that_stands_still_while_the_compressor_runs_is_frozen() -> None:
    bench = Bench(rules_of(GAUGE))
    bench.live({"tank.pressure": 6e5}, 100.0)
    bench.fault("tank.pressure", 6e5, running=True)
    ticks = int(FROZEN_RUNNING_S / PERIOD_S)
    faults = [bench.fault("tank.pressure", 6e5, running=True) for _ in range(ticks)]
    assert faults == [""] * (ticks - 1) + [FROZEN]
    assert bench.fault("tank.pressure", 6.001e5, running=True) == ""


@pytest.mark.parametrize("running", [False, None])
def test_a_gauge_may_stand_still_while_the_compressor_does(running: bool | None) -> None:
    bench = Bench(rules_of(GAUGE))
    bench.live({"tank.pressure": 100.0}, -100.0)
    for _ in range(1000):
        assert bench.fault("tank.pressure", 0.0, running=running) == ""


def test_a_wet_element_is_bad_until_it_is_clearly_dry() -> None:
    bench = Bench(rules_of(AIR[0]))
    name = "a.relative_humidity"
    ticks = int(SATURATED_S / PERIOD_S)
    assert [bench.fault(name, 1.0) for _ in range(ticks + 1)] == [""] * ticks + [SATURATED_ELEMENT]
    assert bench.fault(name, 0.98) == SATURATED_ELEMENT
    assert bench.fault(name, 0.96) == ""
    assert bench.fault(name, 1.0) == ""  # and it begins anew


def test_a_vented_cell_may_be_dry_or_saturated() -> None:
    cell = config("cell", "vented-cell")
    bench = Bench(rules_of(cell, in_line=["cell"]))
    for _ in range(int(2 * SATURATED_S / PERIOD_S)):
        assert bench.fault("cell.relative_humidity", 1.0) == ""


def test_two_barometers_that_differ_are_doubted_and_stay_in_use() -> None:
    bench = Bench(rules_of(*AIR))
    judged = bench.tick({"a.pressure": 101_300.0, "b.pressure": 99_800.0})
    assert all(one.good for one in judged.readings)
    assert {(one.channel, one.reason, one.severity) for one in bench.verdicts} == {
        ("a.pressure", DISAGREES, "doubt"),
        ("b.pressure", DISAGREES, "doubt"),
    }
    bench.tick({"a.pressure": 101_300.0, "b.pressure": 101_250.0})
    assert [one.began for one in bench.verdicts] == [True, True, False, False]


def test_of_three_the_odd_one_is_bad() -> None:
    names = ("x.pressure", "y.pressure", "z.pressure")
    bench = Bench(rules_of(GAUGE, alike=[Agreement(names, 2e4, always=True)]))
    readings = bench.tick(dict(zip(names, (6.00e5, 6.05e5, 7.1e5), strict=True))).readings
    assert [one.fault for one in readings] == ["", "", DISAGREES]


def test_gauges_need_agree_only_once_the_compressor_was_off_for_long() -> None:
    names = ("tank.pressure", "line.pressure")
    bench = Bench(Rules(dict.fromkeys(names, Rule(0, 1e7)), agreements=(Agreement(names, 2e4),)))
    apart = {"tank.pressure": 6e5, "line.pressure": 5e5}
    bench.tick(apart, running=True)
    ticks = int(OFF_LONG_S / PERIOD_S)
    for _ in range(ticks):
        bench.tick(apart, running=False)
    assert bench.verdicts == []
    bench.tick(apart, running=False)
    assert [one.severity for one in bench.verdicts] == ["doubt", "doubt"]
    bench.tick(apart, running=True)
    assert len(bench.verdicts) == 2  # they need not agree now, but nothing has shown that they do
    together = dict.fromkeys(apart, 6e5)
    bench.tick(together, running=True)
    assert len(bench.verdicts) == 2
    for _ in range(ticks + 1):
        bench.tick(together, running=False)
    assert [one.began for one in bench.verdicts] == [True, True, False, False]


def test_a_gauge_found_odd_stays_unbelieved_until_it_agrees() -> None:
    names = ("x.pressure", "y.pressure", "z.pressure")
    agreement = Agreement(names, 2e4)
    bench = Bench(Rules(dict.fromkeys(names, Rule(0, 1e7)), agreements=(agreement,)))
    odd = dict(zip(names, (6.00e5, 6.05e5, 7.1e5), strict=True))
    ticks = int(OFF_LONG_S / PERIOD_S)
    for _ in range(ticks + 1):
        readings = bench.tick(odd, running=False).readings
    assert [one.fault for one in readings] == ["", "", DISAGREES]
    readings = bench.tick(odd, running=True).readings
    assert [one.fault for one in readings] == ["", "", DISAGREES]
    bench.state = forget(bench.state, "z")  # replaced
    readings = bench.tick(odd, running=True).readings
    assert [one.fault for one in readings] == ["", "", ""]


def test_the_odd_one_of_several_is_only_doubted_where_it_may_be_true() -> None:
    names = ("x.temperature", "y.temperature", "z.temperature")
    agreement = Agreement(names, 10.0, always=True, doubt_only=True)
    bench = Bench(Rules(dict.fromkeys(names, Rule(200, 400)), agreements=(agreement,)))
    readings = bench.tick(dict(zip(names, (290.0, 291.0, 265.0), strict=True))).readings
    assert all(one.good for one in readings)
    assert [(one.channel, one.severity) for one in bench.verdicts] == [("z.temperature", "doubt")]


def test_judged_readings_give_back_what_the_part_gave() -> None:
    bench = Bench(rules_of(AIR[0]))
    bench.fault("a.temperature", 293.0)
    given = [
        Reading("a.temperature", 340.0, bench.now_us + SECOND_US),
        Reading("a.pressure", math.nan, bench.now_us + SECOND_US, "no answer"),
    ]
    judged = judge(bench.rules, bench.state, given)
    assert [one.fault for one in judged.readings] == [TOO_FAST, "no answer"]
    restored = as_given(judged.readings)
    assert restored[0] == given[0]
    assert restored[1].fault == "no answer"
    assert math.isnan(restored[1].value)


def test_a_bad_reading_passes_with_its_own_reason() -> None:
    rules = rules_of(AIR[0])
    bad = Reading("a.temperature", math.nan, START_US, "no answer")
    judged = judge(rules, QualityState(), [bad])
    assert judged.readings == (bad,)
    assert judged.verdicts == ()


def test_channels_without_a_rule_pass() -> None:
    edge = Reading("motor.contact", 1.0, START_US)
    assert judge(Rules({}), QualityState(), [edge]).readings == (edge,)


@pytest.mark.parametrize("frozen", [True, False])
def test_a_real_parts_noise_is_told_from_a_frozen_part(
    hardware: EmulatedHardware, frozen: bool
) -> None:
    part = hardware.bme280(1, 0x76)
    part.noisy = True
    sensor = open_part(AIR[0], hardware)
    rules = rules_of(AIR[0])
    sensor.read(START_US)
    state, faults = QualityState(), set()
    for tick in range(1, 3 * LIVELY_MOVES + 120):
        part.frozen = frozen and tick > 3 * LIVELY_MOVES
        now_us = START_US + tick * PERIOD_S * SECOND_US
        judged = judge(rules, state, sensor.read(now_us))
        state = judged.state
        faults |= {one.fault for one in judged.readings}
    assert faults == ({"", FROZEN} if frozen else {""})


@given(st.lists(st.tuples(st.floats(0.0, 1.2), st.sampled_from([None, True, False])), max_size=40))
def test_the_same_readings_are_judged_the_same(ticks: list[tuple[float, bool | None]]) -> None:
    benches = [Bench(rules_of(*AIR)), Bench(rules_of(*AIR))]
    for bench in benches:
        for value, running in ticks:
            bench.tick({"a.relative_humidity": value, "b.relative_humidity": 0.5}, running)
    assert benches[0].verdicts == benches[1].verdicts
    assert benches[0].state == benches[1].state


@given(st.lists(st.floats(150.0, 500.0), max_size=60))
def test_every_verdict_that_ends_had_begun(values: list[float]) -> None:
    bench = Bench(rules_of(AIR[0]))
    for value in values:
        bench.tick({"a.temperature": value})
    open_now: set[str] = set()
    for verdict in bench.verdicts:
        assert verdict.began == (verdict.reason not in open_now)
        open_now ^= {verdict.reason}
