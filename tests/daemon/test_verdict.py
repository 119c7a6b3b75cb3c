"""Verdicts: which figure decides, the words, and what would change it. Figures are invented."""

from __future__ import annotations

from dataclasses import replace

import pytest

from daemon.line_verdict import LineFacts, judge_line
from daemon.surface_verdict import TOO_CLOSE, SurfaceFacts, judge_holding, judge_surface
from daemon.verdict import worst
from daemon.views import Interval, Verdict
from daemon.work import PROFILES

ZERO_C = 273.15
PLAIN, SOLVENT = PROFILES[""], PROFILES["solvent-borne"]


def around(middle: float, half: float = 0.5) -> Interval:
    return Interval(middle - half, middle, middle + half)


def celsius(middle: float, half: float = 0.5) -> Interval:
    return around(middle + ZERO_C, half)


LINE = LineFacts(
    margin_k=around(12.0),
    dew_point_k=celsius(5.0),
    carried_kg_per_m3=Interval(0.0, 1e-6, 1e-5),
    coldest="the hose",
    wanted_k=10.0,
    relieved=True,
)
SURFACE = SurfaceFacts(
    air_k=celsius(21.0),
    humidity=around(0.5, 0.02),
    surface_k=celsius(20.0),
    margin_k=around(8.0),
    humidity_at_surface=around(0.55, 0.03),
)


@pytest.mark.parametrize(
    ("verdicts", "counts"),
    [
        (["dry enough", "care"], "care"),
        (["care", "unknown", "dry enough"], "unknown"),
        (["unknown", "wait"], "wait"),
        ([], "unknown"),
    ],
)
def test_the_worst_verdict_counts(verdicts: list[Verdict], counts: Verdict) -> None:
    assert worst(verdicts) == counts


# ---- the line ----


@pytest.mark.parametrize(
    ("p05", "p50", "verdict"),
    [
        (2.9, 12.0, "wait"),  # the bad end decides, not the middle
        (3.0, 4.0, "care"),
        (9.9, 30.0, "care"),
        (10.0, 10.5, "dry enough"),
    ],
)
def test_the_line_is_judged_on_the_bad_end_of_its_interval(
    p05: float, p50: float, verdict: Verdict
) -> None:
    facts = replace(LINE, margin_k=Interval(p05, p50, p50 + 5.0))
    assert judge_line("metric", PLAIN, facts).verdict == verdict


@pytest.mark.parametrize(("wanted_k", "verdict"), [(5.0, "dry enough"), (8.0, "care")])
def test_dry_enough_begins_where_it_is_asked_to(wanted_k: float, verdict: Verdict) -> None:
    facts = replace(LINE, margin_k=around(6.0), wanted_k=wanted_k)
    assert judge_line("metric", PLAIN, facts).verdict == verdict


@pytest.mark.parametrize(("p95", "verdict"), [(5.0e-5, "dry enough"), (5.1e-5, "wait")])
def test_liquid_means_wait_whatever_the_margin(p95: float, verdict: Verdict) -> None:
    facts = replace(LINE, margin_k=around(25.0), carried_kg_per_m3=Interval(0.0, 1e-6, p95))
    assert judge_line("metric", PLAIN, facts).verdict == verdict


def test_liquid_that_may_be_is_told_apart_from_liquid_that_is() -> None:
    maybe = replace(LINE, carried_kg_per_m3=Interval(0.0, 1e-6, 8e-5))
    surely = replace(LINE, carried_kg_per_m3=Interval(1e-4, 4.2e-4, 9e-4), flooded=["riser"])
    assert judge_line("metric", PLAIN, maybe).reasons[0] == (
        "Liquid water comes along: perhaps none, but up to 0.08 g per m3 (limit 0.05)."
    )
    found = judge_line("metric", PLAIN, surely)
    assert found.reasons[0] == "Liquid water comes along: about 0.42 g per m3 (limit 0.05)."
    assert found.would_change[0].startswith("Drain riser, which is full")
    # 1 gr = 64.79891 mg, 1 ft3 = 0.028316847 m3 (NIST Handbook 44): 0.42 g/m3 is 0.1835 gr/ft3
    assert judge_line("us", PLAIN, surely).reasons[0] == (
        "Liquid water comes along: about 0.18 grains per ft3 (limit 0.022)."
    )


