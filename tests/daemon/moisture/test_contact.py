"""A contact's time on, off and unknown, from its own edges."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from daemon.moisture.contact import ContactState, ContactTime, integrate

PERIOD_US = 10_000_000
SECOND_US = 1_000_000
Told = list[tuple[int, float, bool]]


def told(*readings: tuple[float, float]) -> Told:
    """(second, level) as good readings."""
    return [(round(at_s * SECOND_US), level, True) for at_s, level in readings]


def over(
    readings: Told, from_s: float, to_s: float, contact: ContactState | None = None
) -> tuple[float, float]:
    """Seconds on and unknown."""
    _, found = integrate(
        contact or ContactState(),
        readings,
        round(from_s * SECOND_US),
        round(to_s * SECOND_US),
        PERIOD_US,
    )
    return found.on_us / SECOND_US, found.unknown_us / SECOND_US


def test_edges_are_integrated_at_their_own_times() -> None:
    readings = told((0, 0), (3.25, 1), (7.5, 0), (8, 1), (8.125, 0))
    assert over(readings, 0, 100) == (4.375, 0.0)


def test_a_contact_that_only_tells_changes_holds_until_the_next_one() -> None:
    readings = told((0, 1), (5000, 0))
    assert over(readings, 0, 9000) == (5000.0, 0.0)


def test_before_its_first_word_nothing_is_known() -> None:
    assert over([], 0, 60) == (0.0, 60.0)
    assert over(told((20, 1)), 0, 60) == (40.0, 20.0)
    assert over(told((20, 0)), 0, 60) == (0.0, 20.0)


def test_one_that_repeats_its_level_goes_stale_three_periods_after_its_last_word() -> None:
    readings = told((0, 1), (10, 1), (20, 1))
    assert over(readings, 0, 50) == (50.0, 0.0)
    assert over(readings, 0, 51) == (50.0, 1.0)
    assert over(readings, 0, 500) == (50.0, 450.0)
    assert over(told((0, 0), (10, 0)), 0, 500) == (0.0, 460.0)


def test_a_silence_ends_with_the_next_word() -> None:
    readings = told((0, 1), (10, 1), (100, 1), (110, 0))
    assert over(readings, 0, 120) == (50.0, 60.0)  # known until 40 s, and from 100 s on


def test_changes_alone_do_not_make_it_a_sampled_one_however_quick() -> None:
    readings = told((0, 1), (5, 0), (10, 1), (15, 0), (20, 1))
    assert over(readings, 0, 5000) == (10.0 + 4980.0, 0.0)


def test_the_same_level_again_after_a_long_time_is_no_sampling() -> None:
    assert over(told((0, 1), (31, 1)), 0, 5000) == (5000.0, 0.0)
    assert over(told((0, 1), (30, 1)), 0, 5000) == (60.0, 4940.0)


def test_a_bad_reading_makes_its_silence_mean_something() -> None:
    readings = [*told((0, 1)), (20 * SECOND_US, float("nan"), False)]
    assert over(readings, 0, 20) == (20.0, 0.0)
    assert over(readings, 0, 100) == (30.0, 70.0)


def test_a_late_word_tells_the_level_from_then_on_only() -> None:
    """A reading dated before the span: what was booked before stays."""
    contact = ContactState(closed=False, last_us=0)
    assert over(told((5, 1)), 10, 20, contact) == (10.0, 0.0)


LEVELS = st.lists(
    st.tuples(st.integers(0, 400), st.sampled_from([0.0, 1.0]), st.booleans()), max_size=30
)


@given(LEVELS, st.integers(0, 400))
def test_a_span_may_be_cut_anywhere(told_s: list[tuple[int, float, bool]], cut_s: int) -> None:
    readings = sorted((s * SECOND_US, level, good) for s, level, good in told_s)
    cut_us, end_us = cut_s * SECOND_US, 400 * SECOND_US
    whole_contact, whole = integrate(ContactState(), readings, 0, end_us, PERIOD_US)
    first = [each for each in readings if each[0] <= cut_us]
    rest = [each for each in readings if each[0] > cut_us]
    contact, before = integrate(ContactState(), first, 0, cut_us, PERIOD_US)
    contact, after = integrate(contact, rest, cut_us, end_us, PERIOD_US)
    assert contact == whole_contact
    assert whole == ContactTime(before.on_us + after.on_us, before.unknown_us + after.unknown_us)
    assert whole.on_us + whole.unknown_us <= end_us


@given(st.lists(st.integers(1, 10**9), max_size=40, unique=True), st.booleans())
def test_edges_of_any_spacing_add_up_to_the_microsecond(times: list[int], closed: bool) -> None:
    """Against the sum of the closed spans, reckoned apart."""
    edges, level = [(0, closed)], closed
    for time_us in sorted(times):
        level = not level
        edges.append((time_us, level))
    end_us = 10**9 + 1
    spans = zip(edges, [*edges[1:], (end_us, False)], strict=True)
    expected = sum(after - at for (at, on), (after, _) in spans if on)
    readings = [(at, float(on), True) for at, on in edges]
    _, found = integrate(ContactState(), readings, 0, end_us, PERIOD_US)
    assert found == ContactTime(expected, 0)


@pytest.mark.parametrize("level", [0.0, 1.0])
def test_samples_and_edges_together_as_the_driver_gives_them(level: float) -> None:
    """Edges since the last tick, then the level at the tick."""
    readings: Told = []
    for tick in range(1, 7):
        at_s = tick * 10.0
        readings += told((at_s - 7, 1.0), (at_s - 4, 0.0), (at_s, level and 0.0))
    assert over(readings, 0, 60, ContactState(closed=False, last_us=0)) == (18.0, 0.0)
