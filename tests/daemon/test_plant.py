"""What closed hours tell of the plant, end to end through a replay. All shops are invented.

The truth comes from `plants`, which reckons a tank's air apart from the model.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from functools import lru_cache

import pytest

from daemon.advance import Core
from daemon.alarms import Transition
from daemon.clock import HOUR_US, MINUTE_US, SECOND_US, parse_rfc3339
from daemon.journal import Drain, Entry, Service
from daemon.plant_alarms import LEAKAGE, OVERWORKED
from daemon.plant_figures import plant_view
from daemon.plant_summary import plant_summary
from daemon.replay import Result, replay
from daemon.site.types import Site
from daemon.views import Interval, PlantView
from sensors.reading import reading
from tests.daemon.plants import BAROMETER_PA, GAS, REFERENCE_KG_PER_M3, Plant
from tests.daemon.shops import SITE
from tests.daemon.shops import site as parsed

EVENING = parse_rfc3339("2026-03-02T16:30:00Z")  # a Monday; the shop closes at 17:30
NIGHT_S = round(15.6 * 3600)  # to 08:06 on Tuesday, six minutes after it opens


def shop(*changes: tuple[str, str], period_s: int = 60) -> Site:
    text = SITE.replace("[site]", f'[site]\nsample_every = "{period_s} s"')
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    return parsed(text)


SHOP = shop()
LEFT_ON = shop(('cut_out = "8 bar"', 'cut_out = "8 bar"\noff_when_closed = false'), period_s=20)


def working_until_closing(now_us: int) -> float:
    return 60.0 if now_us < EVENING + HOUR_US else 0.0


def night(
    plant: Plant, entries: Sequence[Entry] = (), seconds: int = NIGHT_S
) -> tuple[PlantView, Result]:
    period_s = plant.site.sample_every_us // SECOND_US
    readings = [each for tick in plant.record(EVENING, seconds, period_s) for each in tick]
    result = replay(Core(plant.site), readings, entries)
    return plant_view(plant.site, result.state), result


@lru_cache(maxsize=8)
def usual_night(leak_l_min: float) -> tuple[PlantView, Result]:
    return night(Plant(SHOP, leak_l_min=leak_l_min, used_l_min=working_until_closing))


def litres_a_minute(interval: Interval | None) -> Interval:
    assert interval is not None
    return Interval(*(each * 60e3 for each in interval.values))


def raised(result: Result, alarm: str) -> list[Transition]:
    return [each for each in result.transitions if each.alarm == alarm]


# 20 L/min empties the tank before the two hours of cooling are over; 0.5 L/min hardly shows.
@pytest.mark.parametrize("leak_l_min", [0.5, 2.0, 5.0, 10.0, 20.0])
def test_a_closed_night_with_a_known_leak_finds_it_within_its_bounds(leak_l_min: float) -> None:
    view, result = usual_night(leak_l_min)
    leak = litres_a_minute(view.leak_m3_per_s)
    assert leak.p05 < leak_l_min < leak.p95
    assert leak.p50 == pytest.approx(leak_l_min, rel=0.05)
    assert leak.p95 - leak.p05 < 0.6 * leak_l_min
    summary = plant_summary(SHOP, result.state)["leak_rate_reference_l_min"]
    assert summary == {
        name: round(each, 3) for name, each in zip(("p05", "p50", "p95"), leak.values, strict=True)
    }


def test_a_tank_that_only_cools_does_not_leak() -> None:
    view, _ = usual_night(0.0)
    assert litres_a_minute(view.leak_m3_per_s).p95 < 0.1


def test_a_leak_has_its_cost_and_its_hole() -> None:
    costs = '[costs]\nkwh_price = 0.40\ncurrency = "EUR"\n\n[compressor]'
    dear = shop(("[compressor]", costs))
    view, _ = night(Plant(dear, leak_l_min=10.0, used_l_min=working_until_closing))
    # 10 L/min x 6.5 kW for a m3/min (+- 25 %) x 17 h a week x 52: arithmetic on practice's figure
    energy = 0.010 * 6.5 * 17.0 * 52.0
    assert view.leak_kwh_per_year is not None
    assert view.leak_cost_per_year is not None
    assert view.leak_kwh_per_year.p50 == pytest.approx(energy, rel=0.06)
    assert view.leak_cost_per_year.p50 == pytest.approx(0.40 * energy, rel=0.06)
    assert view.leak_kwh_per_year.p05 < 0.85 * energy < 1.2 * energy < view.leak_kwh_per_year.p95
    assert view.currency == "EUR"
    # a sharp-edged hole of half a millimetre: 0.6 x 0.196 mm2 x 8 bar / 490 m/s
    assert view.leak_hole_m == pytest.approx(0.47e-3, rel=0.05)


def test_a_leak_costs_all_week_where_the_compressor_stays_on() -> None:
    view, _ = night(Plant(LEFT_ON, leak_l_min=10.0, on_when_closed=True), seconds=6 * 3600)
    assert view.leak_kwh_per_year is not None
    assert view.leak_kwh_per_year.p50 == pytest.approx(0.010 * 6.5 * 168.0 * 52.0, rel=0.06)
    assert view.leak_cost_per_year is None  # nobody said the price


def test_a_high_leak_raises_its_alarm_and_a_low_one_does_not() -> None:
    _, high = usual_night(20.0)
    (transition,) = raised(high, LEAKAGE)
    assert (transition.after, transition.kind) == ("unacknowledged", "leakage-high")
    assert re.match(
        r"The line leaks about (19|20)\.?\d* L/min \(1\d\.\d to 2\d(\.\d)? L/min\)", transition.text
    )
    assert "kWh a year" in transition.text
    assert "more than 10 % of what the compressor delivers" in transition.text
    _, low = usual_night(5.0)
    assert raised(low, LEAKAGE) == []


def test_somebody_who_works_at_night_is_no_leak() -> None:
    def late(now_us: int) -> float:
        return 40.0 if now_us % (4 * HOUR_US) < 3 * MINUTE_US else 0.0

    view, _ = night(Plant(SHOP, leak_l_min=0.5, used_l_min=late))
    assert view.leak_m3_per_s is None


def test_a_drain_at_night_ends_what_was_being_followed() -> None:
    at_us = EVENING + 4 * HOUR_US
    drain = Entry(1, at_us, at_us, Drain("tank"))
    blown = Plant(
        SHOP,
        leak_l_min=1.0,
        used_l_min=lambda now_us: 600.0 if 0 <= now_us - at_us < 20 * SECOND_US else 0.0,
    )
    view, result = night(blown, [drain])
    leak = litres_a_minute(view.leak_m3_per_s)
    assert leak.p05 < 1.0 < leak.p95
    figure = result.state.followed.plant.leak_kg_per_s
    assert figure is not None
    assert figure.count == 1.0  # the one after the drain


def test_a_run_between_two_readings_ends_what_was_being_followed() -> None:
    """The contact closes and opens again within one tick: its level is as before."""
    at_us = EVENING + 4 * HOUR_US + 13 * SECOND_US
    contact = SHOP.channels["motor.contact"]
    short = [reading(contact, 1.0, at_us), reading(contact, 0.0, at_us + 20 * SECOND_US)]
    plant = Plant(SHOP, leak_l_min=1.0, used_l_min=working_until_closing)
    readings = [each for tick in plant.record(EVENING, 5 * 3600, 60) for each in tick]
    before = [each for each in readings if each.time_us < at_us]
    followed = replay(Core(SHOP), before, []).state.followed.plant.phase
    assert followed is not None
    assert followed.settled is not None
    told = sorted([*readings, *short], key=lambda each: each.time_us)
    until = [each for each in told if each.time_us < at_us + 10 * MINUTE_US]
    again = replay(Core(SHOP), until, []).state.followed.plant.phase
    assert again is not None
    assert again.settled is None
    assert again.first.time_us > at_us


# ---- the compressor ----


@pytest.mark.parametrize(("delivered_l_min", "leak_l_min"), [(150.0, 10.0), (105.0, 20.0)])
def test_turns_of_the_switch_tell_what_the_compressor_delivers(
    delivered_l_min: float, leak_l_min: float
) -> None:
    plant = Plant(
        LEFT_ON, leak_l_min=leak_l_min, delivered_l_min=delivered_l_min, on_when_closed=True
    )
    view, result = night(plant)
    # litres at the intake's air, which is some 291 K at night, as reference litres
    true = delivered_l_min * BAROMETER_PA / (GAS * 291.0) / REFERENCE_KG_PER_M3
    delivered = litres_a_minute(view.delivered_m3_per_s)
    assert delivered.p05 < true < delivered.p95
    assert delivered.p50 == pytest.approx(true, rel=0.03)
    leak = litres_a_minute(view.leak_m3_per_s)
    assert leak.p05 < leak_l_min < leak.p95
    assert view.delivered_to_rated is not None
    assert view.delivered_to_rated.p50 == pytest.approx(delivered_l_min / 150.0, rel=0.03)
    worn = delivered_l_min < 120.0
    assert [each.after for each in raised(result, OVERWORKED)] == ["unacknowledged"] * worn
    if worn:
        assert "The compressor delivers 7" in raised(result, OVERWORKED)[0].text


def test_a_second_tank_without_a_gauge_of_its_own_holds_air_as_well() -> None:
    riser = '[[station]]\nid = "riser"\nkind = "pipe"\nafter = "tank"\n'
    second = '[[station]]\nid = "second"\nkind = "receiver"\nafter = "tank"\nvolume = "60 L"\n\n'
    left_on = ('cut_out = "8 bar"', 'cut_out = "8 bar"\noff_when_closed = false')
    joined = shop(
        left_on,
        ('volume = "100 L"', 'volume = "40 L"'),
        (riser, second + riser.replace('"tank"', '"second"')),
        period_s=20,
    )
    view, result = night(Plant(joined, leak_l_min=10.0, on_when_closed=True))
    leak, delivered = (
        litres_a_minute(each) for each in (view.leak_m3_per_s, view.delivered_m3_per_s)
    )
    assert leak.p05 < 10.0 < leak.p95
    # litres at the intake's air, which is some 291 K at night, as reference litres
    true = 150.0 * BAROMETER_PA / (GAS * 291.0) / REFERENCE_KG_PER_M3
    assert delivered.p05 < true < delivered.p95
    assert not raised(result, OVERWORKED)


def test_a_gauge_alone_tells_the_same() -> None:
    gauge_only = shop(
        ('running = "motor.contact"\n', 'running = "none"\noff_when_closed = false\n'),
        period_s=20,
    )
    plant = Plant(gauge_only, leak_l_min=15.0, on_when_closed=True)
    view, _ = night(plant)
    leak = litres_a_minute(view.leak_m3_per_s)
    delivered = litres_a_minute(view.delivered_m3_per_s)
    assert leak.p05 < 15.0 < leak.p95
    assert delivered.p05 < 153.0 < delivered.p95


def test_a_contact_alone_tells_the_leak_by_its_share_of_time() -> None:
    contact_only = shop(
        ('pressure = "tank-gauge.pressure"\n', ""),
        ('cut_out = "8 bar"', 'cut_out = "8 bar"\noff_when_closed = false'),
        period_s=20,
    )
    view, _ = night(Plant(contact_only, leak_l_min=15.0, on_when_closed=True))
    leak = litres_a_minute(view.leak_m3_per_s)
    assert leak.p05 < 15.0 < leak.p95
    assert leak.p95 - leak.p05 < 6.0
    assert view.delivered_m3_per_s is None


def test_a_service_forgets_what_the_compressor_delivered() -> None:
    at_us = EVENING + 5 * HOUR_US
    service = Entry(1, at_us, at_us, Service("compressor serviced", "compressor"))
    plant = Plant(LEFT_ON, leak_l_min=30.0, delivered_l_min=100.0, on_when_closed=True)
    before, _ = night(plant, seconds=5 * 3600)
    after, _ = night(plant, [service], seconds=6 * 3600)
    assert before.weak > 0.9
    assert 0 < after.delivered_times < 0.5 * before.delivered_times


# ---- duty ----


def test_a_compressor_that_never_rests_is_overworked_until_it_does() -> None:
    morning = parse_rfc3339("2026-03-02T08:00:00Z")

    def use(now_us: int) -> float:
        return 140.0 if now_us < morning + 24 * HOUR_US + 90 * MINUTE_US else 30.0

    plant = Plant(SHOP, leak_l_min=1.0, used_l_min=use)
    readings = [each for tick in plant.record(morning, 32 * 3600, 60) for each in tick]
    result = replay(Core(SHOP), readings, [])
    up, down = raised(result, OVERWORKED)
    assert (up.after, down.after) == ("unacknowledged", "returned unacknowledged")
    # the fourth whole working hour is over at 12:00
    assert 0 < up.at_us - (morning + 4 * HOUR_US) <= SHOP.sample_every_us
    assert "of the last working hours; its limit is 75 %" in up.text
    assert down.at_us > morning + 26 * HOUR_US
    assert down.text == "The compressor copes again."


def test_a_site_that_cannot_tell_has_no_such_alarms() -> None:
    blind = parsed("")
    assert not {LEAKAGE, OVERWORKED} & set(Core(blind).definitions)
    always_open = shop(
        ('[hours]\nmon = ["08:00-12:00", "13:00-17:30"]\ntue = ["08:00-12:00", "13:00-17:30"]', "")
    )
    assert {LEAKAGE, OVERWORKED} & set(Core(always_open).definitions) == {OVERWORKED}
