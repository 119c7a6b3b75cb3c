"""The virtual shops themselves, and a few of them against the estimates.

The long run is `python -m tests.virtual`. Here a dozen shops must do: the bounds are those that a
model as good as its goals fails once in a thousand draws of shops, no tighter.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
import pytest

from daemon.moisture import learning
from tests.virtual.foreseen import coverage, foresee_all
from tests.virtual.physics import KINDS, Kind
from tests.virtual.rigs import TRAPS
from tests.virtual.runner import Seen, run_all
from tests.virtual.score import (
    WORTH_A_RATIO_KG,
    after,
    clustered_error,
    least_share,
    most_ranks,
    score,
    untaught,
)
from tests.virtual.shops import Trial, build

SHOPS, DAYS = 16, 2


# ---- the bench ----


@pytest.mark.parametrize("kind", KINDS)
def test_a_virtual_shop_neither_makes_nor_loses_water(kind: Kind) -> None:
    for shop in build(range(3), Trial(1, kind)):
        assert abs(shop.missing) < 1e-12
        assert shop.contents_kg.max() > 0.01


def test_a_shop_is_the_same_whichever_others_stand_beside_it() -> None:
    alone, among = build([3], Trial(1))[0], build([1, 3], Trial(1))[1]
    assert alone.truth == among.truth
    assert alone.site == among.site
    np.testing.assert_allclose(alone.contents_kg, among.contents_kg, rtol=1e-12)


def test_what_breaks_a_shop_changes_where_its_water_goes() -> None:
    plain, slack, short, drift = (
        build(range(2), Trial(1, kind)) for kind in ("plain", "separation", "mixing", "drift")
    )
    for usual, other, hurried, same in zip(plain, slack, short, drift, strict=True):
        assert same.held_kg == usual.held_kg  # the sensor drifts, not the shop
        tank = TRAPS.index("tank")
        assert other.contents_kg[-200, tank] < usual.contents_kg[-200, tank]
        assert hurried.contents_kg[-200, tank] < usual.contents_kg[-200, tank]


def test_with_nothing_unknown_the_model_says_what_is_so() -> None:
    """Two programs of one physics, written apart, differ by what samples every 10 s miss of a
    pressure that cycles: 0.1 to 1.6 % in these shops, up to 7 % where guns draw in bursts."""
    for run in run_all([2, 10], Trial(days=1, every_s=10, certain=True)):
        assert len(run.untaught) == len(TRAPS)
        for seen in run.untaught:
            assert seen.said.middle == pytest.approx(seen.true_kg, rel=0.02)


def test_the_error_of_a_coverage_counts_shops_and_not_drains() -> None:
    held = np.repeat([1.0, 0.0, 1.0, 1.0, 0.0, 1.0, 1.0, 1.0], 5)
    shops = np.repeat(np.arange(8), 5)
    # five equal values a shop say no more than one: sd / sqrt(shops), with n - 1
    assert clustered_error(held, shops) == pytest.approx(np.std(held[::5], ddof=1) / np.sqrt(8))


def test_the_least_share_is_the_binomial_distributions() -> None:
    # 10 trials of 0.9: P(X <= 4) = 0.000147, P(X <= 5) = 0.00163 (binomial tables)
    assert least_share(0.9, 10, together=1.0) == 0.5


# ---- the estimates ----


def test_what_is_said_of_a_few_shops_is_honest() -> None:
    """One run serves all questions: it is what takes the time."""
    runs = run_all(range(100, 100 + SHOPS), Trial(DAYS, measured=1.0))
    before = score(each for run in runs for each in untaught(run))
    taught = [each for run in runs for each in after(1, 99)(run)]
    learned = score(taught)
    assert before.drains >= 3 * SHOPS
    assert learned.drains >= SHOPS
    # the intervals hold the truth
    assert before.coverage >= least_share(0.86, before.drains)
    assert learned.coverage >= least_share(0.85, learned.drains)
    assert before.ranks <= most_ranks(before.drains)
    assert learned.ranks <= most_ranks(learned.drains)
    # more often than not the middle is as near as it should be in the median
    assert _near(0.30, [each for run in runs for each in untaught(run)])
    assert _near(0.10, taught)
    # what is learned narrows the intervals, and no belief collapses
    assert learned.width < 0.6 * before.width
    assert min(run.least_spread for run in runs) > 0.9 * learning.LEAST_SD


def _near(within: float, seen: Sequence[Seen]) -> bool:
    worth = [each for each in seen if each.true_kg >= WORTH_A_RATIO_KG]
    near = [abs(each.said.middle - each.true_kg) <= within * each.true_kg for each in worth]
    return bool(np.mean(near) >= least_share(0.5, len(near)))


def test_forecasts_of_a_few_shops_are_honest() -> None:
    found = foresee_all(range(200, 205), Trial())
    assert len(found) >= 12
    assert coverage(found) >= least_share(0.80, len(found))
    assert all(each.early_h <= each.middle_h <= each.late_h for each in found)
    reached = [each for each in found if math.isfinite(each.true_h)]
    assert len(reached) >= len(found) / 2  # else there was little to hold it against
