"""Dew and frost points: across pressures, over water and ice, on surfaces, and in a vented cell."""

from __future__ import annotations

import itertools

import psychrolib
import pytest
from CoolProp.CoolProp import HAPropsSI, PropsSI

from daemon.moisture import air

ZERO_C = 273.15
ATMOSPHERE_PA = 101325.0


def fahrenheit(degrees: float) -> float:
    """K."""
    return (degrees - 32) / 1.8 + ZERO_C


def dew_point_in_room_air(kelvin: float, relative_humidity: float) -> float:
    ratio = air.humidity_ratio(kelvin, ATMOSPHERE_PA, relative_humidity)
    return air.dew_point(ratio, ATMOSPHERE_PA)


# CoolProp 8: a frost or dew point at 1.01325 bar and the dew or frost point at 8.013 bar (7 bar
# gauge). Tolerances are the errors stated for the formulas by band: 0.016, 0.044 and 0.06 K.
@pytest.mark.parametrize(
    ("at_atmosphere", "at_7_bar_gauge", "within"),
    [(10.0, 44.881, 0.016), (-20.0, 3.716, 0.016), (-40.0, -20.487, 0.044), (-60.0, -43.874, 0.06)],
)
def test_a_dew_point_moves_with_pressure_as_published(
    at_atmosphere: float, at_7_bar_gauge: float, within: float
) -> None:
    line_pa = ATMOSPHERE_PA + 7e5
    ratio = air.saturated_humidity_ratio(at_atmosphere + ZERO_C, ATMOSPHERE_PA)
    assert air.dew_point(ratio, line_pa) - ZERO_C == pytest.approx(at_7_bar_gauge, abs=within)
    ratio = air.saturated_humidity_ratio(at_7_bar_gauge + ZERO_C, line_pa)
    assert air.dew_point(ratio, ATMOSPHERE_PA) - ZERO_C == pytest.approx(at_atmosphere, abs=within)


@pytest.mark.parametrize("bar", [4.0, 6.0, 8.01325, 9.5, 12.0, 16.0])
def test_dew_points_stay_near_coolprop(bar: float) -> None:
    for celsius in range(-70, 21, 2):
        ours = air.saturated_humidity_ratio(celsius + ZERO_C, ATMOSPHERE_PA)
        theirs = HAPropsSI("W", "T", celsius + ZERO_C, "P", ATMOSPHERE_PA, "R", 1.0)
        expected = HAPropsSI("D", "W", theirs, "P", bar * 1e5, "T", 360.0)
        line_c = expected - ZERO_C
        # The stated errors, by the band of the pressure dew point; 0.001 K for its own solver.
        within = 0.016 if line_c > 0 else 0.044 if line_c >= -40 else 0.06
        got = air.dew_point(ours, bar * 1e5)
        assert got == pytest.approx(expected, abs=within + 0.001), (celsius, bar)


def test_a_frost_point_of_minus_20_is_a_dew_point_of_minus_22() -> None:
    # -22.24: from the vapor pressures of ice and supercooled water by CoolProp and IAPWS. Formulas
    # for supercooled water differ by 0.1 % there, 0.01 K and a rounding.
    ratio = air.saturated_humidity_ratio(253.15, ATMOSPHERE_PA)
    assert air.dew_point(ratio, ATMOSPHERE_PA) == pytest.approx(253.15, abs=1e-6)
    over_water = air.dew_point_over_water(ratio, ATMOSPHERE_PA) - ZERO_C
    assert over_water == pytest.approx(-22.24, abs=0.02)


# Published: a pressure dew point of +2 degC at 7 bar gauge is -23 degC at atmosphere, phase not
# said, whole degrees (1 K). By CoolProp -23.6 over water, -21.3 as frost (one decimal).
def test_pressure_dew_point_2_degc_let_down_to_atmosphere() -> None:
    ratio = air.saturated_humidity_ratio(2 + ZERO_C, ATMOSPHERE_PA + 7e5)
    over_water = air.dew_point_over_water(ratio, ATMOSPHERE_PA) - ZERO_C
    assert over_water == pytest.approx(-23.0, abs=1.0)
    assert over_water == pytest.approx(-23.6, abs=0.06)
    assert air.dew_point(ratio, ATMOSPHERE_PA) - ZERO_C == pytest.approx(-21.3, abs=0.06)


