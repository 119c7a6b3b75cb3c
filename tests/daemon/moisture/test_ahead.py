"""Days run forward hour by hour, held against the same days advanced tick by tick.

The shop is invented and does the same every day, so that what is foreseen is what happens.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import pytest

from daemon.advance import Core
from daemon.clock import DAY_US, HOUR_US, parse_rfc3339
from daemon.moisture import outlook
from daemon.moisture.ahead import Ahead, stretches
from daemon.moisture.model import State
from daemon.moisture.outlook import Outlook
from daemon.replay import Result, replay
from daemon.site import hours as opening
from daemon.site.types import Site
from daemon.state import CoreState, Inputs
from sensors.reading import Reading
from tests.daemon.plants import Plant
from tests.daemon.shops import SITE
from tests.daemon.shops import site as parsed

BEGUN = parse_rfc3339("2026-03-02T00:00:00Z")
DAYS = "\n".join(
    f'{day} = ["08:00-12:00", "13:00-17:30"]'
    for day in ("mon", "tue", "wed", "thu", "fri", "sat", "sun")
)
HOURS = 'mon = ["08:00-12:00", "13:00-17:30"]\ntue = ["08:00-12:00", "13:00-17:30"]'
SHOP = parsed(
    SITE.replace(HOURS, DAYS)
    .replace("[site]", '[site]\nsample_every = "60 s"')
    .replace("members = 32", "members = 16")
)
EASY = np.zeros(16)


def gun(now_us: int) -> float:
    working = opening.is_open(SHOP.hours, SHOP.timezone, now_us)
    return 70.0 if working and now_us // 60_000_000 % 10 < 8 else 0.0


def record(shop: Site, days: float) -> list[Reading]:
    plant = Plant(shop, leak_l_min=2.0, used_l_min=gun, relative_humidity=0.6, step_s=10)
    return [r for tick in plant.record(BEGUN, round(days * 86400), 60) for r in tick]


@lru_cache(maxsize=1)
def two_days() -> tuple[Core, CoreState, Result]:
    """The state after one day, and how the second one went."""
    core = Core(SHOP)
    readings = record(SHOP, 2.0)
    first = [each for each in readings if each.time_us < BEGUN + DAY_US]
    after_one = replay(core, first, []).state
    state, _, _ = core.advance(after_one, BEGUN + DAY_US, Inputs())
    return core, state, replay(core, readings, [])


@pytest.fixture
def no_spread(monkeypatch: pytest.MonkeyPatch) -> None:
    """Tomorrow's air is today's."""
    monkeypatch.setattr(outlook, "TEMPERATURE_SD_K", 0.0)
    monkeypatch.setattr(outlook, "RATIO_LOG_SD", 0.0)


def run_ahead(core: Core, state: CoreState, result: Result) -> State:
    """The second day hour by hour, with the duty that it really had."""
    marks = [mark for mark in result.marks if mark.hour is not None]
    second = [mark.hour for mark in marks if mark.hour and mark.hour.from_us >= BEGUN + DAY_US]
    spans = [(hour.from_us, hour.from_us + HOUR_US) for hour in second]
    duty = np.array([hour.on_s / 3600.0 for hour in second])
    spans, duty = spans[:23], duty[:23]
    is_open = [bool(each.any()) for each in duty]
    pattern = state.followed.foresight.pattern
    seen = Outlook(core.model.plan, pattern, state.model, spans[-1][1])
    ahead = Ahead(core.model, seen)
    model = state.model
    for stretch in stretches(spans, is_open, duty):
        model = ahead.step(model, stretch)
    return model


@pytest.mark.usefixtures("no_spread")
def test_a_day_hour_by_hour_is_the_day_tick_by_tick() -> None:
    core, state, result = two_days()
    model = run_ahead(core, state, result)
    assert model.time_us == BEGUN + DAY_US + 23 * HOUR_US
    before, after = core.model.contents(state.model), core.model.contents(result.state.model)
    foreseen = core.model.contents(model)
    for row in core.model.plan.traps:
        grown = after[row] - before[row]
        assert np.median(grown) > 0.02
        off = foreseen[row] - after[row]
        assert np.abs(np.median(off)) < 0.02 * np.median(grown)
        assert np.all(np.abs(off) < 0.06 * grown + 1e-3)


@pytest.mark.usefixtures("no_spread")
def test_water_is_neither_made_nor_lost_ahead() -> None:
    core, state, result = two_days()
    model = run_ahead(core, state, result)
    assert model.ledger.residual(model.water).max() < 1e-9


def test_days_ahead_are_less_and_less_known() -> None:
    core, state, _ = two_days()
    pattern = state.followed.foresight.pattern
    seen = Outlook(core.model.plan, pattern, state.model, state.time_us + 9 * DAY_US)
    widths = [float(seen.warmer_k(state.time_us + day * DAY_US).std()) for day in range(9)]
    assert widths[0] == 0.0
    assert widths == sorted(widths) or widths[-1] > widths[1] > 0.0
    ratio = [seen.ratio(state.time_us + day * DAY_US) for day in (0, 1, 8)]
    spreads = [float(np.std(np.log(each))) for each in ratio]
    assert spreads[0] < spreads[1] < spreads[2]
    # warmer members are moister too
    later = state.time_us + 5 * DAY_US
    moister = np.log(seen.ratio(later) / ratio[0])
    assert np.corrcoef(seen.warmer_k(later), moister)[0, 1] > 0.3


def test_hours_without_flow_are_one_stretch() -> None:
    duty = np.array([EASY, EASY, EASY + 0.2, EASY, EASY])
    spans = [(n * HOUR_US, (n + 1) * HOUR_US) for n in range(5)]
    found = stretches(spans, [False, False, True, True, False], duty)
    assert [(each.from_us // HOUR_US, each.until_us // HOUR_US) for each in found] == [
        (0, 2),
        (2, 3),
        (3, 4),
        (4, 5),
    ]
