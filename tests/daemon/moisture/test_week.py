"""The learned week, against shops whose days are drawn from known distributions. Invented."""

from __future__ import annotations

import numpy as np
import pytest

from daemon.clock import HOUR_US
from daemon.moisture import week
from daemon.moisture.week import CLOSED, OPEN, Ahead, Week

MEMBERS = 256
MONDAY = 739_677  # an ordinal
OPEN_HOURS = [day * 24 + hour for day in range(5) for hour in (8, 9, 10, 11, 13, 14, 15, 16)]


def lived(weeks: int, duty: object, prior: float = week.OPEN_DUTY) -> Week:
    """After so many weeks in which an open hour's duty comes from a function of week, hour."""
    assert callable(duty)
    found = week.new_week()
    for number in range(weeks):
        for hour in range(week.HOURS):
            day = MONDAY + 7 * number + hour // 24
            if hour in OPEN_HOURS:
                found = week.learn(found, hour, day, True, duty(number, hour), prior)
            else:
                found = week.learn(found, hour, day, False, 0.05, week.OPEN_DUTY)
    return found


def next_week(found: Week) -> np.ndarray:
    ahead = [Ahead(n * HOUR_US, n, MONDAY + n // 24, n in OPEN_HOURS) for n in range(week.HOURS)]
    return week.duties(found, ahead, week.OPEN_DUTY, 0.08, seed=3, members=MEMBERS)


def test_at_first_every_open_hour_is_alike_and_wide() -> None:
    drawn = next_week(week.new_week())[OPEN_HOURS]
    # a little less: what would be more than always on is always on
    assert drawn.mean() == pytest.approx(week.OPEN_DUTY, rel=0.08)
    assert np.ptp(np.median(drawn, axis=1)) < 0.1
    low, high = np.percentile(drawn.sum(axis=0) / len(OPEN_HOURS), [5, 95])
    assert low < 0.15
    assert high > 0.5


def test_one_day_tells_of_the_next_one() -> None:
    found = week.new_week()
    for hour in (8, 9, 10, 11, 13, 14, 15, 16):
        found = week.learn(found, hour, MONDAY, True, 0.6 if hour < 12 else 0.2, week.OPEN_DUTY)
    tuesday = week.mean(found, OPEN, week.OPEN_DUTY)[24:48]
    assert tuesday[9] > 0.42
    assert tuesday[15] < 0.33
    assert tuesday[9] < 0.6  # not yet sure


def test_a_regular_week_is_learned_hour_by_hour() -> None:
    def duty(number: int, hour: int) -> float:
        return 0.6 if hour < 24 else 0.2 + 0.01 * (hour % 24)

    found = lived(6, duty)
    means = week.mean(found, OPEN, week.OPEN_DUTY)
    true = np.array([duty(0, hour) for hour in OPEN_HOURS])
    assert means[OPEN_HOURS] == pytest.approx(true, rel=0.12)
    drawn = next_week(found)[OPEN_HOURS].sum(axis=0)
    assert np.median(drawn) == pytest.approx(true.sum(), rel=0.03)
    low, high = np.percentile(drawn, [5, 95])
    assert (high - low) / true.sum() < 0.40


@pytest.mark.parametrize("day_sd", [0.15, 0.4])
def test_a_forecast_of_a_week_s_load_holds_it_as_often_as_it_says(day_sd: float) -> None:
    """Shops whose level nobody knows, whose days differ, and whose hours do: coverage."""
    inside = []
    for shop in range(120):
        random = np.random.default_rng([5, shop])
        level = float(np.exp(random.normal(np.log(0.25), 0.4)))
        weeks = int(random.integers(1, 5))
        days = np.exp(random.normal(0.0, day_sd, (weeks + 1, 7)) - day_sd**2 / 2)
        hours = np.exp(random.normal(0.0, 0.3, (weeks + 1, week.HOURS)) - 0.045)
        load = np.minimum(level * hours * np.repeat(days, 24, axis=1), 1.0)
        found = lived(weeks, lambda number, hour, load=load: float(load[number, hour]))
        drawn = next_week(found)[OPEN_HOURS].sum(axis=0)
        low, high = np.percentile(drawn, [5, 95])
        inside.append(low <= load[weeks, OPEN_HOURS].sum() <= high)
    # binomial: 0.90 of 120 is 108 +- 3.3; busy spells are allowed for that these shops lack
    assert 0.80 <= np.mean(inside) <= 0.985


def test_old_weeks_are_forgotten() -> None:
    found = lived(10, lambda number, hour: 0.6 if number < 6 else 0.2)
    means = week.mean(found, OPEN, week.OPEN_DUTY)
    assert means[OPEN_HOURS].mean() < 0.40  # four of some five weeks that count
    later = lived(20, lambda number, hour: 0.6 if number < 6 else 0.2)
    assert week.mean(later, OPEN, week.OPEN_DUTY)[OPEN_HOURS] == pytest.approx(0.2, abs=0.02)


def test_closed_hours_are_learned_apart() -> None:
    found = lived(3, lambda number, hour: 0.5)
    assert week.mean(found, CLOSED, 0.08)[0] == pytest.approx(0.05, abs=0.005)
    assert week.mean(found, OPEN, week.OPEN_DUTY)[8] == pytest.approx(0.5, abs=0.06)


def test_a_compressor_that_is_off_when_closed_has_no_load_then() -> None:
    found = week.new_week()
    ahead = [Ahead(0, 3, MONDAY, False), Ahead(HOUR_US, 9, MONDAY, True)]
    drawn = week.duties(found, ahead, week.OPEN_DUTY, 0.0, seed=3, members=MEMBERS)
    assert not drawn[0].any()
    assert drawn[1].all()


def test_duties_stay_between_never_and_always() -> None:
    found = lived(2, lambda number, hour: 0.97)
    drawn = next_week(found)
    assert drawn.min() >= 0.0
    assert drawn.max() <= 1.0
    assert drawn[OPEN_HOURS].mean() > 0.85


def test_the_same_future_looks_the_same_an_hour_later() -> None:
    found = lived(1, lambda number, hour: 0.4)
    ahead = [Ahead(n * HOUR_US, n, MONDAY + n // 24, n in OPEN_HOURS) for n in range(24)]
    now = week.duties(found, ahead, week.OPEN_DUTY, 0.0, seed=3, members=MEMBERS)
    later = week.duties(found, ahead[1:], week.OPEN_DUTY, 0.0, seed=3, members=MEMBERS)
    assert np.array_equal(now[1:], later)
    other = week.duties(found, ahead, week.OPEN_DUTY, 0.0, seed=4, members=MEMBERS)
    assert not np.array_equal(now[9], other[9])


def test_days_resemble_the_ones_before_them() -> None:
    drawn = week.wandering(list(range(400)), 0.8, "a walk", 1, 64)
    walk = np.array([drawn[day] for day in range(400)])
    assert walk.std() == pytest.approx(1.0, abs=0.05)
    assert np.mean(walk[1:] * walk[:-1]) == pytest.approx(0.8, abs=0.05)
    known = week.wandering([5, 9], 0.8, "a walk", 1, 64, from_zero=True)
    assert not known[5].any()
    assert sorted(known) == [5, 6, 7, 8, 9]
    assert week.wandering([], 0.8, "a walk", 1, 64) == {}
