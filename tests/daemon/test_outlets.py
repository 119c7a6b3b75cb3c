"""Outlets end to end through a replay: margins, verdicts, and what takes them away."""

from __future__ import annotations

import csv
import json
import math
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from daemon.advance import Core
from daemon.checkpoint import decode, encode
from daemon.clock import HOUR_US, MINUTE_US, SECOND_US
from daemon.journal import Blotter, Body, Drain, Entry, Gauge
from daemon.moisture.description import Fixed
from daemon.outlet_payloads import outlet_payload
from daemon.replay import OUTLETS_HEADER, Result, replay, write
from daemon.site.types import Site
from daemon.state import Inputs
from daemon.views import Interval, OutletView
from sensors.reading import Reading, reading
from tests.daemon.outlet_shops import AT_GUN, DRY_BOWL, STILL, a_shop, site_text, still
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, site

SHOP = a_shop()
CORE = Core(SHOP)


def run(core: Core, readings: Sequence[Reading], *entries: tuple[int, Body]) -> Result:
    journal = [Entry(n, at_us, at_us, body) for n, (at_us, body) in enumerate(entries, 1)]
    return replay(core, readings, journal)


def gun(core: Core, result: Result, surface_k: float | None = None) -> OutletView:
    view = core.outlet_views.of(result.state, "spray-gun", surface_k)
    assert view is not None
    return view


def gun_of(shop: Site, hours: float = 0.5, **changed: float) -> OutletView:
    core = Core(shop)
    return gun(core, run(core, list(still(shop, hours, BEGUN_US, **changed))))


def known(interval: Interval | None) -> Interval:
    assert interval is not None
    return interval


# ---- the line ----


def test_saturated_air_behind_a_regulator_has_its_dew_point_and_margin() -> None:
    """7 bar gauge and 18 degC to 2 bar gauge: 3.54 degC by CoolProp (HAPropsSI), a margin of
    14.46 K to a floor and a regulator of 18 degC."""
    view = gun_of(SHOP)
    dew_point, margin = known(view.air.pressure_dew_point_k), known(view.air.line_margin_k)
    assert dew_point.p05 < 273.15 + 3.54 < dew_point.p95
    assert dew_point.p50 == pytest.approx(273.15 + 3.54, abs=0.3)
    assert margin.p50 == pytest.approx(14.46, abs=0.5)
    assert (view.verdict, view.air.judgement.verdict) == ("dry enough", "dry enough")
    assert view.air.pressure_pa == pytest.approx(301_300.0, abs=3e3)
    payload = outlet_payload(view)
    assert payload["speaks_of"].startswith("water only")


def test_air_that_rests_in_the_line_at_the_start_has_passed_it() -> None:
    first = list(still(SHOP, 0.0))
    begun = known(gun(CORE, run(CORE, first)).air.pressure_dew_point_k)
    later = known(gun_of(SHOP).air.pressure_dew_point_k)
    assert begun.p50 == pytest.approx(later.p50, abs=1.0)


def test_without_dryer_and_regulator_the_margin_stays_near_nothing() -> None:
    regulator = SITE[SITE.index('[[station]]\nid = "booth-regulator"') : SITE.index("[[outlet]]")]
    text = SITE.replace(regulator, "").replace('after = "booth-regulator"', 'after = "bowl"')
    view = gun_of(site(text))
    margin = known(view.air.line_margin_k)
    assert margin.p95 < 3.0
    assert view.air.judgement.verdict == "wait"
    assert "Neither a dryer nor a regulator" in " ".join(view.air.judgement.would_change)


def test_a_colder_floor_costs_line_margin() -> None:
    warm, cold = gun_of(SHOP), gun_of(SHOP, floor_temperature=278.15)
    assert cold.air.coldest == "slab"
    assert known(cold.air.line_margin_k).p50 < known(warm.air.line_margin_k).p50 - 10.0
    assert cold.air.judgement.verdict == "wait"
    assert "the slab under the hose" in cold.air.judgement.reasons[0]


