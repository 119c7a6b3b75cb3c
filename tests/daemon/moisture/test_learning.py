"""The update that a measured drain makes, against exact answers where there are any."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from daemon.advance import Core
from daemon.journal import Body, Confirm, Drain, Entry, Service
from daemon.moisture import beliefs as believed
from daemon.moisture import learning
from daemon.moisture.ensemble import standard_normal
from daemon.moisture.learning import CupError, Suspect, prepare, update_beliefs
from daemon.moisture.plan import plan_line
from daemon.state import CoreState, Inputs
from tests.daemon.shops import SITE, site, working

MANY = 8192
CUP = CupError()


def known_as(gain: float, offset: float, measured: float, sd: float, on: np.ndarray) -> Suspect:
    """A measurement of `gain * on + offset` with an error of its own."""
    expected = gain * on + offset
    return Suspect(expected, measured, sd, measured > offset)


# ---- the linear Gaussian case: the Kalman filter's answer is exact there (R. E. Kalman, "A new
# approach to linear filtering and prediction problems", J. Basic Eng. 82, 1960) ----


@pytest.mark.parametrize(
    ("gain", "offset", "measured", "sd"),
    [(0.4, 5.0, 5.5, 0.2), (-0.3, 0.0, 0.4, 0.3), (1.0, 2.0, 1.0, 0.05), (0.2, -3.0, -3.0, 1.0)],
)
def test_a_figure_moves_as_the_kalman_filter_says(
    gain: float, offset: float, measured: float, sd: float
) -> None:
    prior = standard_normal(1, "a figure", MANY)
    update, factor = prepare(known_as(gain, offset, measured, sd, prior), 1, "tank", 7, False)
    after = prior + update.shift(prior)
    kalman = gain / (gain**2 + sd**2)
    variance = 1.0 - kalman * gain
    assert factor == 1.0
    # five standard errors of a mean and of a variance over so many members
    assert after.mean() == pytest.approx(kalman * (measured - offset), abs=5 / math.sqrt(MANY))
    assert after.var() == pytest.approx(variance, abs=5 * math.sqrt(2 / MANY))


def test_two_figures_share_a_miss_as_their_part_in_it() -> None:
    first, second = standard_normal(1, "first", MANY), standard_normal(1, "second", MANY)
    expected = 0.3 * first - 0.1 * second
    update, _ = prepare(Suspect(expected, 0.5, 0.2, True), 1, "tank", 3, False)
    variance = 0.3**2 + 0.1**2 + 0.2**2
    noise = 5 / math.sqrt(MANY)
    assert update.shift(first).mean() == pytest.approx(0.3 / variance * 0.5, abs=noise)
    assert update.shift(second).mean() == pytest.approx(-0.1 / variance * 0.5, abs=noise)


def test_a_figure_that_has_no_part_keeps_its_spread_over_500_drains() -> None:
    members = 128
    unrelated = standard_normal(1, "unrelated", members)
    for number in range(500):
        other = standard_normal(1, "what is measured", members, number)
        update, _ = prepare(known_as(0.3, 0.0, 0.1, 0.1, other), 1, "tank", number, False)
        unrelated = update_beliefs({"f": unrelated}, ["f"], update, 1.0, 1, number)["f"]
    # a plain filter leaves 0.16 of it: chance takes 1/128 of the variance each time
    assert unrelated.std() > 0.6


# ---- kept honest ----


def test_part_of_the_lost_spread_is_given_back_and_a_little_is_forgotten() -> None:
    prior = standard_normal(1, "a figure", MANY)
    update, _ = prepare(known_as(0.4, 0.0, 0.4, 0.2, prior), 1, "tank", 7, False)
    after = update_beliefs({"a figure": prior}, ["a figure"], update, 1.0, 1, 7)["a figure"]
    kalman = 0.4 / (0.4**2 + 0.2**2)
    sd = math.sqrt(1.0 - kalman * 0.4)
    given_back = sd + learning.GIVEN_BACK * (1.0 - sd)
    keeps = learning.KEEPS
    assert after.mean() == pytest.approx(keeps * kalman * 0.4, abs=5 / math.sqrt(MANY))
    assert after.std() == pytest.approx(
        math.sqrt((keeps * given_back) ** 2 + 1.0 - keeps**2), abs=5 / math.sqrt(2 * MANY)
    )


def test_no_belief_ever_falls_below_the_floor_or_leaves_its_range() -> None:
    figure = standard_normal(1, "a figure", 128)
    for number in range(200):
        seen = known_as(1.0, 0.0, 9.0, 0.001, figure)
        update, _ = prepare(seen, 1, "tank", number, False)
        figure = update_beliefs({"f": figure}, ["f"], update, 1.0, 1, number)["f"]
        assert figure.max() <= learning.FARTHEST
        assert figure.std(ddof=1) >= 0.95 * learning.LEAST_SD
    assert figure.max() > 0.95 * learning.FARTHEST


def test_what_was_learned_is_slowly_forgotten_where_nothing_confirms_it() -> None:
    figure = 1.5 + 0.2 * standard_normal(1, "a figure", 128)
    other = standard_normal(1, "another", 128)
    middle, spread = figure.mean(), figure.std()
    for number in range(300):
        seen = known_as(1e-6, 0.0, 0.0, 1.0, other)
        update, _ = prepare(seen, 1, "tank", number, False)
        figure = update_beliefs({"f": figure}, ["f"], update, 1.0, 1, number)["f"]
    assert figure.mean() == pytest.approx(middle * learning.KEEPS**300, abs=0.1)
    assert figure.std() > 2.0 * spread


def test_a_confirmed_surprise_widens_what_was_believed_first() -> None:
    prior = standard_normal(1, "a figure", MANY)
    seen = known_as(0.1, 0.0, 0.6, 0.03, prior)  # 5.7 sigmas
    update, factor = prepare(seen, 1, "tank", 7, True)
    needed = math.sqrt((0.6 / learning.WIDENED_TO_SIGMAS) ** 2 - 0.03**2) / 0.1
    assert factor == pytest.approx(min(needed, learning.MOST_WIDENED), rel=1e-3)
    assert update.variance == pytest.approx((factor * 0.1) ** 2 + 0.03**2, rel=1e-3)


# ---- which figures ----


def test_a_drain_teaches_its_own_station_those_upstream_and_the_common_figures() -> None:
    plan = plan_line(site().line)
    names = learning.local_names(plan, plan.index["riser"])
    assert believed.separation_of("riser") in names
    assert believed.separation_of("tank") in names
    assert believed.separation_of("bowl") not in names
    assert believed.round_of("riser") in names
    assert believed.round_of("tank") not in names
    assert {believed.DELIVERED, believed.CUP, believed.POOL, believed.HUMIDITY} <= set(names)
    assert set(names) <= set(believed.names(plan))


# ---- through the core ----


def an_afternoon(members: int = 64, ticks: int = 900) -> tuple[Core, CoreState]:
    """Birch Works after two and a half hours of work in moist air."""
    text = SITE.replace("members = 32", f"members = {members}")
    shop = site(text)
    core = Core(shop)
    state: CoreState | None = None
    for now_us, readings in working(shop, ticks, humidity=0.85):
        told = Inputs(readings)
        state = (
            core.initial(now_us, told) if state is None else core.advance(state, now_us, told)
        )[0]
    assert state is not None
    return core, state


@pytest.fixture(scope="module")
def afternoon() -> tuple[Core, CoreState]:
    return an_afternoon()


def tell(core: Core, state: CoreState, body: Body, seq: int = 1) -> CoreState:
    """The state after one entry dated now."""
    return core.take(state, [Entry(seq, state.time_us, state.time_us, body)])[0]


def held(core: Core, state: CoreState, trap: str) -> np.ndarray:
    row = core.model.plan.index[trap]
    contents: np.ndarray = core.model.contents(state.model)[row]
    return contents


def expected_kg(core: Core, state: CoreState, trap: str) -> float:
    """What the cup is expected to show, in the middle."""
    shown = learning.expectation(held(core, state, trap), state.model.beliefs, CUP)
    return float(np.median(shown))


def differing(one: CoreState, other: CoreState) -> list[str]:
    """The beliefs that are not the same."""
    return [
        name
        for name, values in one.model.beliefs.items()
        if not np.array_equal(values, other.model.beliefs[name])
    ]


def test_more_water_than_expected_means_that_the_tank_is_colder(
    afternoon: tuple[Core, CoreState],
) -> None:
    core, state = afternoon
    much = 1.3 * expected_kg(core, state, "tank")
    after = tell(core, state, Drain("tank", "emptied", much))
    assert held(core, after, "tank").max() == 0.0
    warmth = believed.temperature_of("tank")  # the largest of what is not known there
    assert after.model.beliefs[warmth].mean() < state.model.beliefs[warmth].mean() - 0.2
    assert after.model.beliefs[warmth].std() < state.model.beliefs[warmth].std()


def test_the_water_balance_holds_with_what_learning_corrected(
    afternoon: tuple[Core, CoreState],
) -> None:
    core, state = afternoon
    for number, trap in enumerate(("bowl", "riser", "tank")):
        volume = (0.8, 1.2, 1.25)[number] * expected_kg(core, state, trap)
        state = tell(core, state, Drain(trap, "emptied", volume), number + 1)
        ledger = state.model.ledger
        assert ledger.residual(state.model.water).max() < 1e-9
        assert np.abs(ledger.corrected).max() > 1e-4
    without = replace(state.model.ledger, corrected=np.zeros_like(state.model.ledger.corrected))
    assert without.residual(state.model.water).max() > 1e-9


def test_a_slip_of_the_pen_is_flagged_and_not_learned_from(
    afternoon: tuple[Core, CoreState],
) -> None:
    core, state = afternoon
    ten_times = 10.0 * expected_kg(core, state, "tank")
    entry = Entry(1, state.time_us, state.time_us, Drain("tank", "emptied", ten_times))
    after, estimate, _ = core.take(state, [entry])
    (learned,) = estimate.learned
    assert learned.flagged
    assert learned.sigmas > learning.SUSPECT_SIGMAS
    assert differing(state, after) == [believed.round_of("tank")]  # a new round has begun
    assert held(core, after, "tank").max() == 0.0  # emptied all the same
    assert after.traps["tank"].suspect is not None


def test_a_confirmed_surprise_is_learned_from(afternoon: tuple[Core, CoreState]) -> None:
    core, state = afternoon
    much = 5.0 * expected_kg(core, state, "tank")
    flagged = tell(core, state, Drain("tank", "emptied", much))
    after = tell(core, flagged, Confirm("tank"), 2)
    assert after.traps["tank"].suspect is None
    separation = believed.separation_of("tank")
    assert after.model.beliefs[separation].mean() > flagged.model.beliefs[separation].mean() + 0.3
    assert after.model.ledger.residual(after.model.water).max() < 1e-9
    assert not differing(tell(core, state, Confirm("tank"), 2), state)  # nothing to confirm


@pytest.mark.parametrize(("second", "learned_from"), [(5.0, True), (0.02, False)])
def test_a_second_surprise_is_learned_from_only_on_the_same_side(
    afternoon: tuple[Core, CoreState], second: float, learned_from: bool
) -> None:
    core, state = afternoon
    expected = expected_kg(core, state, "tank")
    first = core.taking.drain(
        state,
        Entry(1, state.time_us, state.time_us, Drain("tank")),
        Drain("tank", "emptied", 5 * expected),
    )[0]
    again = replace(first, model=state.model)  # as much has gathered again
    drain = Drain("tank", "emptied", second * expected)
    after, learned = core.taking.drain(again, Entry(2, state.time_us, state.time_us, drain), drain)
    assert learned is not None
    assert learned.flagged is not learned_from
    assert learned.widened is learned_from
    assert (after.traps["tank"].suspect is None) is learned_from


def test_a_trap_found_empty_is_a_measurement_of_nothing(
    afternoon: tuple[Core, CoreState],
) -> None:
    core, state = afternoon
    drain = Drain("bowl", "empty")
    entry = Entry(1, state.time_us, state.time_us, drain)
    _, learned = core.taking.drain(state, entry, drain)
    assert learned is not None
    assert learned.measured_kg == 0.0
    _, not_measured = core.taking.drain(state, entry, Drain("bowl"))
    assert not_measured is None


@pytest.mark.parametrize(
    ("service", "ends", "stays"),
    [
        (
            Service("element changed", "bowl"),
            [believed.separation_of("bowl"), believed.evaporated_at("bowl")],
            [believed.separation_of("riser"), believed.temperature_of("bowl"), believed.CUP],
        ),
        (
            Service("sensor replaced", "intake-air"),
            [
                believed.bias_of("intake-air.relative_humidity"),
                believed.bias_of("intake-air.temperature"),
            ],
            [believed.bias_of("pipe-end.temperature"), believed.DELIVERED],
        ),
        (
            Service("compressor serviced"),
            [believed.DELIVERED],
            [believed.separation_of("tank"), believed.CUP],
        ),
    ],
)
def test_a_changed_part_ends_what_was_learned_of_the_old_one(
    afternoon: tuple[Core, CoreState], service: Service, ends: list[str], stays: list[str]
) -> None:
    core, state = afternoon
    for number, trap in enumerate(("bowl", "riser", "tank"), 1):
        volume = 1.3 * expected_kg(core, state, trap)
        state = tell(core, state, Drain(trap, "emptied", volume), number)
    after = tell(core, state, service, 9)
    for name in ends:
        values = after.model.beliefs[name]
        assert values.mean() == pytest.approx(0.0, abs=1e-9)
        assert values.std() == pytest.approx(1.0, abs=0.02)
        assert not np.array_equal(values, state.model.beliefs[name])
    for name in stays:
        assert np.array_equal(after.model.beliefs[name], state.model.beliefs[name])
    assert after.model.ledger.residual(after.model.water).max() < 1e-9
