"""Draws of the ensemble: one at each time, and none of them a copy of another."""

from __future__ import annotations

import numpy as np
import pytest

from daemon.moisture.ensemble import standard_normal

MEMBERS = 64


def test_a_draw_is_the_same_whenever_it_is_asked_for() -> None:
    first = standard_normal(1, "a draw", MEMBERS, 5)
    standard_normal(1, "another", MEMBERS, 6)
    assert np.array_equal(first, standard_normal(1, "a draw", MEMBERS, 5))
    for other in ((2, "a draw", 5), (1, "another", 5), (1, "a draw", 6)):
        assert not np.array_equal(first, standard_normal(other[0], other[1], MEMBERS, other[2]))


@pytest.mark.parametrize("apart", range(1, 17))
def test_draws_of_neighbouring_times_share_no_members(apart: int) -> None:
    """Not as they stand, and not moved along by some members either."""
    now = standard_normal(1, "a draw", MEMBERS, 1000)
    later = standard_normal(1, "a draw", MEMBERS, 1000 + apart)
    for shift in range(MEMBERS):
        moved = np.roll(now, -shift)
        # of independent ranks, 0.6 is near 5 standard errors (1 / sqrt 64)
        assert abs(np.corrcoef(moved, later)[0, 1]) < 0.6
