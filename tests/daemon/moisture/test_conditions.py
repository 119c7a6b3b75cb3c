"""Temperatures and pressures from sensors, literals and rules; what silence costs."""

from __future__ import annotations

import math

import numpy as np
import pytest

from daemon.moisture.beliefs import draw, names, offsets
from daemon.moisture.conditions import Conditions, Evaluation, Held, Lapse
from daemon.moisture.ensemble import Array
from daemon.moisture.plan import plan_line
from daemon.site.reader import parse_site
from tests.daemon.shops import SITE

MEMBERS = 1000
PERIOD_US = 10_000_000
HOUR_US = 3_600_000_000
SAID = {
    "intake-air.temperature": 298.15,
    "intake-air.relative_humidity": 0.62,
    "intake-air.pressure": 95_000.0,
    "tank-gauge.pressure": 7.0e5,
    "pipe-end.temperature": 290.15,
}


class Shop:
    """Birch Works, evaluated at any time with whatever has been heard."""

    def __init__(self, text: str = SITE) -> None:
        site = parse_site(text.replace("members = 32", f"members = {MEMBERS}"), "birch-works.toml")
        self.plan = plan_line(site.line)
        self.offsets = offsets(self.plan, draw(self.plan, names(self.plan)))
        self.duty = np.zeros((len(self.plan.stations), MEMBERS))
        self.held: dict[str, Held] = {}
        self.lapses: dict[str, Lapse] = {}

    def hear(self, now_us: int, but: str = "") -> None:
        self.held |= {name: Held(value, now_us) for name, value in SAID.items() if name != but}

    def at(self, now_us: int) -> Conditions:
        evaluation = Evaluation(self.plan, self.held, self.offsets, self.duty, now_us, self.lapses)
        return evaluation.conditions()

    def row(self, station: str) -> int:
        return self.plan.index[station]


def sd(values: Array) -> float:
    return float(values.std())


def middle(values: Array) -> float:
    return float(np.median(values))


def test_a_fresh_channel_is_its_value_and_its_data_sheet_s_width() -> None:
    shop = Shop()
    shop.hear(0)
    now = shop.at(0)
    intake = now.temperature_k[shop.row("intake")]
    assert middle(intake) == pytest.approx(298.15, abs=0.01)
    assert sd(intake) == pytest.approx(0.5, rel=0.02)  # BME280: +-1 K, k = 2
    assert middle(now.relative_humidity) == pytest.approx(0.62, abs=1e-4)
    assert sd(now.relative_humidity) == pytest.approx(0.015, rel=0.02)  # +-3 % RH


def test_a_gauge_stands_on_the_measured_barometer_not_on_a_standard_atmosphere() -> None:
    """950 hPa: a standard atmosphere would be off by 6 %."""
    shop = Shop()
    shop.hear(0)
    now = shop.at(0)
    tank = now.pressure_pa[shop.row("tank")]
    assert middle(tank) == pytest.approx(7.95e5, rel=1e-3)
    regulator = now.pressure_pa[shop.row("booth-regulator")]
    assert middle(regulator) == pytest.approx(3.95e5, rel=5e-3)


def test_a_regulator_cannot_raise_a_pressure() -> None:
    shop = Shop()
    shop.hear(0)
    shop.held["tank-gauge.pressure"] = Held(2.0e5, 0)
    now = shop.at(0)
    assert np.all(now.pressure_pa[shop.row("booth-regulator")] <= now.pressure_pa[shop.row("bowl")])


def test_what_follows_a_gauge_is_measured_up_to_a_regulator() -> None:
    shop = Shop()
    shop.hear(0)
    measured = [shop.plan.stations[row].id for row in sorted(shop.at(0).measured)]
    assert measured == ["intake", "tank", "riser", "bowl"]
    assert shop.at(10**9).measured == frozenset()


def test_the_receiver_warms_with_the_duty() -> None:
    """Its default rule: 20 K at a duty of 1, give or take 8 K. Common practice, no source."""
    shop = Shop()
    shop.hear(0)
    shop.duty[shop.row("tank")] = 0.4
    now = shop.at(0)
    rise = now.temperature_k[shop.row("tank")] - now.temperature_k[shop.row("intake")]
    assert middle(rise) == pytest.approx(8.0, abs=0.05)
    assert sd(rise) == pytest.approx(4.0, rel=0.02)


def test_a_channel_holds_for_three_periods_and_no_longer() -> None:
    shop = Shop()
    shop.hear(0)
    fresh = shop.at(0).relative_humidity
    assert np.array_equal(shop.at(3 * PERIOD_US).relative_humidity, fresh)
    assert shop.lapses == {}
    after = shop.at(3 * PERIOD_US + 1)
    assert not np.array_equal(after.relative_humidity, fresh)
    assert "relative_humidity of intake" in shop.lapses
    assert after.measured == frozenset()


