"""A flow meter says what is drawn in, while it speaks."""

from __future__ import annotations

import numpy as np
import pytest

from daemon.advance import Core
from daemon.errors import SiteError
from daemon.moisture.air import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.replay import replay
from sensors.reading import Reading
from tests.daemon.shops import SITE, a_tick, flat, site, working

METER = """[[sensor]]
id = "meter"
driver = "flow-pulses"
line = 22
volume_per_pulse = "10 L"
highest = "1000 L/min"

[[station]]"""
METERED = SITE.replace("[[station]]", METER, 1).replace(
    "cut_in =", 'flow_meter = "meter.free_air_flow"\ncut_in ='
)


def drawn_m3(record: list[tuple[int, list[Reading]]]) -> np.ndarray:
    """Reference m3 drawn in, 5, 50 and 95 %."""
    state = replay(Core(site(METERED)), flat(record), []).state
    return np.percentile(state.model.air.drawn, [5, 50, 95]) / REFERENCE_DRY_AIR_KG_PER_M3


def test_the_meter_counts_and_not_the_rated_figure() -> None:
    shop = site(METERED)
    record = [
        (now_us, readings + a_tick(shop, now_us, {"meter.free_air_flow": 2.0e-3}))
        for now_us, readings in working(shop, 361)
    ]
    low, middle, high = drawn_m3(record)
    assert middle == pytest.approx(2.0e-3 * 3600.0, rel=1e-3)
    # 3 % of the end of its range is 0.5 L/s, 95 %: 1.645 / 2 of it at 5 and 95 %
    assert high - middle == pytest.approx(0.5e-3 * 3600.0 * 1.645 / 2, rel=0.15)
    assert middle - low == pytest.approx(high - middle, rel=0.05)


def test_a_silent_meter_leaves_it_to_the_contact() -> None:
    shop = site(METERED)
    metered = [(now_us, readings) for now_us, readings in working(shop, 361)]
    plain = replay(Core(site()), flat(list(working(site(), 361))), []).state
    expected = np.median(plain.model.air.drawn) / REFERENCE_DRY_AIR_KG_PER_M3
    assert drawn_m3(metered)[1] == pytest.approx(float(expected), rel=1e-9)


def test_another_quantity_is_refused() -> None:
    with pytest.raises(SiteError, match="flow_meter"):
        site(METERED.replace('"meter.free_air_flow"', '"motor.contact"'))