@pytest.mark.parametrize(("dew_point_c", "verdict"), [(2.4, "dry enough"), (2.6, "care")])
def test_two_component_work_asks_for_a_pressure_dew_point_too(
    dew_point_c: float, verdict: Verdict
) -> None:
    facts = replace(LINE, margin_k=around(20.0), dew_point_k=celsius(dew_point_c))
    found = judge_line("metric", PROFILES["two-component"], facts)
    assert found.verdict == verdict
    assert judge_line("metric", SOLVENT, facts).verdict == "dry enough"


@pytest.mark.parametrize("margin_k", [None, around(20.0)])
def test_an_input_that_fails_gives_unknown_with_the_reason(margin_k: Interval | None) -> None:
    facts = replace(LINE, margin_k=margin_k, unusable=["tank-gauge.pressure is not usable: x"])
    found = judge_line("metric", PLAIN, facts)
    assert found.verdict == "unknown"
    assert found.reasons[0] == "tank-gauge.pressure is not usable: x."
    assert "dripleg check" in found.would_change[0]


def test_what_somebody_saw_outranks_what_is_not_known() -> None:
    facts = replace(LINE, unusable=["x"], oil_at="Mon 09:12")
    found = judge_line("metric", PLAIN, facts)
    assert found.verdict == "wait"
    assert found.reasons[0] == "The blotter showed oil (Mon 09:12): dripleg cannot see oil."


def test_nothing_known_is_unknown_and_not_dry() -> None:
    facts = replace(LINE, margin_k=None, dew_point_k=None, carried_kg_per_m3=None)
    assert judge_line("metric", PLAIN, facts).verdict == "unknown"


@pytest.mark.parametrize(
    ("facts", "words"),
    [
        (replace(LINE, margin_k=Interval(2.0, 11.0, 19.0)), "a sensor at the hose"),
        (replace(LINE, margin_k=around(1.0), relieved=False), "Neither a dryer nor a regulator"),
        (replace(LINE, margin_k=around(1.0)), "A lower pressure here"),
    ],
)
def test_it_says_what_would_change_a_line_margin(facts: LineFacts, words: str) -> None:
    assert words in " ".join(judge_line("metric", PLAIN, facts).would_change)


def test_people_with_us_gauges_read_their_own_units() -> None:
    facts = replace(LINE, margin_k=Interval(2.0, 3.0, 4.0))
    reason = judge_line("us", PLAIN, facts).reasons[0]
    assert reason == (
        "At the hose the air is 5.4 degF (3.6 to 7.2 degF) above its dew point; "
        "below 5.4 degF it may drop out."
    )


def test_a_warm_last_trap_asks_to_let_the_line_cool() -> None:
    low = replace(LINE, margin_k=around(2.0), warm="bowl", warmer_k=9.0)
    words = "so water goes past it as vapor and drops out later."
    metric = judge_line("metric", SOLVENT, low).would_change
    assert f"Let the line cool: bowl is 9 K warmer than the hose, {words}" in metric
    us = judge_line("us", SOLVENT, low).would_change  # 9 K are 16.2 degF
    assert f"Let the line cool: bowl is 16.2 degF warmer than the hose, {words}" in us
    assert judge_line("metric", SOLVENT, replace(low, margin_k=around(12.0))).would_change == ()
    assert not any("cool" in each for each in judge_line("us", SOLVENT, LINE).would_change)


# ---- the surface ----


@pytest.mark.parametrize(("p05", "verdict"), [(2.9, "wait"), (3.0, "dry enough")])
def test_the_surface_is_judged_on_the_bad_end_too(p05: float, verdict: Verdict) -> None:
    facts = replace(SURFACE, margin_k=Interval(p05, 4.5, 6.0))
    assert judge_surface("metric", SOLVENT, facts).verdict == verdict


def test_too_close_for_these_sensors_only_where_their_width_stands_in_the_way() -> None:
    near = replace(SURFACE, margin_k=Interval(2.0, 3.2, 4.4))
    cold = replace(SURFACE, margin_k=Interval(0.0, 1.2, 2.4))
    assert judge_surface("metric", SOLVENT, near).would_change == (TOO_CLOSE,)
    assert judge_surface("metric", SOLVENT, cold).would_change == (
        "Warm the surface to 23 degC, or dry the air around it.",
    )


