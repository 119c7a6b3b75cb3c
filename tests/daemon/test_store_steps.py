"""What channels come to by the hour and by other steps, against plain recomputation.

All values are invented; the expected ones are reckoned here from the readings themselves, or by
`daemon.moisture.contact`, which the model integrates contacts with.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from daemon.clock import DAY_US, HOUR_US, MINUTE_US, SECOND_US
from daemon.moisture.contact import ContactState, integrate
from daemon.store.store import Store
from daemon.views import StepsOfReadings
from sensors.reading import Reading
from tests.daemon.sealed import (
    CHANNELS,
    MOTOR,
    PRESSURE,
    T0,
    TICK,
    Record,
    fill,
    record,
    records,
    seal_all,
)


@pytest.fixture
def store(tmp_path: Path) -> Iterator[Store]:
    with Store.open(tmp_path / "dripleg.db", CHANNELS) as opened:
        yield opened


def assert_plain(found: StepsOfReadings, ticks: Record) -> None:
    """Counts, extremes and sums are those of the readings, taken one by one."""
    mine = [r for _, readings in ticks for r in readings if r.channel == found.channel]
    for number, start_us in enumerate(found.start_us.tolist()):
        inside = [r for r in mine if start_us <= r.time_us < start_us + found.step_us]
        good = [r.value for r in inside if not r.fault and math.isfinite(r.value)]
        assert found.count[number] == len(good)
        assert found.bad[number] == len(inside) - len(good)
        if good:
            assert (found.least[number], found.greatest[number]) == (min(good), max(good))
            size = math.fsum(abs(each) for each in good)
            assert found.total[number] == pytest.approx(math.fsum(good), abs=1e-12 * size)
        else:
            assert np.isnan([found.least[number], found.greatest[number], found.mean[number]]).all()


@settings(
    max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(records(), st.sampled_from([HOUR_US, 3 * HOUR_US, 7 * MINUTE_US, DAY_US]), st.booleans())
def test_steps_are_those_of_the_readings_sealed_or_not(
    tmp_path_factory: pytest.TempPathFactory, ticks: Record, step_us: int, aligned: bool
) -> None:
    from_us = T0 - 4 * HOUR_US + (0 if aligned else 123 * SECOND_US)
    with Store.open(tmp_path_factory.mktemp("store") / "a.db", CHANNELS) as store:
        fill(store, ticks)
        while True:
            for name in CHANNELS:
                assert_plain(store.steps(name, from_us, T0 + 5 * HOUR_US, step_us), ticks)
            if not store.seal_next():
                break


def test_hours_begin_within_the_span_and_are_whole(store: Store) -> None:
    fill(store, record(3.1))
    for _ in range(2):
        hours = store.hours(PRESSURE.name, T0 - 1, T0 + 2 * HOUR_US + 1)
        assert hours.start_us.tolist() == [T0, T0 + HOUR_US, T0 + 2 * HOUR_US]
        assert hours.count.tolist() == [360, 360, 360]
        assert store.hours(PRESSURE.name, T0 + 1, T0 + HOUR_US).start_us.tolist() == []
        seal_all(store)


def test_hours_are_read_without_unpacking(store: Store, monkeypatch: pytest.MonkeyPatch) -> None:
    fill(store, record(3.1))
    seal_all(store)

    def refuse(*_: object) -> None:
        raise AssertionError("a sealed hour was unpacked")

    monkeypatch.setattr("daemon.store.ticks.open_column", refuse)
    assert store.hours(PRESSURE.name, T0, T0 + 4 * HOUR_US).count.tolist() == [360, 360, 360, 36]
    assert store.steps(PRESSURE.name, T0, T0 + DAY_US, DAY_US).count.tolist() == [3 * 360 + 36]


def test_a_contact_s_share_is_that_of_the_model_s_own_integral(store: Store) -> None:
    """Edges at odd times: the mean of the samples is another figure."""
    ticks = record(4.0)
    fill(store, ticks)
    mine = [r for _, readings in ticks for r in readings if r.channel == MOTOR.name]
    contact, expected = ContactState(), []
    for hour in range(3):
        begin, end = T0 + hour * HOUR_US, T0 + (hour + 1) * HOUR_US
        inside = [(r.time_us, r.value, r.good) for r in mine if begin < r.time_us <= end]
        if hour == 0:
            inside.insert(0, (T0, mine[0].value, True))
        contact, time = integrate(contact, inside, begin, end, TICK)
        expected.append((time.on_us, HOUR_US - time.unknown_us))
    for _ in range(2):
        hours = store.hours(MOTOR.name, T0, T0 + 3 * HOUR_US)
        found = list(zip((hours.held_total * 1e6).round().tolist(), hours.held_us, strict=True))
        assert found == expected
        assert not np.allclose(hours.mean, hours.held_mean, rtol=1e-3)
        seal_all(store)


def test_a_contact_that_only_tells_of_changes_holds_over_silent_hours(store: Store) -> None:
    edges = [(T0 + 5 * MINUTE_US, 1.0), (T0 + 150 * MINUTE_US, 0.0)]
    said = {
        at_us - at_us % TICK + TICK: Reading(MOTOR.name, value, at_us) for at_us, value in edges
    }
    ticks = [
        (each, [said[each]] if each in said else [])
        for each in range(T0, T0 + 4 * HOUR_US + TICK, TICK)
    ]
    fill(store, ticks)
    for _ in range(2):
        hours = store.hours(MOTOR.name, T0, T0 + 4 * HOUR_US)
        assert (hours.held_us // MINUTE_US).tolist() == [55, 60, 60, 60]
        assert hours.held_mean.tolist() == [1.0, 1.0, 0.5, 0.0]
        assert np.isnan(hours.mean[1])  # not a single reading stands in it
        late = store.hours(MOTOR.name, T0 + HOUR_US, T0 + 2 * HOUR_US)
        assert late.held_mean.tolist() == [1.0]
        odd = store.steps(MOTOR.name, T0 + 145 * MINUTE_US, T0 + 155 * MINUTE_US, 10 * MINUTE_US)
        assert odd.held_mean.tolist() == [0.5]
        seal_all(store)


def test_a_sampled_value_does_not_hold_through_a_silence(store: Store) -> None:
    """Half an hour away: known are 30 s of it, as the model has it."""
    fill(store, [*record(0.5), *record(0.1, T0 + HOUR_US)])
    for _ in range(2):
        hours = store.hours(PRESSURE.name, T0, T0 + 2 * HOUR_US)
        last = T0 + round(0.5 * HOUR_US) - TICK
        assert hours.held_us.tolist() == [last + 30 * SECOND_US - T0, 35 * TICK]
        seal_all(store)


def test_a_bad_reading_ends_what_held_before_it(store: Store) -> None:
    ticks = record(1.2)
    for tick_us, readings in ticks[100:200]:
        readings[0] = Reading(PRESSURE.name, math.nan, tick_us, "no answer")
    fill(store, ticks)
    for _ in range(2):
        hours = store.hours(PRESSURE.name, T0, T0 + HOUR_US)
        assert (hours.count[0], hours.bad[0]) == (260, 100)
        assert hours.held_us[0] == HOUR_US - 100 * TICK
        seal_all(store)


def test_nothing_is_known_of_what_has_not_come_yet(store: Store) -> None:
    fill(store, record(0.5))
    hours = store.hours(PRESSURE.name, T0, T0 + 3 * HOUR_US)
    assert hours.held_us.tolist() == [179 * TICK, 0, 0]
    assert np.isnan(hours.held_mean[1:]).all()


def test_late_readings_within_a_sealed_hour_are_reckoned_in(store: Store) -> None:
    """One that came with a tick two hours later lies within the others of its hour."""
    ticks = record(3.1)
    late = Reading(MOTOR.name, 1.0, T0 + 100 * TICK + 1)
    ticks[2 * 360 + 50][1].append(late)
    fill(store, ticks)
    before = store.hours(MOTOR.name, T0, T0 + 3 * HOUR_US)
    seal_all(store)
    after = store.hours(MOTOR.name, T0, T0 + 3 * HOUR_US)
    assert_plain(after, ticks)
    assert after.held_us.tolist() == before.held_us.tolist() == [HOUR_US] * 3
    assert after.held_total.tolist() == pytest.approx(before.held_total.tolist(), rel=1e-12)


def test_a_channel_that_never_spoke_has_empty_steps(store: Store) -> None:
    fill(store, record(1.1))
    steps = store.steps("gun.pressure", T0, T0 + HOUR_US, 10 * MINUTE_US)
    assert steps.count.tolist() == [0] * 6
    assert np.isnan(steps.mean).all()
