"""Measured dew points: what a vented cell can say, and what the ensemble learns from it."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import replace

import numpy as np
import pytest

from daemon.advance import Core
from daemon.dew_points import dew_point_views
from daemon.errors import SiteError
from daemon.moisture import air, observing
from daemon.moisture.beliefs import bias_of
from daemon.moisture.description import Measured, VentedCell
from daemon.moisture.dew_sensors import cell_dew_point, relative_humidity_in_cell
from daemon.moisture.ensemble import Array, percentiles
from daemon.moisture.observing import Gathered, Observed
from daemon.site.types import Site
from daemon.state import CoreState, Inputs
from daemon.views import DewPointView
from sensors.reading import Reading, reading
from tests.daemon.shops import BEGUN_US, SITE, site

CELL_K, CELL_PA, LINE_PA = 293.15, 101_325.0, 801_325.0  # 20 degC, and 7 bar gauge
PERIOD_US = 60_000_000

# True pressure dew point, what the cell reads, and what +-3 % with 1 K and +-1 % with 0.1 K can
# say; degC. Computed with CoolProp by others than this project; rounded there to 0.1.
VENTED = [
    (10.0, 0.068, (0.6, 16.7), (7.4, 12.3)),
    (3.0, 0.042, (-12.9, 11.9), (-0.9, 6.3)),
    (-20.0, 0.006, (None, 1.7), (None, -8.9)),
    (-40.0, 0.0007, (None, -0.4), (None, -13.2)),
]


def in_cell(dew_point_c: float) -> float:
    """The relative humidity in the cell of air with that pressure dew point (frost below 0)."""
    ratio = np.array([air.saturated_humidity_ratio(dew_point_c + 273.15, LINE_PA)])
    cell_k, cell_pa = np.array([CELL_K]), np.array([CELL_PA])
    return float(relative_humidity_in_cell(ratio, cell_k, cell_pa)[0])


@pytest.mark.parametrize(("true_c", "reads", "wide", "narrow"), VENTED)
def test_a_vented_cell_says_no_more_than_it_can(
    true_c: float,
    reads: float,
    wide: tuple[float | None, float],
    narrow: tuple[float | None, float],
) -> None:
    humidity = in_cell(true_c)
    assert humidity == pytest.approx(reads, abs=5.1e-4)
    for (low_c, high_c), errors in ((wide, (0.03, 1.0)), (narrow, (0.01, 0.1))):
        said = cell_dew_point(humidity, CELL_K, CELL_PA, LINE_PA, *errors)
        assert said.high_k - 273.15 == pytest.approx(high_c, abs=0.15)  # as it is rounded there
        if low_c is None:
            assert said.low_k is None
            assert said.middle_k is None
        else:
            assert said.low_k is not None
            assert said.low_k - 273.15 == pytest.approx(low_c, abs=0.15)
            assert said.middle_k is not None
            assert said.middle_k - 273.15 == pytest.approx(true_c, abs=0.02)


def test_a_cell_that_reads_nothing_still_says_below() -> None:
    said = cell_dew_point(0.0, CELL_K, CELL_PA, LINE_PA, 0.03, 1.0)
    assert (said.low_k, said.middle_k) == (None, None)
    assert 270.0 < said.high_k < 275.0


# ---- in the ensemble ----


TRANSMITTER = """
[[sensor]]
id = "hygrometer"
driver = "dew-point-loop"
address = 0x48
input = 2
range = "-60 to 40 degC"
give_or_take = "1 K"
"""
CELL = """
[[sensor]]
id = "cell"
driver = "vented-cell"
address = 0x77
"""


def watched(sensor: str, said: str, seed: int = 1, members: int = 64) -> Site:
    """Birch Works at one reading a minute, its riser without probe, and its dew point measured."""
    text = SITE.replace('name = "Birch Works"', 'name = "Birch Works"\nsample_every = "60 s"')
    text = text.replace('temperature = "pipe-end.temperature"\n', "")
    text = text.replace('[[station]]\nid = "intake"', f'{sensor}\n[[station]]\nid = "intake"')
    if said:
        trap = 'trap = { capacity = "300 ml"'
        text = text.replace(trap, f"measured_dew_point = {said}\n{trap}")
    return site(text.replace("members = 32", f"members = {members}\nseed = {seed}"))


def hours(shop: Site, length: int) -> Iterator[tuple[int, list[Reading]]]:
    """A compressor that makes air half of the time at a steady 7 bar."""
    for minute in range(length * 60):
        now_us = BEGUN_US + minute * PERIOD_US
        values = {
            "intake-air.temperature": 296.15 + 0.1 * math.sin(minute / 9.0),
            "intake-air.relative_humidity": 0.62 + 0.01 * math.sin(minute / 7.0),
            "intake-air.pressure": 101_300.0 + 10.0 * math.sin(minute / 3.0),
            "tank-gauge.pressure": 7e5 + 1_000.0 * math.sin(minute / 2.0),
            "motor.contact": float(minute % 4 < 2),
        }
        yield now_us, [reading(shop.channels[n], v, now_us) for n, v in values.items()]


RISER = 2
Says = Callable[[CoreState | None], dict[str, float]]


def run(shop: Site, length: int, says: Says = lambda _: {}) -> CoreState:
    """A day's state; `says` gives further readings after the state of the minute before."""
    core = Core(shop)
    state: CoreState | None = None
    for now_us, readings in hours(shop, length):
        for name, value in says(state).items():
            readings.append(reading(shop.channels[name], value, now_us))
        if state is None:
            state = core.initial(now_us, Inputs(readings))[0]
        else:
            state = core.advance(state, now_us, Inputs(readings))[0]
    assert state is not None
    return state


