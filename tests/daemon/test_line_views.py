"""The line as it is now: figures of the state, and where each comes from. Invented shops."""

from __future__ import annotations

import numpy as np
import pytest

from daemon.advance import Core
from daemon.line_views import LineViews
from daemon.state import CoreState, Inputs
from daemon.views import StationView
from tests.daemon import shops
from tests.daemon.shops import BEGUN_US, PERIOD_US

PropsSI = pytest.importorskip("CoolProp.CoolProp").HAPropsSI
SHOP = shops.site()
CORE = Core(SHOP)


def after(ticks: int, without: str = "", from_tick: int = 0) -> CoreState:
    """The state after so many ticks; a channel may fall silent at one of them."""
    state: CoreState | None = None
    for number, (now_us, readings) in enumerate(shops.working(SHOP, ticks)):
        heard = [r for r in readings if r.channel != without or number < from_tick]
        if state is None:
            state, _, _ = CORE.initial(now_us, Inputs(heard))
        else:
            state, _, _ = CORE.advance(state, now_us, Inputs(heard))
    assert state is not None
    return state


def views(state: CoreState) -> dict[str, StationView]:
    return {view.station: view for view in LineViews(SHOP, CORE.model).all(state)}


def test_a_sensor_a_rule_a_figure_and_a_default_are_told_apart() -> None:
    found = views(after(30))
    assert list(found) == ["intake", "tank", "riser", "bowl", "booth-regulator"]
    assert found["riser"].temperature.origin == "sensor"
    assert found["riser"].temperature.words == "sensor pipe-end.temperature, give or take 0.5 K"
    assert found["tank"].temperature.origin == "default"  # nobody said how warm the tank is
    assert found["tank"].temperature.words.startswith("like intake + 20 K x duty")
    assert found["tank"].pressure.origin == "sensor"
    assert found["booth-regulator"].pressure.origin == "site file"
    assert found["intake"].relative_humidity is not None
    assert found["intake"].relative_humidity.origin == "sensor"
    assert found["tank"].relative_humidity is None


def test_a_silent_sensor_is_named_with_what_stands_in_for_it() -> None:
    state = after(60, without="pipe-end.temperature", from_tick=20)
    riser = views(state)["riser"]
    assert riser.temperature.origin == "rule"
    assert riser.temperature.words == (
        "sensor pipe-end.temperature is not heard since 2026-03-02T07:03:10Z; instead: like "
        "intake, give or take 4 K"
    )
    heard = views(after(60))["riser"].temperature.value
    assert riser.temperature.value.p95 - riser.temperature.value.p05 > heard.p95 - heard.p05


def test_a_sensor_that_never_spoke_is_named_too() -> None:
    riser = views(after(20, without="pipe-end.temperature"))["riser"]
    assert "is never heard; instead: like intake" in riser.temperature.words


def test_the_dew_point_is_that_of_the_air_that_leaves() -> None:
    state = after(360)
    found = views(state)
    tank = found["tank"]
    assert found["riser"].saturated == 1.0  # a cool pipe behind a warm tank of 60 % room air
    assert found["booth-regulator"].saturated == 0.0  # let down, it has room
    row = CORE.model.plan.index["tank"]
    ratio = state.model.water.leaving_ratio[row]
    pressure = state.model.conditions.pressure_pa[row]
    expected = [  # CoolProp 8, HAPropsSI
        PropsSI("D", "W", w, "P", p, "T", 313.15) for w, p in zip(ratio, pressure, strict=True)
    ]
    # 0.02 K is the formulas' own difference above 0 degC
    assert tank.dew_point_k.p50 == pytest.approx(float(np.median(expected)), abs=0.02)
    assert tank.at_us == BEGUN_US + 359 * PERIOD_US
