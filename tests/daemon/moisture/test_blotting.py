"""Learning from blotter tests: one-sided, and only what can be believed."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from daemon.advance import Core
from daemon.moisture import blotting
from daemon.moisture.blotting import SHOWS_KG_PER_M3
from daemon.moisture.carried import nothing_yet
from daemon.moisture.ensemble import Array
from daemon.moisture.model import State
from daemon.replay import replay
from tests.daemon.outlet_shops import still
from tests.daemon.shops import SITE, site

SHOP = site(SITE.replace("members = 32", "members = 128"))  # a coalescer of 0.97 +- 0.03
CORE = Core(SHOP)
PLAN = CORE.model.plan
BOWL = PLAN.index["bowl"]


@pytest.fixture(scope="module")
def state() -> State:
    """After an hour at work: perhaps a little is carried, perhaps not."""
    return replay(CORE, list(still(SHOP, 1.0)), []).state.model


def carried(of: State) -> Array:
    found: Array = of.water.carried.kg_per_m3[0]
    return found


def wet(of: State, kg_per_m3: float) -> State:
    """The same, but that so much was carried by every member, give or take a tenth."""
    sums = of.water.carried
    spread = 1.0 + 0.1 * np.linspace(-1.0, 1.0, sums.air.shape[1])
    liquid = sums.air / 1.18885 * kg_per_m3 * spread
    return replace(of, water=replace(of.water, carried=replace(sums, liquid=liquid)))


def test_a_clean_blotter_takes_the_wettest_members_back(state: State) -> None:
    after = blotting.observe(CORE.model, state, 0, stained=False)
    before_p95, after_p95 = (float(np.percentile(carried(each), 95)) for each in (state, after))
    assert before_p95 > 5e-5
    assert after_p95 < 5e-5
    # the others have nothing to learn
    dry = carried(state) < 0.5 * SHOWS_KG_PER_M3
    assert carried(after)[dry] == pytest.approx(carried(state)[dry], rel=1e-9)


def test_a_stain_takes_the_driest_members_up(state: State) -> None:
    after = blotting.observe(CORE.model, state, 0, stained=True)
    assert np.percentile(carried(after), 5) > 2.0 * np.percentile(carried(state), 5)
    soaked = carried(state) > 2.0 * SHOWS_KG_PER_M3
    assert soaked.any()
    assert carried(after)[soaked] == pytest.approx(carried(state)[soaked], rel=1e-9)


@pytest.mark.parametrize(("stained", "sign"), [(False, 1.0), (True, -1.0)])
def test_what_the_last_trap_keeps_is_learned_with_it(
    state: State, stained: bool, sign: float
) -> None:
    after = blotting.observe(CORE.model, state, 0, stained)
    kept = [each.parameters.water.separation[BOWL] for each in (state, after)]
    assert sign * (kept[1].mean() - kept[0].mean()) > 0.0
    assert kept[1].std() > 0.3 * kept[0].std()  # and is not known for certain now


def test_no_water_is_made_or_lost_by_learning(state: State) -> None:
    for stained in (False, True):
        after = blotting.observe(CORE.model, state, 0, stained)
        assert after.ledger.residual(after.water).max() < 1e-9
        after.ledger.check(after.water)


def test_a_stain_that_nobody_can_believe_teaches_nothing(state: State) -> None:
    dry = wet(state, 1e-7)
    assert blotting.observe(CORE.model, dry, 0, stained=True) is dry


def test_where_no_air_has_passed_nothing_is_learned(state: State) -> None:
    rested = replace(state, water=replace(state.water, carried=nothing_yet(PLAN)))
    assert blotting.observe(CORE.model, rested, 0, stained=False) is rested


def test_a_clean_blotter_says_nothing_against_dry_air(state: State) -> None:
    dry = wet(state, 1e-7)
    assert blotting.observe(CORE.model, dry, 0, stained=False) is dry