# CoolProp: air saturated at 8 bar gauge and 20 degC, after a regulator; one decimal and the
# formulas' 0.016 K.
@pytest.mark.parametrize(("set_bar", "celsius"), [(5, 13.8), (3, 7.8), (2, 3.7), (0, -9.6)])
def test_a_regulator_lowers_the_dew_point(set_bar: float, celsius: float) -> None:
    ratio = air.saturated_humidity_ratio(293.15, ATMOSPHERE_PA + 8e5)
    got = air.dew_point(ratio, ATMOSPHERE_PA + set_bar * 1e5) - ZERO_C
    assert got == pytest.approx(celsius, abs=0.066)


# A painters' chart, degF: printed in whole degrees from an older formula, hence 2 degF; CoolProp's
# value to one decimal. At 90 degF 50 % the chart errs to the unsafe side.
@pytest.mark.parametrize(
    ("air_f", "rh_percent", "chart_f", "coolprop_f"),
    [
        (70, 65, 57, 57.7),
        (80, 85, 75, 75.1),
        (50, 80, 44, 44.1),
        (100, 90, 97, 96.5),
        (90, 50, 67, 68.9),
    ],
)
def test_the_painters_chart(
    air_f: float, rh_percent: float, chart_f: float, coolprop_f: float
) -> None:
    got_f = (dew_point_in_room_air(fahrenheit(air_f), rh_percent / 100) - ZERO_C) * 1.8 + 32
    assert got_f == pytest.approx(chart_f, abs=2.0)
    assert got_f == pytest.approx(coolprop_f, abs=0.06)


# Worked examples of paint trade papers, whole percent (0.5 K), beside CoolProp's two decimals.
@pytest.mark.parametrize(("celsius", "rh", "expected"), [(16.0, 0.71, 10.75), (30.0, 0.55, 19.98)])
def test_dew_points_of_painters_examples(celsius: float, rh: float, expected: float) -> None:
    got = dew_point_in_room_air(celsius + ZERO_C, rh) - ZERO_C
    assert got == pytest.approx(expected, abs=0.5)
    assert got == pytest.approx(expected, abs=0.01)


def relative_humidity_at(surface_k: float, spread_k: float) -> float:
    """Of the air in touch with a surface that is `spread_k` warmer than the air's dew point."""
    ratio = air.saturated_humidity_ratio(surface_k - spread_k, ATMOSPHERE_PA)
    return air.mole_fraction(ratio) / air.mole_fraction(
        air.saturated_humidity_ratio(surface_k, ATMOSPHERE_PA)
    )


# Relative humidity at a surface by its spread over the dew point, surfaces of 50-90 degF: a
# blasting guide's ranges, whose ends are met to 2 % and their rounding; CoolProp's to theirs.
@pytest.mark.parametrize(
    ("spread_f", "published", "coolprop"),
    [(5, (82, 86), (83, 85)), (15, (54, 62), (56, 62)), (20, (43, 51), (45, 52))],
)
def test_relative_humidity_at_a_surface(
    spread_f: float, published: tuple[float, float], coolprop: tuple[float, float]
) -> None:
    humidities = [
        relative_humidity_at(fahrenheit(f), spread_f / 1.8) * 100 for f in range(50, 91, 10)
    ]
    for got, low, high in zip((min(humidities), max(humidities)), published, coolprop, strict=True):
        assert got == pytest.approx(low, abs=2.5)
        assert got == pytest.approx(high, abs=0.6)


# In a 20 degC hose a margin of 10 / 5 / 3 K is 53 / 73 / 83 % (CoolProp, whole percent).
@pytest.mark.parametrize(("margin_k", "percent"), [(10, 53), (5, 73), (3, 83)])
def test_a_margin_in_a_hose_is_a_relative_humidity(margin_k: float, percent: float) -> None:
    assert relative_humidity_at(293.15, margin_k) * 100 == pytest.approx(percent, abs=0.6)