def test_a_floor_that_nobody_measures_is_taken_for_colder_and_less_certain() -> None:
    """4 K +- 4 K below the air around: common practice, no source."""
    measured = gun_of(SHOP, floor_temperature=STILL["booth-air.temperature"] - 4.0)
    guessed = gun_of(a_shop(AT_GUN.replace('slab = "floor.temperature"\n', "")))
    one, other = known(measured.air.line_margin_k), known(guessed.air.line_margin_k)
    assert other.p50 == pytest.approx(one.p50, abs=0.8)
    assert other.p95 - other.p05 > 1.8 * (one.p95 - one.p05)


def test_a_hose_behind_a_warm_tank_lies_in_the_room_and_not_in_the_tank() -> None:
    """A tank of 45 degC at 7 bar gauge sheds nothing of 20 degC, 50 % (7.29 g/kg by psychrolib),
    whose dew point at 3 bar absolute is 26.5 degC by CoolProp: a floor 4 K below 20 degC drips."""
    text, gauge = site_text('surface = "panel.temperature"\n'), 'pressure = "tank-gauge.pressure"\n'
    hot = 'temperature = { like = "intake", plus = "25 K", give_or_take = "1 K" }\n'
    text = text.replace(gauge, hot + gauge)
    as_hot = 'temperature = { like = "tank", plus = "0 K", give_or_take = "1 K" }\n'
    text = text.replace('temperature = "pipe-end.temperature"\n', as_hot)
    view = gun_of(site(text), intake_air_relative_humidity=0.5)
    dew_point, margin = known(view.air.pressure_dew_point_k), known(view.air.line_margin_k)
    assert dew_point.p05 < 273.15 + 26.5 < dew_point.p95
    assert margin.p50 == pytest.approx(16.0 - 26.5, abs=1.5)
    assert view.verdict == "wait"


def test_a_hose_behind_an_ice_bath_lies_in_the_room_and_not_in_the_bath() -> None:
    bath = '[[station]]\nid = "bath"\nkind = "cooler"\nafter = "bowl"\nice = "20 kg"\n'
    separator = 'trap = { capacity = "2 L", separation = 0.999 }\n\n'
    text = site_text("", "").replace('after = "booth-regulator"', 'after = "bath"')
    regulator = '[[station]]\nid = "booth-regulator"'
    view = gun_of(site(text.replace(regulator, bath + separator + regulator)))
    # air saturated at 3 degC, in a hose on a floor 4 K below the intake's 20 degC
    assert known(view.air.pressure_dew_point_k).p50 == pytest.approx(273.15 + 3.0, abs=0.3)
    assert known(view.air.line_margin_k).p50 == pytest.approx(16.0 - 3.0, abs=1.5)


def test_a_flooded_trap_lets_water_through_and_means_wait() -> None:
    """A bowl that runs over: everything that comes to it is carried on."""
    shop = a_shop()
    stations = tuple(
        replace(s, trap=replace(s.trap, capacity=Fixed(0.002, 0.0))) if s.trap is not None else s
        for s in shop.line.stations
    )
    shop = replace(shop, line=replace(shop.line, stations=stations))
    core = Core(shop)
    hours = 1.5
    result = run(core, list(still(shop, hours)))
    view = gun(core, result)
    assert view.verdict == view.air.judgement.verdict == "wait"
    reason, change = view.air.judgement.reasons[0], view.air.judgement.would_change[0]
    assert reason.startswith("Liquid water comes along: about")
    assert change.startswith("Drain tank, riser, bowl")
    assert known(view.air.line_margin_k).p05 > 5.0  # the margin alone would do
    assert known(view.air.carried_kg_per_m3).p95 > 5e-5
    assert outlet_payload(view)["air"]["iso_8573_1_humidity"].startswith("in the range of class ")
    # once drained the air is judged by what it carried lately
    end_us = BEGUN_US + round(hours * HOUR_US)
    drains = [(end_us - 60 * MINUTE_US, Drain(name)) for name in ("tank", "riser", "bowl")]
    drained = gun(core, run(core, list(still(shop, hours)), *drains))
    assert known(drained.air.carried_kg_per_m3).p50 < known(view.air.carried_kg_per_m3).p50


