"""Conditions as start and way against those that are worked out for every member and tick."""

from __future__ import annotations

import numpy as np
import pytest

from daemon.moisture import along_conditions
from daemon.moisture.along_conditions import Wandering, conditions, least_of
from daemon.moisture.along_course import Course
from daemon.moisture.conditions import Conditions
from daemon.moisture.ensemble import Array
from daemon.moisture.model import Heard, Model, State
from tests.daemon.block_shops import a_shop

TICKS, PERIOD_US = 40, 10_000_000
ROUNDING = 1e-14


def begun(name: str, **values: float) -> tuple[Model, State, Course]:
    """A shop whose channels say these at first and wander about them, each in its own way."""
    shop = a_shop(name)
    model = Model(shop.line)
    told = {channel: values.get(channel.split(".")[1], 293.0) for channel in model.plan.channels}
    told |= {name: 1.0e5 for name in told if name.startswith("intake") and "pressure" in name}
    heard = Heard({channel: [(0, value, True)] for channel, value in told.items()})
    state = model.initial(0, heard)
    random = np.random.default_rng(7)
    times_us = PERIOD_US * np.arange(1, TICKS + 1)
    zero = np.zeros(TICKS, np.int64)
    said = {
        channel: value * (1.0 + 1e-3 * np.cumsum(random.normal(size=TICKS)))
        for channel, value in told.items()
    }
    course = Course(
        times_us,
        said,
        dict.fromkeys(said, times_us),
        dict.fromkeys(said, False),
        zero > 0,
        zero,
        zero,
        zero,
    )
    return model, state, course


def both_ways(
    monkeypatch: pytest.MonkeyPatch, model: Model, state: State, course: Course
) -> tuple[Conditions, Conditions]:
    """As they come, and worked out."""
    found = conditions(model, state, course, {})
    monkeypatch.setattr(along_conditions, "_wandering", lambda *arguments: None)
    worked_out = conditions(model, state, course, {})
    assert found is not None
    assert worked_out is not None
    return found[0], worked_out[0]


AS_EVER = {"relative_humidity": 0.5, "pressure": 7.0e5, "contact": 0.0}


def test_they_are_those_that_are_worked_out(monkeypatch: pytest.MonkeyPatch) -> None:
    found, expected = both_ways(monkeypatch, *begun("all measured", **AS_EVER))
    for mine, its in (
        (found.temperature_k, expected.temperature_k),
        (found.pressure_pa, expected.pressure_pa),
    ):
        assert isinstance(mine, Wandering)
        assert mine.shape == its.shape
        every = list(range(len(its)))
        assert np.allclose(mine[every], its, rtol=ROUNDING, atol=0.0)
        assert np.allclose(mine[:, 7], its[:, 7], rtol=ROUNDING, atol=0.0)
        assert np.allclose(mine[2, 7], its[2, 7], rtol=ROUNDING, atol=0.0)
        lowest = [least_of(mine, i) for i in every]
        assert np.allclose(lowest, its.min(axis=(1, 2)), rtol=ROUNDING, atol=0.0)
        assert np.allclose(mine.greatest, its.max(axis=(1, 2)), rtol=ROUNDING, atol=0.0)
    assert np.array_equal(found.relative_humidity, expected.relative_humidity)
    assert found.measured == expected.measured


@pytest.mark.parametrize(
    ("why", "said"),
    [
        ("a regulator that gets too little", {"pressure": 2.9e5}),
        ("beyond what formulas hold for", {"pressure": 1.97e6}),
    ],
)
def test_where_a_limit_acts_they_are_worked_out(
    why: str, said: dict[str, float], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Then what a member has is not where it began and the sensor's way from there."""
    found, expected = both_ways(monkeypatch, *begun("all measured", **AS_EVER | said))
    pressure: Array | Wandering = found.pressure_pa
    assert not isinstance(pressure, Wandering), why
    assert np.array_equal(pressure, expected.pressure_pa)


def test_what_follows_the_duty_is_worked_out() -> None:
    model, state, course = begun("contact and gauge", **AS_EVER)
    duty = {i: np.full((TICKS, model.plan.line.members), 0.3) for i, _ in model.lagging}
    found = conditions(model, state, course, duty)
    assert found is not None
    assert isinstance(found[0].temperature_k, np.ndarray)


def test_a_silent_sensor_begins_anew() -> None:
    model, state, course = begun("all measured", **AS_EVER)
    silent = next(name for name in course.silent if name.endswith(".temperature"))
    course = Course(
        course.times_us,
        course.values,
        course.told_us,
        {**course.silent, silent: True},
        course.is_open,
        course.on_us,
        course.unknown_us,
        course.booked_us,
    )
    assert conditions(model, state, course, {}) is None