def test_a_gauge_that_spoke_is_not_asked_for_again() -> None:
    near = replace(SURFACE, margin_k=Interval(2.6, 3.2, 3.8), by_gauge=True)
    assert TOO_CLOSE not in judge_surface("metric", SOLVENT, near).would_change


# Common practice, no source; the edges of each profile, judged on the bad end (half a degree, 2 %).
@pytest.mark.parametrize(
    ("work", "air_c", "humidity", "verdict", "words"),
    [
        ("solvent-borne", 10.6, 0.5, "dry enough", "21"),
        ("solvent-borne", 10.4, 0.5, "wait", "10 degC is the least"),
        ("solvent-borne", 34.6, 0.5, "wait", "35 degC is the most"),
        ("solvent-borne", 21.0, 0.67, "dry enough", ""),
        ("solvent-borne", 21.0, 0.69, "care", "above 70 % take care"),
        ("solvent-borne", 21.0, 0.84, "wait", "85 % is the most"),
        ("waterborne", 19.9, 0.5, "wait", "20 degC is the least"),
        ("waterborne", 21.0, 0.64, "wait", "65 % is the most"),
        ("waterborne", 21.0, 0.36, "care", "35 % is the least"),
        ("two-component", 24.6, 0.5, "wait", "25 degC is the most"),
        ("two-component", 21.0, 0.69, "wait", "70 % is the most"),
        ("powder", 17.0, 0.5, "wait", "18 degC is the least"),
        ("powder", 21.0, 0.59, "wait", "60 % is the most"),
        ("blasting", 2.0, 0.95, "dry enough", ""),
    ],
)
def test_the_air_around_is_judged_by_the_work(
    work: str, air_c: float, humidity: float, verdict: Verdict, words: str
) -> None:
    facts = replace(SURFACE, air_k=celsius(air_c), humidity=around(humidity, 0.02))
    found = judge_surface("metric", PROFILES[work], facts)
    assert found.verdict == verdict
    if verdict != "dry enough":
        assert words in found.reasons[0]


@pytest.mark.parametrize(("humidity", "close"), [(0.84, True), (0.92, False)])
def test_humid_air_within_the_sensor_s_width_asks_for_the_gauge(
    humidity: float, close: bool
) -> None:
    facts = replace(SURFACE, humidity=around(humidity, 0.02))
    assert (TOO_CLOSE in judge_surface("metric", SOLVENT, facts).would_change) == close


def test_powder_asks_nothing_of_the_surface() -> None:
    facts = replace(SURFACE, margin_k=around(0.0))
    assert judge_surface("metric", PROFILES["powder"], facts).verdict == "dry enough"


def test_a_margin_that_will_not_hold_through_flash_off_is_care() -> None:
    found = judge_surface("metric", SOLVENT, replace(SURFACE, low_at="Tue 16:00"))
    assert found.verdict == "care"
    assert "may fall below 3 K from Tue 16:00 on" in found.reasons[0]


@pytest.mark.parametrize(
    ("facts", "words"),
    [
        (SurfaceFacts(), "Nobody measures the air around."),
        (replace(SURFACE, margin_k=None), "The surface's temperature is not known."),
        (replace(SURFACE, unusable=["booth-air.temperature has said nothing"]), "booth-air"),
    ],
)
def test_what_is_not_known_of_a_surface_is_unknown(facts: SurfaceFacts, words: str) -> None:
    found = judge_surface("metric", SOLVENT, facts)
    assert found.verdict == "unknown"
    assert words in " ".join(found.reasons)


# ---- to hold a blast ----


@pytest.mark.parametrize(
    ("p05", "humidity_p95", "verdict"),
    [(10.0, 0.50, "dry enough"), (9.9, 0.50, "wait"), (10.0, 0.51, "wait")],
)
def test_a_blast_is_held_by_spread_and_by_humidity_at_the_surface(
    p05: float, humidity_p95: float, verdict: Verdict
) -> None:
    facts = replace(
        SURFACE,
        margin_k=Interval(p05, 12.0, 14.0),
        humidity_at_surface=Interval(0.4, 0.45, humidity_p95),
    )
    assert judge_holding("metric", facts).verdict == verdict


def test_a_blast_is_not_held_by_what_is_not_known() -> None:
    assert judge_holding("metric", SurfaceFacts()).verdict == "unknown"
    assert judge_holding("metric", replace(SURFACE, unusable=["x"])).verdict == "unknown"
