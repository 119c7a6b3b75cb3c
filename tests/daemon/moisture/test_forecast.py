"""When a level will be reached: percentiles, dates, and traps that are drained on the way."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from daemon.clock import DAY_US, HOUR_US
from daemon.moisture.ahead import Ahead, Stretch
from daemon.moisture.forecast import NO_DATE, Due, Level, Values, due, foresee, reached
from daemon.moisture.model import Heard, Model, State
from tests.daemon.shops import BEGUN_US, site

MEMBERS = 32
MODEL = Model(site().line)
START = MODEL.initial(BEGUN_US, Heard())
TANK, BOWL = MODEL.plan.index["tank"], MODEL.plan.index["bowl"]
RATES = np.linspace(0.5, 1.5, MEMBERS)  # grams an hour, invented


class Steady(Ahead):
    """Every trap gains grams an hour, each member at its own rate."""

    def __init__(self) -> None:
        pass

    def step(self, state: State, stretch: Stretch) -> State:
        hours = (stretch.until_us - stretch.from_us) / HOUR_US
        trap = state.water.trap.copy()
        for row in (TANK, BOWL):
            trap[row] = trap[row] + RATES * 1e-3 * hours
        water = replace(state.water, trap=trap)
        return replace(state, time_us=stretch.until_us, water=water)


def hours(count: int) -> list[Stretch]:
    duty = np.full(MEMBERS, 0.5)
    return [
        Stretch(BEGUN_US + n * HOUR_US, BEGUN_US + (n + 1) * HOUR_US, duty, True)
        for n in range(count)
    ]


def contents(state: State) -> np.ndarray:
    return state.water.trap[[TANK, BOWL]]


def level(station: int, kg: float, date_us: int = NO_DATE) -> Level:
    return Level("a trap", np.full(MEMBERS, kg), date_us, station)


def test_each_member_reaches_the_level_at_its_own_rate() -> None:
    levels = [level(TANK, 0.010), level(BOWL, 0.005)]
    times = reached(Steady(), START, hours(60), levels, contents)
    assert times[0] == pytest.approx(10.0 / RATES * 3600.0, rel=1e-9)
    assert times[1] == pytest.approx(5.0 / RATES * 3600.0, rel=1e-9)


def test_what_is_not_reached_within_the_horizon_has_no_time() -> None:
    (found,) = foresee(Steady(), START, hours(11), [level(TANK, 0.010)], contents_of(TANK))
    # half of the members are at 1 g an hour or more: they need up to 10 h
    assert found.p05_us is not None
    assert found.p50_us == pytest.approx(BEGUN_US + 10 * HOUR_US, abs=HOUR_US / 2)
    assert found.p95_us is None
    assert found.because == "volume"
    (none,) = foresee(Steady(), START, hours(4), [level(TANK, 0.010)], contents_of(TANK))
    assert none == Due(None, None, None, None)


def contents_of(station: int) -> Values:
    return lambda state: state.water.trap[[station]]


def test_a_level_that_is_reached_already_is_due_now() -> None:
    trap = START.water.trap.copy()
    trap[TANK] = 0.020
    full = replace(START, water=replace(START.water, trap=trap))
    (found,) = foresee(Steady(), full, hours(4), [level(TANK, 0.010)], contents_of(TANK))
    assert (found.p05_us, found.p50_us, found.p95_us) == (BEGUN_US,) * 3


def test_a_date_that_comes_first_is_when_it_is_due() -> None:
    date_us = BEGUN_US + 5 * HOUR_US
    (found,) = foresee(Steady(), START, hours(60), [level(TANK, 0.1, date_us)], contents_of(TANK))
    assert found == Due(date_us, date_us, date_us, "calendar")


def test_volume_or_date_whichever_comes_first_in_each_member() -> None:
    date_us = BEGUN_US + 10 * HOUR_US
    (found,) = foresee(Steady(), START, hours(60), [level(TANK, 0.008, date_us)], contents_of(TANK))
    assert found.p05_us is not None
    assert found.p05_us < BEGUN_US + 6 * HOUR_US  # the quickest need 5.3 h
    assert found.p95_us == date_us  # the slowest would need 16 h
    assert found.because == "volume"
    later = due(0, 60 * HOUR_US, np.array([math.inf, math.inf, 3600.0]), 2 * HOUR_US)
    assert (later.p50_us, later.because) == (2 * HOUR_US, "calendar")


def test_a_date_beyond_the_horizon_still_counts() -> None:
    date_us = 30 * DAY_US
    found = due(0, 10 * DAY_US, np.full(8, math.inf), date_us)
    assert found == Due(date_us, date_us, date_us, "calendar")


def test_an_overdue_date_is_due_at_once() -> None:
    found = due(5 * HOUR_US, 10 * DAY_US, np.full(8, math.inf), 2 * HOUR_US)
    assert (found.p05_us, found.p95_us) == (5 * HOUR_US, 5 * HOUR_US)


def test_a_trap_is_taken_to_be_drained_when_it_is_due() -> None:
    class Watching(Steady):
        most = 0.0

        def step(self, state: State, stretch: Stretch) -> State:
            after = super().step(state, stretch)
            Watching.most = max(Watching.most, float(after.water.trap[TANK].max()))
            return after

    levels = [level(TANK, 0.010), level(BOWL, 0.060)]
    reached(Watching(), START, hours(200), levels, contents)
    assert 0.010 <= Watching.most < 0.0120  # drained each time, though the bowl needs days
    dated = [level(TANK, 1.0, BEGUN_US + 3 * HOUR_US), level(BOWL, 0.060)]
    Watching.most = 0.0
    reached(Watching(), START, hours(7), dated, contents)
    assert Watching.most < 0.0065  # four hours since its date at most


def test_looking_ahead_ends_when_nothing_more_can_change() -> None:
    class Counting(Steady):
        steps = 0

        def step(self, state: State, stretch: Stretch) -> State:
            Counting.steps += 1
            return super().step(state, stretch)

    dated = level(TANK, 1.0, BEGUN_US + 6 * HOUR_US)
    reached(Counting(), START, hours(240), [dated, level(BOWL, 0.002)], contents)
    assert Counting.steps == 6