def dew_points_k(state: CoreState) -> Array:
    """Of the air that leaves the riser, by member."""
    ratio: Array = state.model.water.leaving_ratio[RISER]
    return air.dew_point(ratio, state.model.conditions.pressure_pa[RISER])


def width(state: CoreState) -> float:
    low, _, high = percentiles(dew_points_k(state))
    return float(high - low)


def twin(seed: int, member: int) -> list[float]:
    """What really is, minute by minute: one believable shop out of another ensemble."""
    shop = watched("", "", seed=seed)
    core, truth = Core(shop), []
    state: CoreState | None = None
    for now_us, readings in hours(shop, 12):
        if state is None:
            state = core.initial(now_us, Inputs(readings))[0]
        else:
            state = core.advance(state, now_us, Inputs(readings))[0]
        truth.append(float(dew_points_k(state)[member]))
    return truth


@pytest.mark.parametrize(("member", "bias_k"), [(3, 0.7), (17, -0.5), (40, 0.0)])
def test_a_transmitter_narrows_what_is_believed_and_does_not_move_it_off(
    member: int, bias_k: float
) -> None:
    truth = twin(7, member)
    shop = watched(TRANSMITTER, '"hygrometer.dew_point"')
    minutes = iter(truth)
    state = run(shop, 12, lambda _: {"hygrometer.dew_point": next(minutes) + bias_k})
    unwatched = run(watched("", ""), 12)
    assert width(state) < 0.6 * width(unwatched)
    low, _, high = percentiles(dew_points_k(state))
    assert low - 0.1 <= truth[-1] <= high + 0.1
    # its own bias is never averaged away: +-1 K is what it was sold as
    assert width(state) > 0.8
    bias = state.model.beliefs[bias_of("hygrometer.dew_point")]
    assert np.ptp(bias) > 1.0
    # it has heard their sum: who believes in drier air believes that the sensor reads high
    assert np.corrcoef(bias, dew_points_k(state))[0, 1] < -0.4


def test_water_that_is_corrected_by_a_dew_point_is_booked() -> None:
    shop = watched(TRANSMITTER, '"hygrometer.dew_point"')
    state = run(shop, 6, lambda _: {"hygrometer.dew_point": 283.0})
    assert np.abs(state.model.ledger.corrected).max() > 0.0
    state.model.ledger.check(state.model.water)


def test_a_cell_below_its_own_error_only_tells_the_wetter_members() -> None:
    shop = watched(CELL, '"cell"')
    model = Core(shop).model
    state = run(shop, 1).model
    i = RISER
    one = 3600.0
    hour = Gathered(
        one,
        0.01 * one,
        293.15 * one,
        101_325.0 * one,
        np.where(np.arange(64) < 48, 1e-5, 2e-3) * one,  # 0.07 or 14 % in the cell
        state.conditions.pressure_pa[i] * one,
    )
    bias = bias_of("cell.relative_humidity")
    after, observed = observing.learn(model, state, {"riser": Observed(hour)})
    assert observed["riser"] == Observed()
    moved = after.beliefs[bias] - state.beliefs[bias]
    assert float(moved[48:].mean()) < -0.2  # they expected much more than 1 %
    less = (state.beliefs[bias] < -1.0) & (np.arange(64) < 48)
    assert float(moved[less].mean()) < 0.02  # they expected less, which "below" does not contradict
    dry = replace(hour, ratio=np.full(64, 1e-6) * one)
    unmoved, _ = observing.learn(model, state, {"riser": Observed(dry)})
    assert unmoved is state


def test_an_hour_that_was_hardly_measured_teaches_nothing() -> None:
    shop = watched(TRANSMITTER, '"hygrometer.dew_point"')
    model, state = Core(shop).model, run(shop, 1).model
    ratio = state.water.leaving_ratio[RISER] * 600.0
    hour = Gathered(600.0, 280.0 * 600.0, 0.0, 0.0, ratio, state.conditions.pressure_pa[RISER])
    assert observing.learn(model, state, {"riser": Observed(hour)})[0] is state