@pytest.mark.parametrize("hours", [0.01, 1, 6, 24])
def test_a_silent_channel_drifts_to_its_rule_and_grows_as_wide(hours: float) -> None:
    """First order with 6 h: what the air in a shop was this morning says little by night."""
    shop = Shop()
    shop.hear(0)
    shop.at(PERIOD_US * 4)
    now = shop.at(round(hours * HOUR_US))
    remains = math.exp(-hours / 6.0)
    intake = now.temperature_k[shop.row("intake")]
    # the rule: 20 degC +- 10 K; common practice, no source
    assert middle(intake) == pytest.approx(293.15 + 5.0 * remains, abs=0.4)
    width = math.hypot(0.5 * remains, 5.0 * math.sqrt(1.0 - remains**2))
    assert sd(intake) == pytest.approx(width, rel=0.06)
    humidity = now.relative_humidity
    assert middle(humidity) == pytest.approx(0.5 + 0.12 * remains, abs=0.015)
    assert sd(humidity) == pytest.approx(
        math.hypot(0.015 * remains, 0.15 * math.sqrt(1.0 - remains**2)), rel=0.06
    )


def test_what_is_not_measured_is_known_less_and_less() -> None:
    shop = Shop()
    shop.hear(0)
    widths = [sd(shop.at(round(h * HOUR_US)).relative_humidity) for h in (0, 0.1, 1, 3, 9, 30)]
    assert widths == sorted(widths)
    assert widths[-1] > 8.0 * widths[0]


def test_a_silence_begins_without_a_jump() -> None:
    shop = Shop()
    shop.hear(0)
    before = shop.at(3 * PERIOD_US)
    after = shop.at(3 * PERIOD_US + 1)
    for one, other, step in (
        (before.temperature_k, after.temperature_k, 1.0),
        (before.pressure_pa, after.pressure_pa, 3e4),
    ):
        assert np.abs(one - other).max() < step


def test_a_channel_that_speaks_again_is_believed_at_once() -> None:
    shop = Shop()
    shop.hear(0)
    fresh = shop.at(0)
    shop.at(9 * HOUR_US)
    shop.hear(9 * HOUR_US)
    again = shop.at(9 * HOUR_US)
    assert np.array_equal(again.temperature_k, fresh.temperature_k)
    assert np.array_equal(again.pressure_pa, fresh.pressure_pa)
    assert shop.lapses == {}


def test_only_the_station_of_the_silent_channel_drifts() -> None:
    shop = Shop()
    shop.hear(0)
    fresh = shop.at(0)
    shop.hear(HOUR_US, but="pipe-end.temperature")
    now = shop.at(HOUR_US)
    changed = [
        station.id
        for i, station in enumerate(shop.plan.stations)
        if not np.array_equal(now.temperature_k[i], fresh.temperature_k[i])
    ]
    assert changed == ["riser", "bowl", "booth-regulator"]  # it, and what is said to be like it
    assert np.array_equal(now.pressure_pa, fresh.pressure_pa)


def test_a_channel_that_never_spoke_is_its_rule_from_the_start() -> None:
    shop = Shop()
    now = shop.at(0)
    humidity = now.relative_humidity
    assert middle(humidity) == pytest.approx(0.5, abs=0.01)
    assert sd(humidity) == pytest.approx(0.15, rel=0.05)
    later = shop.at(48 * HOUR_US)
    assert np.array_equal(later.relative_humidity, humidity)
    tank = now.pressure_pa[shop.row("tank")]
    assert middle(tank) == pytest.approx(7e5 + 101_325.0, rel=0.01)  # between cut-in and cut-out
    assert sd(tank) == pytest.approx(math.hypot(0.5e5, 1_500.0), rel=0.06)


def test_a_second_silence_is_another_one() -> None:
    """Each lapse has its own draw of what is not known, and a replay the same ones."""
    found = []
    for _ in range(2):
        shop = Shop()
        shop.hear(0)
        shop.at(HOUR_US)
        first = shop.lapses["relative_humidity of intake"].unknown
        shop.hear(2 * HOUR_US)
        shop.at(2 * HOUR_US)
        shop.at(3 * HOUR_US)
        second = shop.lapses["relative_humidity of intake"].unknown
        assert not np.array_equal(first, second)
        found.append((first, second))
    assert np.array_equal(found[0], found[1])


def test_nothing_leaves_the_range_in_which_the_formulas_hold() -> None:
    shop = Shop()
    shop.hear(0)
    shop.held["intake-air.temperature"] = Held(373.0, 0)
    shop.held["intake-air.relative_humidity"] = Held(1.0, 0)
    shop.held["tank-gauge.pressure"] = Held(-0.9e5, 0)
    now = shop.at(0)
    assert now.temperature_k.max() <= 373.15
    assert now.pressure_pa.min() >= 50_000.0
    assert now.relative_humidity.max() <= 1.0
