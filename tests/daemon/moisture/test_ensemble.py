"""Draws that come back to the bit, in whatever order, and mean what they say."""

from __future__ import annotations

import math
import random
from itertools import combinations
from statistics import NormalDist

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from daemon.moisture.ensemble import (
    PERCENTILES,
    WIDEST_LOGIT_SD,
    normal,
    percentiles,
    positive,
    share,
    standard_normal,
)

SIZES = (2, 16, 127, 128, 1000)


@settings(max_examples=30, deadline=None)
@given(
    st.integers(0, 2**63 - 1), st.text(max_size=20), st.integers(0, 2**62), st.sampled_from(SIZES)
)
def test_a_draw_is_the_same_whenever_it_is_asked_for(
    seed: int, name: str, when: int, members: int
) -> None:
    first = standard_normal(seed, name, members, when)
    standard_normal(seed + 1, name, members, when)
    assert np.array_equal(first, standard_normal(seed, name, members, when))


def test_draws_do_not_depend_on_the_order_in_which_they_are_asked_for() -> None:
    keys = [(seed, name, when) for seed in (1, 2) for name in ("a", "b") for when in (0, 7)]
    first = {key: standard_normal(key[0], key[1], 64, key[2]) for key in keys}
    random.Random(3).shuffle(keys)
    again = {key: standard_normal(key[0], key[1], 64, key[2]) for key in keys}
    assert all(np.array_equal(first[key], again[key]) for key in keys)
    distinct = {values.tobytes() for values in first.values()}
    assert len(distinct) == len(keys)


@pytest.mark.parametrize("members", SIZES)
def test_the_members_stand_for_equal_slices_of_the_normal_distribution(members: int) -> None:
    """Latin hypercube (McKay, Beckman, Conover 1979): one value from each slice."""
    values = np.sort(standard_normal(5, "a", members))
    ranks = [NormalDist().cdf(float(value)) * members for value in values]
    assert np.allclose(ranks, np.arange(members) + 0.5)
    assert abs(values.mean()) < 1e-12


def test_draws_of_different_names_seeds_and_times_have_nothing_to_do_with_each_other() -> None:
    """4000 members: chance alone gives correlations of 0.016; 5 of them are 0.08."""
    draws = [standard_normal(1, f"n{n}", 4000) for n in range(12)]
    draws += [standard_normal(seed, "n0", 4000) for seed in (2, 3)]
    draws += [standard_normal(1, "n0", 4000, when) for when in (1, 2)]
    for one, other in combinations(draws, 2):
        assert abs(float(one @ other)) / 4000 < 0.08


BASE = standard_normal(1, "base", 4000)


def test_a_give_or_take_is_a_95_percent_half_width() -> None:
    """k = 2: 95.45 % of a normal distribution lie within two standard deviations."""
    values = normal(BASE, 300.0, 4.0)
    assert np.median(values) == pytest.approx(300.0)
    assert np.mean(np.abs(values - 300.0) <= 4.0) == pytest.approx(0.9545, abs=0.002)


def test_what_cannot_be_negative_is_drawn_about_its_value() -> None:
    values = positive(BASE, 150.0, 15.0)
    assert np.median(values) == pytest.approx(150.0, rel=1e-3)
    assert values.std() == pytest.approx(7.5, rel=0.02)
    wide = positive(BASE, 150.0, 450.0)
    assert wide.min() > 0.0
    assert np.median(wide) == pytest.approx(150.0, rel=2e-3)
    assert np.array_equal(positive(BASE, 0.0, 5.0), np.zeros(4000))
    assert np.array_equal(positive(BASE, 3.0, 0.0), np.full(4000, 3.0))


@pytest.mark.parametrize(
    ("value", "give_or_take", "logit_sd"),
    [
        # give_or_take / 2 / (v (1 - v)), at most 1.2
        (0.7, 0.25, 0.5952),
        (0.85, 0.1, 0.3922),
        (0.97, 0.03, 0.5155),
        (0.6, 0.3, 0.625),
        (0.1, 0.1, 0.5556),
        (0.5, 0.95, 1.2),
        (0.01, 0.5, 1.2),
    ],
)
def test_a_share_is_drawn_on_the_logit_scale(
    value: float, give_or_take: float, logit_sd: float
) -> None:
    values = share(BASE, value, give_or_take)
    assert 0.0 < values.min() < values.max() < 1.0
    assert np.median(values) == pytest.approx(value, rel=2e-3)
    assert np.log(values / (1.0 - values)).std() == pytest.approx(logit_sd, rel=5e-3)
    assert WIDEST_LOGIT_SD == 1.2


@pytest.mark.parametrize("value", [0.0, 1.0])
def test_all_or_nothing_has_no_width(value: float) -> None:
    assert np.array_equal(share(BASE, value, 0.3), np.full(4000, value))


def test_a_share_without_a_width_is_its_value() -> None:
    assert np.allclose(share(BASE, 0.7, 0.0), 0.7)


@given(st.lists(st.floats(-1e6, 1e6), min_size=1, max_size=50))
def test_percentiles_are_numpy_s_linear_ones(values: list[float]) -> None:
    """At (n - 1) p between the sorted values."""
    found = percentiles(np.array([values, values]))
    assert found.shape == (3, 2)
    ordered = sorted(values)
    for row, p in enumerate((0.05, 0.5, 0.95)):
        place = (len(ordered) - 1) * p
        below = int(place)
        above = min(below + 1, len(ordered) - 1)
        expected = ordered[below] + (ordered[above] - ordered[below]) * (place - below)
        assert found[row] == pytest.approx([expected, expected], rel=1e-9, abs=1e-9)


@pytest.mark.parametrize("shape", [(128,), (3, 128), (4, 5, 100), (129,), (7,), (2,), (1,)])
@pytest.mark.parametrize("unknown", [False, True])
def test_percentiles_are_numpys_to_the_bit(shape: tuple[int, ...], unknown: bool) -> None:
    """Against numpy's own, whose linear percentiles they are."""
    values = np.random.default_rng(math.prod(shape)).normal(290.0, 3.0, shape)
    if unknown:
        values[..., -1] = np.nan
    expected = np.percentile(values, PERCENTILES, axis=-1)
    assert np.array_equal(percentiles(values), expected, equal_nan=True)
