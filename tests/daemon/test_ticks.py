"""Where ticks stand, and what each takes in."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from daemon.clock import DAY_US, HOUR_US, SECOND_US, parse_rfc3339
from daemon.journal import Drain, Entry
from daemon.ticks import SILENCE_US, Tick, first_at_or_after, next_tick, ticks
from sensors.reading import Reading

GRID_US = parse_rfc3339("2026-03-02T07:00:03Z")
PERIOD_US = 10 * SECOND_US


def heard(*times_us: int, good: bool = True) -> list[Reading]:
    fault = "" if good else "no answer"
    return [Reading("c", 1.0 if good else math.nan, time_us, fault) for time_us in times_us]


def told(*times_us: int) -> list[Entry]:
    return [Entry(n, at_us, at_us, Drain("tank")) for n, at_us in enumerate(times_us, 1)]


def run(
    readings: list[Reading], entries: list[Entry], end_us: int, last_us: int = GRID_US
) -> list[Tick]:
    return list(ticks(GRID_US, PERIOD_US, last_us, last_us, readings, entries, end_us))


@given(st.integers(-(10**15), 10**15), st.integers(1, 10**10), st.integers(-(10**15), 10**15))
def test_the_first_point_of_the_grid_that_is_not_before_a_time(
    grid_us: int, period_us: int, time_us: int
) -> None:
    found = first_at_or_after(grid_us, period_us, time_us)
    assert (found - grid_us) % period_us == 0
    assert time_us <= found < time_us + period_us


def test_each_tick_takes_in_what_came_since_the_last_one_up_to_its_own_time() -> None:
    at = [GRID_US + n * SECOND_US for n in (1, 10, 11, 25)]
    found = run(heard(*at), told(at[1], at[2]), GRID_US + 25 * SECOND_US)
    assert [each.now_us - GRID_US for each in found] == [n * PERIOD_US for n in (1, 2, 3)]
    assert [[r.time_us for r in each.inputs.readings] for each in found] == [
        at[:2],
        at[2:3],
        at[3:],
    ]
    assert [[e.at_us for e in each.inputs.entries] for each in found] == [[at[1]], [at[2]], []]


def test_ticks_without_anything_are_made_all_the_same() -> None:
    found = run([], [], GRID_US + HOUR_US)
    assert len(found) == 360
    assert all(not each.inputs.readings and not each.inputs.entries for each in found)


def test_nothing_is_to_be_done_at_the_end() -> None:
    assert run([], [], GRID_US) == []


def test_after_a_day_of_silence_ticks_stand_at_full_hours() -> None:
    last = GRID_US + SILENCE_US
    found = run([], [], GRID_US + SILENCE_US + 3 * HOUR_US)
    times = [each.now_us for each in found]
    assert max(time for time in times if (time - GRID_US) % PERIOD_US == 0) == last
    after = [time for time in times if time > last]
    assert all(time % HOUR_US == 0 for time in after)
    assert len(after) == 4  # the end lies within an hour, and the tick at its end holds it


def test_silence_ends_with_the_tick_that_takes_in_the_next_good_reading() -> None:
    resumed_us = GRID_US + 2 * DAY_US + 1234 * SECOND_US
    readings = [
        *heard(GRID_US + DAY_US + HOUR_US, good=False),
        *heard(resumed_us),
    ]
    found = run(readings, told(resumed_us - 90 * 60 * SECOND_US), resumed_us + 20 * SECOND_US)
    times = [each.now_us for each in found]
    resumed = next(n for n, each in enumerate(found) if resumed_us in readings_of(each))
    assert times[resumed] == first_at_or_after(GRID_US, PERIOD_US, resumed_us)
    assert times[resumed - 1] % HOUR_US == 0
    assert times[resumed + 1] - times[resumed] == PERIOD_US
    whole = [time for each in found for time in readings_of(each)]
    assert whole == [reading.time_us for reading in readings]
    assert sum(len(each.inputs.entries) for each in found) == 1


def readings_of(tick: Tick) -> list[int]:
    return [reading.time_us for reading in tick.inputs.readings]


def test_bad_readings_alone_are_silence_too() -> None:
    last_us = GRID_US + 2 * DAY_US
    soon_us = last_us + 5 * SECOND_US
    assert next_tick(GRID_US, PERIOD_US, last_us, GRID_US, soon_us + DAY_US) % HOUR_US == 0
    found = list(
        ticks(
            GRID_US,
            PERIOD_US,
            last_us,
            GRID_US,
            heard(soon_us, good=False),
            [],
            soon_us,
        )
    )
    assert [each.now_us % HOUR_US for each in found] == [0]


@given(
    st.lists(st.integers(1, 3 * DAY_US // SECOND_US), max_size=30),
    st.lists(st.integers(1, 3 * DAY_US // SECOND_US), max_size=5),
    st.sampled_from([SECOND_US, PERIOD_US, 60 * SECOND_US]),
)
def test_nothing_is_left_out_and_nothing_comes_twice(
    heard_s: list[int], told_s: list[int], period_us: int
) -> None:
    readings = heard(*sorted(GRID_US + s * SECOND_US for s in heard_s))
    entries = told(*sorted(GRID_US + s * SECOND_US for s in told_s))
    end_us = max([GRID_US, *(r.time_us for r in readings), *(e.at_us for e in entries)])
    found = list(ticks(GRID_US, 60 * period_us, GRID_US, GRID_US, readings, entries, end_us))
    assert [r for each in found for r in each.inputs.readings] == readings
    assert [e for each in found for e in each.inputs.entries] == entries
    last_us = GRID_US
    for each in found:
        assert each.now_us > last_us
        for reading in each.inputs.readings:
            assert last_us < reading.time_us <= each.now_us
        last_us = each.now_us
    assert not found or found[-1].now_us >= end_us


def test_a_grid_may_be_split_anywhere() -> None:
    """A restart goes on with the ticks that one run would have made."""
    at = [GRID_US + n * 7 * SECOND_US for n in range(1, 40)]
    whole = run(heard(*at), [], at[-1])
    cut = whole[10].now_us
    first = [each for each in heard(*at) if each.time_us <= cut]
    rest = [each for each in heard(*at) if each.time_us > cut]
    again = run(first, [], cut) + list(
        ticks(GRID_US, PERIOD_US, cut, first[-1].time_us, rest, [], at[-1])
    )
    assert [(each.now_us, readings_of(each)) for each in again] == [
        (each.now_us, readings_of(each)) for each in whole
    ]


@pytest.mark.parametrize("hours", [1, 30, 24 * 40])
def test_a_long_absence_is_passed_in_hours(hours: int) -> None:
    resumed_us = GRID_US + DAY_US + hours * HOUR_US
    found = run(heard(resumed_us), [], resumed_us)
    assert len(found) <= 8640 + hours + 2
