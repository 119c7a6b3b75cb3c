"""Drains that empty themselves: what they leave while they work. Figures invented."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from daemon.moisture import drains
from daemon.moisture.description import (
    DrainKind,
    Emptying,
    Fixed,
    Like,
    Outlet,
    Share,
    Station,
    Trap,
)
from daemon.moisture.drains import Opening
from daemon.moisture.ensemble import Array
from daemon.moisture.model import Heard, Model, State
from tests.daemon.moisture.test_balance import INTAKE, line, receiver
from tests.daemon.moisture.test_drying import TICK, after_tank, run
from tests.daemon.shops import BEGUN_US

DAY_US = 86_400_000_000
ALL = np.ones(3)


def trapped(kind: DrainKind, emptying: Emptying | None = None, heel_kg: float = 0.0) -> Station:
    """A cold bowl behind the tank, which catches all that comes: some 50 g an hour."""
    trap = Trap(kind, Fixed(1.0, 0.0), 0.1, Share(1.0, 0.0), heel_kg, emptying=emptying)
    return Station(
        "bowl", "separator", "tank", Fixed(278.15, 0.0), Like("tank", 0.0, 0.0), trap=trap
    )


def bowl(state: State) -> Array:
    return np.asarray(state.water.trap[2])


def passed(state: State) -> Array:
    return np.asarray(state.ledger.passed[2])


# --- the law ---------------------------------------------------------------------------------


def opening(kind: DrainKind, most: float, opened: float = 0.0) -> Opening:
    return Opening(kind, 0.03 * ALL, 0.01, most * ALL, opened * ALL)


@pytest.mark.parametrize(
    ("drain", "held", "left"),
    [
        (opening("float", 1.0), 0.02, 0.02),
        (opening("float", 1.0), 0.08, 0.03),
        (opening("float", 0.01), 0.08, 0.07),
        (opening("timer", 0.0), 0.08, 0.08),
        (opening("timer", 0.05), 0.08, 0.03),
        (opening("timer", 1.0), 0.08, 0.0),
        (opening("level", 1.0), 0.02, 0.02),
        (opening("level", 1.0), 0.03, 0.01),
        (opening("level", 1.0, opened=1.0), 0.02, 0.01),
        (opening("level", 0.005), 0.03, 0.025),
        (opening("pressure-off", 0.0), 0.08, 0.08),
        (opening("pressure-off", 0.0, opened=1.0), 0.08, 0.01),
    ],
)
def test_what_a_working_drain_leaves(drain: Opening, held: float, left: float) -> None:
    assert drain.left(held * ALL) == pytest.approx(left * ALL, abs=1e-12)


@pytest.mark.parametrize(
    ("drain", "held", "behind"),
    [
        (opening("float", 0.01), 0.08, 1.0),
        (opening("float", 1.0), 0.08, 0.0),
        (opening("timer", 0.05), 0.08, 1.0),
        (opening("timer", 0.0), 0.08, 0.0),
        (opening("level", 0.01), 0.08, 1.0),
        (opening("level", 1.0), 0.08, 0.0),
    ],
)
def test_a_drain_says_when_more_comes_than_it_can_pass(
    drain: Opening, held: float, behind: float
) -> None:
    drain.left(held * ALL)
    assert drain.limited == behind


def test_the_chance_that_a_drain_is_stuck_is_a_tenth_in_a_year_and_nothing_when_just_seen() -> None:
    """Common practice, no source: 10 % a year, and so 19 % in two."""
    year_us = round(365.25 * DAY_US)
    assert drains.chance_stuck(0, 0) == 0.0
    assert drains.chance_stuck(0, year_us) == pytest.approx(0.10)
    assert drains.chance_stuck(0, 2 * year_us) == pytest.approx(0.19)
    assert drains.chance_stuck(year_us, 0) == 0.0


def test_a_timer_blows_once_a_period_at_a_time_that_nobody_knows() -> None:
    phase = np.linspace(-2.0, 2.0, 101)
    counts = np.zeros(101)
    for number in range(180):
        at_us = BEGUN_US + number * 10_000_000
        counts += drains.blows(phase, 600.0, at_us, at_us + 10_000_000)
    assert np.all(counts == 3.0)
    first = drains.blows(phase, 600.0, BEGUN_US, BEGUN_US + 300_000_000)
    assert 0.2 < first.mean() < 0.8


# --- in the line -----------------------------------------------------------------------------


def test_a_float_holds_its_bowl_at_its_lift_level() -> None:
    how = Emptying(Fixed(0.02, 0.0), 0.0, Fixed(1e-2, 0.0))
    state = run(after_tank(trapped("float", how)), 720)
    assert np.allclose(bowl(state), 0.02)
    by_hand = run(after_tank(trapped("petcock")), 720)
    assert by_hand.ledger.passed.max() == 0.0
    assert np.allclose(bowl(state) + passed(state), bowl(by_hand))


def test_a_float_that_cannot_pass_all_that_comes_lets_its_bowl_fill() -> None:
    how = Emptying(Fixed(0.02, 0.0), 0.0, Fixed(5e-6, 0.0))
    state = run(after_tank(trapped("float", how)), 720)
    assert bowl(state).min() > 0.03
    assert state.fittings.limited == (1.0,)


def test_a_timer_leaves_what_came_since_its_last_blow() -> None:
    how = Emptying(Fixed(0.0, 0.0), 0.0, Fixed(0.1, 0.0), period_s=1800.0, open_s=5.0)
    state = run(after_tank(trapped("timer", how)), 720)
    by_hand = run(after_tank(trapped("petcock")), 720)
    per_s = bowl(by_hand) / 7190.0
    assert np.all(bowl(state) <= per_s * 1810.0 * 1.1)
    assert 0.2 < float(np.median(bowl(state) / (per_s * 1800.0))) < 0.8
    assert np.allclose(bowl(state) + passed(state), bowl(by_hand))


def test_a_level_drain_goes_down_to_its_lower_level_and_fills_again() -> None:
    how = Emptying(Fixed(0.03, 0.0), 0.01, Fixed(1e-3, 0.0))
    state, seen = None, []
    for _ in range(24):
        state = run(after_tank(trapped("level", how), 4), 30, state)
        seen.append(bowl(state)[0])
    assert state is not None
    assert 0.0 < min(seen[8:]) < 0.02 < max(seen) <= 0.031
    assert min(seen[8:]) >= 0.01
    assert passed(state).min() >= 0.02 - 1e-9


def test_a_drain_that_opens_without_pressure_empties_when_the_line_is_let_down() -> None:
    described = after_tank(trapped("pressure-off", heel_kg=0.001))
    full = run(described, 360)
    assert full.ledger.passed.max() == 0.0
    down = run(described, 2, full, motor__contact=0.0, tank__pressure=2e4)
    assert np.allclose(bowl(down), 0.001)


def still(tank_pa: float, minutes: int, state: State | None = None) -> tuple[Model, State]:
    """A tank at rest with half a litre in it, a tick every five minutes."""
    tank = receiver("tank", "intake")
    assert tank.trap is not None
    tank = replace(tank, trap=replace(tank.trap, holds_at_start_kg=0.5, heel_kg=0.002))
    description = replace(line([INTAKE, tank], [Outlet("hose", "tank", 1.0)], 128), period_s=300.0)
    model = Model(description)
    values = TICK | {"tank.pressure": tank_pa, "motor.contact": 0.0}
    begun_us = BEGUN_US if state is None else state.time_us
    for number in range(1, minutes // 5 + 1):
        now_us = begun_us + number * 300_000_000
        heard = Heard({name: [(now_us, value, True)] for name, value in values.items()})
        state = (
            model.initial(now_us, heard) if state is None else model.step(state, now_us, heard)[0]
        )
    assert state is not None
    return model, state


def test_a_tank_without_pressure_for_an_hour_is_taken_to_be_empty_by_most() -> None:
    """A tank left open at 0 bar overnight is empty: practice; four members in five believe it."""
    _, before = still(5e5, 30)
    _, soon = still(500.0, 55, before)
    assert np.allclose(soon.water.trap[1], before.water.trap[1], atol=0.02)
    _, later = still(500.0, 20, soon)
    held = later.water.trap[1]
    assert np.count_nonzero(held <= 0.002 + 1e-12) == pytest.approx(0.8 * 128, abs=1)
    assert held.max() > 0.4
    empty = held <= 0.0021
    gone = soon.water.trap[1][empty] - 0.002
    assert np.allclose(later.ledger.passed[1][empty], gone, atol=0.02)
    later.ledger.check(later.water)


def test_a_tank_whose_air_leaks_away_keeps_its_water() -> None:
    """A leak loses its last bar in hours, not in minutes; so does a tank that nobody heard fall."""
    _, leaking = still(0.8e5, 30, still(5e5, 30)[1])
    _, later = still(500.0, 300, leaking)
    assert later.water.trap[1].min() > 0.4
    assert later.ledger.passed.max() == 0.0
    _, again = still(500.0, 120, still(5e5, 30, later)[1])  # pumped up, and let down in one go
    assert np.count_nonzero(again.water.trap[1] <= 0.0021) == pytest.approx(0.8 * 128, abs=1)
    _, from_the_start = still(500.0, 300)
    assert from_the_start.water.trap[1].min() > 0.4


def test_a_tank_under_pressure_keeps_its_water() -> None:
    _, state = still(0.3e5, 300)
    assert state.water.trap[1].min() > 0.4
    assert state.ledger.passed.max() == 0.0
