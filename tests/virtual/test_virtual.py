"""The virtual shops themselves, and a few of them against the estimates.

The long run is `python -m tests.virtual`. Here a dozen shops must do: the bounds are those that a
model as good as its goals fails once in a thousand draws of shops, no tighter.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pytest

from daemon.moisture import learning
from tests.virtual.physics import KINDS, Kind
from tests.virtual.rigs import TRAPS
from tests.virtual.runner import Run, Seen, run_all
from tests.virtual.score import after, clustered_error, least_share, score, untaught
from tests.virtual.shops import Trial, build

SHOPS, DAYS = 12, 3


@pytest.fixture(scope="module")
def runs() -> list[Run]:
    return run_all(range(100, 100 + SHOPS), Trial(DAYS))


def of(runs: Sequence[Run], least: int, most: int) -> list[Seen]:
    return [each for run in runs for each in after(least, most)(run)]


# ---- the bench ----


@pytest.mark.parametrize("kind", KINDS)
def test_a_virtual_shop_neither_makes_nor_loses_water(kind: Kind) -> None:
    for shop in build(range(6), Trial(1, kind)):
        assert abs(shop.missing) < 1e-12
        assert shop.contents_kg.max() > 0.01


def test_a_shop_is_the_same_whichever_others_stand_beside_it() -> None:
    alone, among = build([3], Trial(1))[0], build([1, 3], Trial(1))[1]
    assert alone.truth == among.truth
    assert alone.site == among.site
    np.testing.assert_allclose(alone.contents_kg, among.contents_kg, rtol=1e-12)


def test_what_breaks_a_shop_changes_where_its_water_goes() -> None:
    plain, slack, short, drift = (
        build(range(4), Trial(1, kind)) for kind in ("plain", "separation", "mixing", "drift")
    )
    for usual, other, hurried, same in zip(plain, slack, short, drift, strict=True):
        assert same.held_kg == usual.held_kg  # the sensor drifts, not the shop
        tank = TRAPS.index("tank")
        assert other.contents_kg[-200, tank] < usual.contents_kg[-200, tank]
        assert hurried.contents_kg[-200, tank] < usual.contents_kg[-200, tank]


def test_with_nothing_unknown_the_model_says_what_is_so() -> None:
    """Two programs of one physics, written apart, differ by what samples every 10 s miss of a
    pressure that cycles: 0.1 to 3 % measured."""
    for run in run_all([4, 6, 17], Trial(days=1, every_s=10, certain=True)):
        assert len(run.untaught) == len(TRAPS)
        for seen in run.untaught:
            assert seen.said.middle == pytest.approx(seen.true_kg, rel=0.04)


def test_the_error_of_a_coverage_counts_shops_and_not_drains() -> None:
    held = np.repeat([1.0, 0.0, 1.0, 1.0, 0.0, 1.0, 1.0, 1.0], 5)
    shops = np.repeat(np.arange(8), 5)
    # five equal values a shop say no more than one: sd / sqrt(shops), with n - 1
    assert clustered_error(held, shops) == pytest.approx(np.std(held[::5], ddof=1) / np.sqrt(8))


def test_the_least_share_is_the_binomial_distributions() -> None:
    # 10 trials of 0.9: P(X <= 4) = 0.000147, P(X <= 5) = 0.00163 (binomial tables)
    assert least_share(0.9, 10, together=1.0) == 0.5


# ---- the estimates ----


def test_intervals_hold_the_truth_before_anything_was_learned(runs: list[Run]) -> None:
    found = score(each for run in runs for each in untaught(run))
    assert found.drains >= 30
    assert found.coverage >= least_share(0.86, found.drains)
    assert found.error <= 0.45  # goal 0.30


def test_intervals_hold_the_truth_after_learning(runs: list[Run]) -> None:
    found = score(of(runs, 1, 99))
    assert found.drains >= 25
    assert found.coverage >= least_share(0.85, found.drains)
    assert found.width < 0.6 * score(each for run in runs for each in untaught(run)).width


def test_one_measured_drain_brings_the_middle_near(runs: list[Run]) -> None:
    taught = [each for each in of(runs, 1, 99) if each.true_kg >= 0.02]
    near = [abs(each.said.middle - each.true_kg) <= 0.10 * each.true_kg for each in taught]
    assert len(near) >= 20
    assert np.mean(near) >= least_share(0.5, len(near))


def test_no_belief_collapses(runs: list[Run]) -> None:
    assert min(run.least_spread for run in runs) > 0.9 * learning.LEAST_SD
