"""A value that fades tick by tick is after one of many ticks what it is in their order."""

from __future__ import annotations

import numpy as np
import pytest

from daemon.moisture.along_fading import Fading


@pytest.mark.parametrize("row", [0, 1, 16, 39])
def test_one_tick_of_many_is_as_in_their_order(row: int) -> None:
    random = np.random.default_rng(1)
    weights = random.uniform(0.0, 1.0, 40) ** 3
    weights[3] = 1.0  # all that was before is forgotten
    fading = Fading(random.normal(size=5), random.normal(size=(40, 5)), weights)
    value = fading.start
    for wanted, weight in zip(fading.wanted[: row + 1], weights, strict=False):
        value = value + (wanted - value) * weight
    assert fading.at(row) == pytest.approx(value, rel=1e-12)
    assert fading.rows()[row] == pytest.approx(value, rel=1e-12)


def test_it_never_goes_beyond_its_most() -> None:
    random = np.random.default_rng(2)
    fading = Fading(random.normal(size=5), random.normal(size=(40, 5)), np.full(40, 0.3))
    assert (fading.rows() <= fading.most).all()
    assert (fading.most == np.maximum(fading.start, fading.wanted.max(axis=0))).all()