def test_a_surprise_is_learned_from_only_when_it_comes_twice() -> None:
    shop = watched(TRANSMITTER, '"hygrometer.dew_point"')
    model, state = Core(shop).model, run(shop, 1).model
    one = 3600.0
    hour = Gathered(
        one,
        235.0 * one,  # far drier than any member can believe without a dryer
        0.0,
        0.0,
        state.water.leaving_ratio[RISER] * one,
        state.conditions.pressure_pa[RISER] * one,
    )
    first, observed = observing.learn(model, state, {"riser": Observed(hour)})
    assert first is state
    assert observed["riser"].surprise == -1
    second, observed = observing.learn(
        model, first, {"riser": replace(observed["riser"], hour=hour)}
    )
    assert observed["riser"].surprise == 0
    bias = bias_of("hygrometer.dew_point")
    assert float(second.beliefs[bias].mean()) < float(first.beliefs[bias].mean()) - 0.5


def views_of(shop: Site, says: dict[str, float]) -> list[DewPointView]:
    core = Core(shop)
    state = run(shop, 1, lambda _: says)
    return list(dew_point_views(core.model, core.rules.contradictions, state))


def test_the_daemon_shows_a_cell_s_dew_point_at_the_line_s_pressure() -> None:
    cell = {"cell.temperature": 293.15, "cell.pressure": 101_300.0}
    shop = watched(CELL, '"cell"')
    (view,) = views_of(shop, cell | {"cell.relative_humidity": 0.068})
    assert (view.station, view.sensor, view.fault) == ("riser", "cell", "")
    assert view.pressure_pa == pytest.approx(801_300.0, rel=0.02)
    assert view.low_k is not None
    assert view.middle_k is not None
    assert view.high_k is not None
    assert view.middle_k - 273.15 == pytest.approx(10.0, abs=0.4)
    assert view.low_k < view.middle_k - 5.0
    assert view.high_k > view.middle_k + 5.0
    (dry,) = views_of(shop, cell | {"cell.relative_humidity": 0.01})
    assert (dry.low_k, dry.middle_k) == (None, None)
    assert dry.high_k is not None
    (wet,) = views_of(shop, cell | {"cell.relative_humidity": 0.60})
    assert wet.high_k is None
    assert "is there liquid in its cell?" in wet.fault
    (silent,) = views_of(shop, {})
    assert silent.high_k is None
    assert "cell.relative_humidity" in silent.fault


@pytest.mark.parametrize(
    ("said", "problem"),
    [
        ('"hygrometer"', 'names a sensor, not what it gives; write "hygrometer.dew_point"'),
        ('"tank-gauge.pressure"', "gives a pressure, but a dew point belongs here"),
        ('"hygrometre.dew_point"', 'did you mean "hygrometer.dew_point"?'),
        ('"3 degC"', "is neither a value"),
        ("3", "must be in quotes"),
        ('{ give_or_take = "1 K" }', "says no channel"),
        ('{ channel = "cell", give_or_take = "1 K" }', "write its id alone"),
        ('{ channel = "hygrometer.dew_point", give_or_take = "1 bar" }', "is a pressure"),
    ],
)
def test_a_measured_dew_point_that_cannot_be_is_told(said: str, problem: str) -> None:
    with pytest.raises(SiteError) as caught:
        watched(TRANSMITTER + CELL, said)
    assert len(caught.value.problems) == 1
    assert problem in str(caught.value.problems[0])
    assert caught.value.problems[0].key.startswith("measured_dew_point")


def test_a_measured_dew_point_is_a_transmitter_or_a_cell() -> None:
    by_table = '{ channel = "hygrometer.dew_point", give_or_take = "3 K" }'
    station = watched(TRANSMITTER, by_table).line.stations[RISER]
    assert station.measured_dew_point == Measured("hygrometer.dew_point", 3.0)
    cell = watched(CELL, '"cell"').line.stations[RISER].measured_dew_point
    assert isinstance(cell, VentedCell)
    assert cell.relative_humidity.channel == "cell.relative_humidity"


def test_a_dew_point_above_the_line_s_temperature_is_a_fault_and_not_learned_from() -> None:
    shop = watched(TRANSMITTER, '"hygrometer.dew_point"')
    core, state = Core(shop), None
    raised = []
    for now_us, readings in hours(shop, 3):
        readings.append(reading(shop.channels["hygrometer.dew_point"], 312.0, now_us))
        if state is None:
            state = core.initial(now_us, Inputs(readings))[0]
            continue
        state, _, transitions = core.advance(state, now_us, Inputs(readings))
        raised += [t for t in transitions if t.alarm == "hygrometer-sensor-fault"]
    assert state is not None
    assert [each.after for each in raised] == ["unacknowledged"]
    assert raised[0].at_us <= BEGUN_US + 2 * PERIOD_US
    assert "a dew point of at least 37." in raised[0].text
    assert "is there liquid in its cell?" in raised[0].text
    assert float(np.abs(state.model.ledger.corrected).max()) == 0.0