# ---- inputs that cannot be believed ----


def silent_after(readings: Sequence[Reading], channel: str, at_us: int) -> list[Reading]:
    return [each for each in readings if each.channel != channel or each.time_us < at_us]


# the booth's own barometer is not asked: the intake's speaks for the shop
@pytest.mark.parametrize("channel", sorted(SHOP.channels.keys() - {"booth-air.pressure"}))
@pytest.mark.parametrize("how", ["silent", "bad"])
def test_an_input_that_fails_is_never_dry_enough(channel: str, how: str) -> None:
    record = list(still(SHOP, 0.25))
    last_us = record[-1].time_us - 5 * PERIOD_US
    if how == "silent":
        record = silent_after(record, channel, last_us)
    else:
        record = [
            Reading(channel, math.nan, r.time_us, "no answer")
            if r.channel == channel and r.time_us >= last_us
            else r
            for r in record
        ]
    view = gun(CORE, run(CORE, record))
    assert view.verdict == "unknown"
    words = " ".join((*view.air.judgement.reasons, *view.surface.judgement.reasons))
    assert channel in words
    assert "no answer" in words or "has said nothing for 3 periods" in words


def test_what_cannot_be_known_is_an_empty_cell(tmp_path: Path) -> None:
    record = list(still(SHOP, 2.0))
    record = silent_after(record, "floor.temperature", BEGUN_US + HOUR_US + 5 * PERIOD_US)
    result = run(CORE, record)
    write(CORE, result, [], tmp_path)
    with (tmp_path / "outlets.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert (tmp_path / "outlets.csv").read_text().splitlines()[0] == OUTLETS_HEADER
    assert OUTLETS_HEADER == (
        "time,outlet,pressure_dew_point_p05_c,pressure_dew_point_p50_c,pressure_dew_point_p95_c,"
        "line_margin_p05_k,line_margin_p50_k,line_margin_p95_k,carried_liquid_p95_g_m3,verdict"
    )
    assert [(row["time"], row["outlet"]) for row in rows] == [
        ("2026-03-02T07:00:00Z", "spray-gun"),
        ("2026-03-02T08:00:00Z", "spray-gun"),
        ("2026-03-02T09:00:00Z", "spray-gun"),
    ]
    good, lost = rows[1], rows[2]
    assert good["verdict"] == "dry enough"
    assert float(good["line_margin_p05_k"]) < float(good["line_margin_p95_k"])
    assert lost["verdict"] == "unknown"
    assert [lost[f"line_margin_p{p}_k"] for p in ("05", "50", "95")] == ["", "", ""]
    assert lost["pressure_dew_point_p50_c"] != ""  # the air itself is still reckoned


def test_the_last_part_of_an_hour_has_a_row_too(tmp_path: Path) -> None:
    write(CORE, run(CORE, list(still(SHOP, 0.5))), [], tmp_path)
    rows = (tmp_path / "outlets.csv").read_text().splitlines()
    assert [row.split(",")[0] for row in rows[1:]] == [
        "2026-03-02T07:00:00Z",
        "2026-03-02T07:30:00Z",
    ]


def test_a_dew_point_that_cannot_be_gives_a_reason_rather_than_a_number(tmp_path: Path) -> None:
    """A transmitter that says 30 degC where the line is 18 degC: there would be water in it."""
    text = site_text().replace(
        'id = "riser"\nkind = "pipe"\n',
        'id = "riser"\nkind = "pipe"\nmeasured_dew_point = "probe.dew_point"\n',
    )
    text = text.replace(
        '[[station]]\nid = "intake"\n',
        '[[sensor]]\nid = "probe"\ndriver = "dew-point-loop"\ninput = 1\n'
        'range = "-60 to 60 degC"\n\n[[station]]\nid = "intake"\n',
        1,
    )
    shop = site(text)
    core = Core(shop)

    def with_probe(celsius: float) -> Result:
        record = list(still(shop, 0.25))
        times = sorted({each.time_us for each in record})
        channel = shop.channels["probe.dew_point"]
        record += [reading(channel, celsius + 273.15, time_us) for time_us in times]
        return run(core, sorted(record, key=lambda each: each.time_us))

    assert gun(core, with_probe(17.0)).verdict == "dry enough"
    wrong = with_probe(30.0)
    view = gun(core, wrong)
    assert view.verdict == "unknown"
    assert "a dew point of at least" in view.air.judgement.reasons[0]
    assert view.air.pressure_dew_point_k is None
    assert view.air.line_margin_k is None
    assert outlet_payload(view)["air"]["iso_8573_1_humidity"] == "cannot tell"
    write(core, wrong, [], tmp_path)
    last = (tmp_path / "outlets.csv").read_text().splitlines()[-1].split(",")
    assert last[2:8] == [""] * 6
    assert last[-1] == "unknown"


@pytest.mark.parametrize(("says_k", "verdict"), [(277.15, "dry enough"), (290.15, "unknown")])
def test_a_dryer_that_does_not_dry_by_its_transmitter_is_never_dry_enough(
    says_k: float, verdict: str
) -> None:
    """Set to 3 degC: 4 degC is within what any of them does, 17 degC is a dryer that has failed."""
    dryer = (
        '[[station]]\nid = "dryer"\nkind = "refrigerated"\nafter = "bowl"\n'
        'trap = { capacity = "1 L", separation = 0.999 }\n'
        'temperature = "20 degC"\nmeasured_dew_point = "probe.dew_point"\n'
        'rated_flow = "900 L/min"\n\n'
    )
    probe = (
        '[[sensor]]\nid = "probe"\ndriver = "dew-point-loop"\ninput = 1\n'
        'range = "-60 to 60 degC"\n\n'
    )
    regulator, intake = '[[station]]\nid = "booth-regulator"', '[[station]]\nid = "intake"\n'
    text = site_text().replace(regulator, dryer + regulator).replace(intake, probe + intake, 1)
    shop = site(text.replace('after = "bowl"\nset', 'after = "dryer"\nset'))
    core, readings = Core(shop), []
    for told in still(shop, 2.2):
        readings.append(told)
        if told.channel == "motor.contact":
            readings.append(reading(shop.channels["probe.dew_point"], says_k, told.time_us))
    result = run(core, readings)
    view = gun(core, result)
    assert view.verdict == verdict
    if verdict == "unknown":
        assert view.air.pressure_dew_point_k is None
        assert "dryer: a dew point of at least 14.5 degC" in view.air.judgement.reasons[0]
        assert "does the dryer before it dry?" in view.air.judgement.reasons[0]
        # and what stands before the dryer is not blamed for it
        assert float(np.abs(result.state.model.ledger.corrected).max()) == 0.0


def test_a_dead_sensor_costs_the_dew_point_only_certainty() -> None:
    whole = run(CORE, list(still(SHOP, 3.0)))
    lost = silent_after(list(still(SHOP, 3.0)), "pipe-end.temperature", BEGUN_US + HOUR_US)
    one = known(gun(CORE, whole).air.pressure_dew_point_k)
    other = known(gun(CORE, run(CORE, lost)).air.pressure_dew_point_k)
    assert other.p95 - other.p05 > 1.5 * (one.p95 - one.p05)


def test_a_line_that_is_warmer_than_the_hose_is_to_cool() -> None:
    """The last trap follows the pipe's end, 35 degC; hose and floor are at 18 to 21 degC."""
    warm = gun_of(SHOP, pipe_end_temperature=308.15)
    (said,) = [each for each in warm.air.judgement.would_change if "Let the line cool" in each]
    assert said.startswith("Let the line cool: bowl is 1")
    assert warm.verdict == "wait"
    cool = gun_of(SHOP)
    assert not any("Let the line cool" in each for each in cool.air.judgement.would_change)


# ---- the surface ----


def test_a_cold_surface_means_wait_and_how_warm_it_must_be() -> None:
    """21 degC and 50 % have a dew point of 10.2 degC (CoolProp)."""
    view = gun_of(SHOP, panel_temperature=273.15 + 11.0)
    margin = known(view.surface.surface_margin_k)
    assert margin.p50 == pytest.approx(0.8, abs=0.4)
    assert view.surface.judgement.verdict == view.verdict == "wait"
    (change,) = view.surface.judgement.would_change
    assert change.startswith("Warm the surface to ")
    needed_c = float(change.split(" to ")[1].split(" ")[0])
    assert needed_c == pytest.approx(11.0 + 3.0 - margin.p05, abs=0.4)


def test_where_only_the_sensors_width_stands_in_the_way_the_gauge_is_asked() -> None:
    view = gun_of(SHOP, panel_temperature=273.15 + 13.9)
    assert known(view.surface.surface_margin_k).p05 < 3.0 < known(view.surface.surface_margin_k).p50
    assert view.surface.judgement.verdict == "wait"
    assert "Too close for these sensors: use your gauge." in view.surface.judgement.would_change


def test_a_gauge_s_reading_narrows_the_surface_margin_while_it_speaks() -> None:
    record = list(still(SHOP, 1.0, panel_temperature=273.15 + 14.2))
    at_us = BEGUN_US + 30 * MINUTE_US
    before = known(gun(CORE, run(CORE, record)).surface.surface_margin_k)
    told = (at_us, Gauge("spray-gun", before.p50 + 0.3, valid_s=3600.0))
    view = gun(CORE, run(CORE, record, told))
    after = known(view.surface.surface_margin_k)
    assert view.surface.by_gauge_until_us == at_us + HOUR_US
    # +- 0.5 K is a spread of 0.82 K from 5 to 95 %
    assert after.p95 - after.p05 < min(0.9, 0.5 * (before.p95 - before.p05))
    assert after.p50 == pytest.approx(before.p50 + 0.3, abs=0.15)
    assert before.p05 < 3.0 < after.p05
    over = (at_us, Gauge("spray-gun", before.p50 + 0.3, valid_s=1200.0))
    assert gun(CORE, run(CORE, record, over)).surface.surface_margin_k == before


def test_a_gauge_alone_tells_how_warm_the_surface_is() -> None:
    """Without an infrared sensor the reading holds for the surface, while the air is followed."""
    shop = a_shop(AT_GUN.replace('surface = "panel.temperature"\n', ""))
    core = Core(shop)
    damp = [
        replace(each, value=0.6)
        if each.channel == "booth-air.relative_humidity"
        and each.time_us > BEGUN_US + 40 * MINUTE_US
        else each
        for each in still(shop, 1.0)
    ]
    assert gun(core, run(core, damp)).surface.judgement.verdict == "unknown"
    told = (BEGUN_US + 30 * MINUTE_US, Gauge("spray-gun", 6.0, valid_s=7200.0))
    view = gun(core, run(core, damp, told))
    # 50 % to 60 % at 21 degC: from 10.2 to 12.9 degC of dew point (CoolProp)
    assert known(view.surface.surface_margin_k).p50 == pytest.approx(6.0 - 2.7, abs=0.2)


def test_a_gauge_that_contradicts_the_sensors_gives_unknown() -> None:
    told = (BEGUN_US + 20 * MINUTE_US, Gauge("spray-gun", 25.0))
    view = gun(CORE, run(CORE, list(still(SHOP, 0.5)), told))
    assert view.verdict == view.surface.judgement.verdict == "unknown"
    assert "cannot both be right" in view.surface.judgement.reasons[0]


def test_a_surface_that_somebody_measured_is_judged_without_a_sensor() -> None:
    shop = a_shop(AT_GUN.replace('surface = "panel.temperature"\n', ""))
    core = Core(shop)
    result = run(core, list(still(shop, 0.5)))
    assert gun(core, result).verdict == "unknown"
    assert "Type it in" in gun(core, result).surface.judgement.would_change[0]
    warm, cold = gun(core, result, 293.15), gun(core, result, 284.15)
    assert (warm.verdict, cold.verdict) == ("dry enough", "wait")
    assert known(warm.surface.surface_k).p95 - known(warm.surface.surface_k).p05 > 0.5


def test_a_surface_sensor_s_word_is_not_needed_for_powder() -> None:
    shop = a_shop(work="powder", set_bar=1.0)
    view = gun_of(shop, panel_temperature=280.15)
    assert view.surface.judgement.verdict == "dry enough"
    assert view.verdict == "dry enough"


def test_blasted_steel_may_be_left_bare_only_with_more_room() -> None:
    shop = a_shop(work="blasting")
    near, far = gun_of(shop), gun_of(shop, booth_air_relative_humidity=0.25)
    assert near.holding is not None
    assert far.holding is not None
    assert (near.surface.judgement.verdict, near.holding.verdict) == ("dry enough", "wait")
    assert far.holding.verdict == "dry enough"


def test_a_damp_evening_is_foreseen_from_the_one_before() -> None:
    """Yesterday the air was damp from 10:00 on; it is 09:00, and two hours are needed."""
    day = []
    for each in still(SHOP, 26.0):
        hour = (each.time_us - BEGUN_US) / HOUR_US % 24
        damp = each.channel == "booth-air.relative_humidity" and 3.0 <= hour < 6.0
        day.append(replace(each, value=0.8) if damp else each)
    view = gun(CORE, run(CORE, day))
    assert known(view.surface.surface_margin_k).p05 > 3.0
    assert view.surface.judgement.verdict == "care"
    assert "may fall below 3 K from Tue 10:00 on" in view.surface.judgement.reasons[0]
    first, second = view.surface.ahead[0][1], view.surface.ahead[4][1]
    assert first.p50 < 3.0 < second.p50  # it is over again by the afternoon
    assert len(view.surface.ahead) == 12


# ---- blotters ----


def test_a_stain_means_wait_until_a_clean_one_whatever_the_margin() -> None:
    record = list(still(SHOP, 0.5))
    at_us = BEGUN_US + 5 * MINUTE_US
    water, oil = (at_us, Blotter("spray-gun", "water")), (at_us + 1, Blotter("spray-gun", "oil"))
    clean = (at_us + MINUTE_US, Blotter("spray-gun", "clean"))
    stained = gun(CORE, run(CORE, record, water))
    assert (stained.verdict, stained.blotter) == ("wait", "water")
    assert "The blotter showed water (Mon 07:05)." in stained.air.judgement.reasons
    oily = gun(CORE, run(CORE, record, water, oil))
    assert (oily.verdict, oily.blotter) == ("wait", "oil")
    assert "dripleg cannot see oil" in oily.air.judgement.reasons[0]
    wiped = gun(CORE, run(CORE, record, water, oil, clean))
    assert (wiped.verdict, wiped.blotter) == ("dry enough", "clean")


def test_a_clean_test_settles_a_doubt_about_carried_liquid() -> None:
    """An ordinary coalescer may let a little through: the trade's own test says whether it does."""
    shop = site(site_text().replace(DRY_BOWL, 'trap = { capacity = "120 ml" }\n'))
    core = Core(shop)
    record = list(still(shop, 1.0))
    doubtful = gun(core, run(core, record))
    assert doubtful.air.judgement.verdict == "wait"
    assert "perhaps none, but up to" in doubtful.air.judgement.reasons[0]
    assert "blotter" in doubtful.air.judgement.would_change[0]
    told = (BEGUN_US + 40 * MINUTE_US, Blotter("spray-gun", "clean"))
    tested = gun(core, run(core, record, told))
    assert tested.air.judgement.verdict == "dry enough"


def test_a_stain_outranks_what_is_not_known() -> None:
    record = silent_after(list(still(SHOP, 0.5)), "floor.temperature", BEGUN_US + MINUTE_US)
    view = gun(CORE, run(CORE, record, (BEGUN_US + SECOND_US, Blotter("spray-gun", "oil"))))
    assert view.verdict == "wait"


# ---- the state ----


def test_outlets_come_back_from_a_checkpoint_to_the_bit() -> None:
    told = (
        (BEGUN_US + MINUTE_US, Gauge("spray-gun", 9.0)),
        (
            BEGUN_US + MINUTE_US,
            Blotter("spray-gun", "water", "AM"),
        ),
    )
    state = run(CORE, list(still(SHOP, 1.0)), *told).state
    again, _ = decode(encode(state, "x"))
    assert encode(again, "x") == encode(state, "x")
    one, other = CORE.outlet_views.all(state), CORE.outlet_views.all(again)
    assert json.dumps(outlet_payload(one[0])) == json.dumps(outlet_payload(other[0]))
    assert np.isfinite(again.outlets["spray-gun"].past).sum() == 2


def test_shares_of_several_outlets_are_judged_each_by_its_own_way() -> None:
    text = SITE.replace(
        '[[outlet]]\nid = "spray-gun"\n',
        '[[outlet]]\nid = "blast-pot"\nafter = "bowl"\nwork = "blasting"\n\n'
        '[[outlet]]\nid = "spray-gun"\n',
    )
    shop = site(text)
    core = Core(shop)
    pot, spray = core.outlet_views.all(run(core, list(still(shop, 0.5))).state)
    assert (pot.outlet, spray.outlet) == ("blast-pot", "spray-gun")
    assert known(pot.air.line_margin_k).p50 < 1.0 < known(spray.air.line_margin_k).p50
    assert pot.air.pressure_pa == pytest.approx(101_300 + 7e5, abs=2e4)


def test_sensors_that_have_never_spoken_leave_an_outlet_unknown() -> None:
    for silent in ("booth-air", "floor", "panel", "pipe-end", "intake-air"):
        record = [each for each in still(SHOP, 0.25) if not each.channel.startswith(silent)]
        view = gun(CORE, run(CORE, record))
        assert view.verdict == "unknown", silent
        told = (BEGUN_US + 5 * MINUTE_US, Gauge("spray-gun", 8.0))
        assert gun(CORE, run(CORE, record, told)).verdict == "unknown", silent
        assert json.dumps(outlet_payload(view), allow_nan=False)


def test_an_hour_with_no_sensor_at_all_still_gives_an_answer_and_a_wider_one() -> None:
    """Sensors that are declared and silent are another matter: nothing is declared here."""
    text = SITE[: SITE.index("[[sensor]]")] + SITE[SITE.index('[[station]]\nid = "tank"') :]
    for channel in ("tank-gauge.pressure", "pipe-end.temperature", "motor.contact"):
        key = channel.split(".")[1].replace("contact", "running")
        text = text.replace(f'{key} = "{channel}"\n', "")
    blind = site(text)
    core = Core(blind)
    state, _, _ = core.initial(BEGUN_US, Inputs())
    for number in range(1, 361):
        state, _, _ = core.advance(state, BEGUN_US + number * PERIOD_US, Inputs())
    (view,) = core.outlet_views.all(state)
    wide, narrow = (
        known(view.air.pressure_dew_point_k),
        known(gun_of(SHOP).air.pressure_dew_point_k),
    )
    assert view.air.judgement.verdict in ("wait", "care")
    assert wide.p95 - wide.p05 > 2.0 * (narrow.p95 - narrow.p05)