# A humidity element in a cell at 20 degC and atmosphere, bled from a line at 7 bar gauge: what it
# reads, and the pressure dew points that its +-3 % RH and 1 K (or +-1 % and 0.1 K) allow. CoolProp,
# one decimal, and 0.1 K for what 0.2 % of humidity ratio makes at so dry an end.
@pytest.mark.parametrize(
    ("dew_point_c", "reads_percent", "coarse", "fine"),
    [
        (10.0, 6.8, (0.6, 16.7), (7.4, 12.3)),
        (3.0, 4.2, (-12.9, 11.9), (-0.9, 6.3)),
        (-20.0, 0.6, (None, 1.7), (None, -8.9)),
        (-40.0, 0.07, (None, -0.4), (None, -13.2)),
    ],
)
def test_what_a_vented_cell_can_say(
    dew_point_c: float,
    reads_percent: float,
    coarse: tuple[float | None, float],
    fine: tuple[float | None, float],
) -> None:
    line_pa = ATMOSPHERE_PA + 7e5
    ratio = air.saturated_humidity_ratio(dew_point_c + ZERO_C, line_pa)
    room = air.mole_fraction(air.saturated_humidity_ratio(293.15, ATMOSPHERE_PA))
    reading = air.mole_fraction(ratio) / room
    assert reading * 100 == pytest.approx(reads_percent, abs=0.05 if reads_percent > 0.1 else 0.005)
    for (low, high), rh, kelvin in ((coarse, 0.03, 1.0), (fine, 0.01, 0.1)):
        for expected, sign in ((low, -1), (high, 1)):
            if expected is None:
                assert reading - rh < 0  # nothing but "below" can be said
                continue
            cell = air.humidity_ratio(293.15 + sign * kelvin, ATMOSPHERE_PA, reading + sign * rh)
            got = air.dew_point(cell, line_pa) - ZERO_C
            assert got == pytest.approx(expected, abs=0.16)


# psychrolib: Hyland and Wexler without an enhancement factor, which moves a dew point at one
# atmosphere by no more than its change with temperature: 0.02 K.
def test_dew_points_agree_with_psychrolib() -> None:
    psychrolib.SetUnitSystem(psychrolib.SI)
    for celsius, rh in itertools.product(range(20, 50, 3), (0.3, 0.5, 0.9)):
        expected = psychrolib.GetTDewPointFromRelHum(celsius, rh)
        assert dew_point_in_room_air(celsius + ZERO_C, rh) - ZERO_C == pytest.approx(
            expected, abs=0.02
        )


# A flueless gas heater makes 1.6 kg of water of a kg of propane: 300 m3 at 8 degC 70 % go from a
# dew point of 2.9 to 12.4 degC (CoolProp; 0.15 K, for whether 300 m3 is of moist or of dry air).
def test_a_flueless_heater_wets_the_air() -> None:
    kelvin = 8 + ZERO_C
    before = air.humidity_ratio(kelvin, ATMOSPHERE_PA, 0.7)
    after = before + 1.6 / (300 * air.dry_air_density(kelvin, ATMOSPHERE_PA, before))
    assert air.dew_point(before, ATMOSPHERE_PA) - ZERO_C == pytest.approx(2.9, abs=0.06)
    assert air.dew_point(after, ATMOSPHERE_PA) - ZERO_C == pytest.approx(12.4, abs=0.15)


# CoolProp's real air, enthalpy kept; the fit's stated error.
@pytest.mark.parametrize(
    ("celsius", "within"), [(0, 0.03), (10, 0.012), (20, 0.012), (40, 0.012), (50, 0.03)]
)
@pytest.mark.parametrize("gauge_bar", [3, 5, 8])
def test_air_cools_a_little_in_a_valve(celsius: float, gauge_bar: float, within: float) -> None:
    before_pa = ATMOSPHERE_PA + gauge_bar * 1e5
    enthalpy = PropsSI("H", "T", celsius + ZERO_C, "P", before_pa, "Air")
    after_k = PropsSI("T", "H", enthalpy, "P", ATMOSPHERE_PA, "Air")
    drop = air.joule_thomson_drop(celsius + ZERO_C, before_pa, ATMOSPHERE_PA)
    assert drop == pytest.approx(celsius + ZERO_C - after_k, abs=within)
