"""How much water drops out of compressed air: the published and re-computed figures."""

from __future__ import annotations

import itertools

import pytest
from CoolProp.CoolProp import HAPropsSI

from daemon import units
from daemon.moisture import air

ZERO_C = 273.15
ATMOSPHERE_PA = 101325.0
PSI_PA = 6894.757


def fahrenheit(degrees: float) -> float:
    """K."""
    return (degrees - 32) / 1.8 + ZERO_C


def dropped_g_per_reference_m3(
    intake_c: float, rh: float, cooled_to_c: float, gauge_bar: float
) -> float:
    drawn = air.humidity_ratio(intake_c + ZERO_C, ATMOSPHERE_PA, rh)
    held = air.saturated_humidity_ratio(cooled_to_c + ZERO_C, ATMOSPHERE_PA + gauge_bar * 1e5)
    return max(0.0, drawn - held) * air.REFERENCE_DRY_AIR_KG_PER_M3 * 1e3


# CoolProp 8, intake at 1.01325 bar; g per m3 of dry air at 20 degC and 1 bar absolute. Rows: intake
# degC and relative humidity; then three temperatures at 7, 8 and 10 bar gauge.
TABLE = {
    (35, 0.80): [(27.516, 32.333, 33.833), (28.288, 32.574, 33.911), (29.407, 32.925, 34.024)],
    (20, 0.50): [(1.634, 6.451, 7.951), (2.405, 6.692, 8.028), (3.525, 7.043, 8.142)],
    (10, 0.70): [(0.0, 4.133, 5.633), (0.088, 4.375, 5.711), (1.207, 4.725, 5.824)],
}
CELLS = [
    (*intake, cooled_to, bar, expected)
    for intake, columns in TABLE.items()
    for bar, cells in zip((7, 8, 10), columns, strict=True)
    for cooled_to, expected in zip((40, 20, 3), cells, strict=True)
]


# Near the onset a relative error means nothing: 0.0018 g is the formulas' error over 200 cases,
# 0.0005 g the table's rounding; and 3e-5 for a reference m3 of 1.18885 kg there, 1.18882 here.
@pytest.mark.parametrize(("intake_c", "rh", "cooled_to_c", "gauge_bar", "expected_g"), CELLS)
def test_the_condensate_table(
    intake_c: float, rh: float, cooled_to_c: float, gauge_bar: float, expected_g: float
) -> None:
    got = dropped_g_per_reference_m3(intake_c, rh, cooled_to_c, gauge_bar)
    assert got == pytest.approx(expected_g, rel=0, abs=0.0023 + 3e-5 * expected_g)


def test_condensate_follows_coolprop_over_a_grid() -> None:
    reference = 1 / HAPropsSI("Vda", "T", 293.15, "P", 1e5, "R", 0.0)
    grid = itertools.product((5, 15, 25, 35), (0.3, 0.6, 0.9), (3, 20, 40), (4, 7, 8, 10))
    for intake_c, rh, cooled_to_c, gauge_bar in grid:
        drawn = HAPropsSI("W", "T", intake_c + ZERO_C, "P", ATMOSPHERE_PA, "R", rh)
        line_pa = ATMOSPHERE_PA + gauge_bar * 1e5
        held = HAPropsSI("W", "T", cooled_to_c + ZERO_C, "P", line_pa, "R", 1.0)
        expected = max(0.0, drawn - held) * reference * 1e3
        got = dropped_g_per_reference_m3(intake_c, rh, cooled_to_c, gauge_bar)
        assert got == pytest.approx(expected, rel=0, abs=0.0025)


# The receiver's temperature decides (CoolProp, one decimal): intake 20 degC 50 %, 8 bar gauge.
@pytest.mark.parametrize(
    ("tank_c", "expected_g"), [(20, 6.7), (28, 5.5), (35, 3.9), (40, 2.4), (45, 0.5), (50, 0.0)]
)
def test_a_warm_tank_sheds_little(tank_c: float, expected_g: float) -> None:
    got = dropped_g_per_reference_m3(20, 0.5, tank_c, 8)
    assert got == pytest.approx(expected_g, abs=0.052)


# At 8 bar gauge and 20 degC summer air (35 degC 80 %) sheds 4.9 times what spring air does (20 degC
# 50 %) and 7.4 times winter's (10 degC 70 %): CoolProp, two digits.
def test_summer_air_sheds_several_times_as_much() -> None:
    summer, spring, winter = (
        dropped_g_per_reference_m3(t, rh, 20, 8) for t, rh in ((35, 0.8), (20, 0.5), (10, 0.7))
    )
    assert summer / spring == pytest.approx(4.9, abs=0.05)
    assert summer / winter == pytest.approx(7.4, abs=0.05)


# A handbook: 200 L/s of air at 20 degC 80 % draws in "80 litres" of water in 8 hours; by CoolProp
# 80.0 kg, of which 67.3 drop out at 20 degC and 75.9 at 3 degC, 7 bar gauge. 1 %.
def test_the_water_drawn_in_in_a_day() -> None:
    drawn = air.humidity_ratio(293.15, ATMOSPHERE_PA, 0.8)
    air_kg = 0.2 * 8 * 3600 * air.dry_air_density(293.15, ATMOSPHERE_PA, drawn)
    assert air_kg * drawn == pytest.approx(80.0, rel=0.01)
    for celsius, expected_kg in ((20, 67.3), (3, 75.9)):
        held = air.saturated_humidity_ratio(celsius + ZERO_C, ATMOSPHERE_PA + 7e5)
        assert air_kg * (drawn - held) == pytest.approx(expected_kg, rel=0.01)


# A dryer maker's example: air of 85 degF 70 % holds 130 grains per pound, and 1000 scfm of it at
# 100 psig leave 9.7 US gallons an hour in a refrigerated dryer (127.9 and 9.52 by CoolProp; 3 %,
# for a chart's reading). A standard cubic foot is 0.075 lb of dry air; leaving at 38 degF is ours.
def test_a_refrigerated_dryers_hourly_gallons() -> None:
    drawn = air.humidity_ratio(fahrenheit(85), ATMOSPHERE_PA, 0.7)
    assert drawn * 7000 == pytest.approx(130, rel=0.03)
    assert drawn * 7000 == pytest.approx(127.9, rel=1e-3)
    held = air.saturated_humidity_ratio(fahrenheit(38), ATMOSPHERE_PA + 100 * PSI_PA)
    gallons = 1000 * 60 * 0.075 * (drawn - held) / 8.345
    assert gallons == pytest.approx(9.7, rel=0.03)
    assert gallons == pytest.approx(9.52, rel=0.005)


# Saturated at 30 degC and 8 bar gauge, 150 reference litres a minute chilled to 3 degC leave 26.6 g
# an hour (CoolProp; 3 % for which litres were meant).
def test_a_chilled_coil_takes_out_the_published_grams() -> None:
    line_pa = ATMOSPHERE_PA + 8e5
    shed = air.saturated_humidity_ratio(303.15, line_pa) - air.saturated_humidity_ratio(
        276.15, line_pa
    )
    grams = shed * 0.150 * 60 * air.REFERENCE_DRY_AIR_KG_PER_M3 * 1e3
    assert grams == pytest.approx(26.6, rel=0.03)


# Common practice, no source: what air holds when saturated, g/m3. Whole grams, so 5 %.
@pytest.mark.parametrize(("fahrenheit_air", "grams"), [(68, 17), (105, 51)])
def test_what_air_holds_by_the_rule_of_thumb(fahrenheit_air: float, grams: float) -> None:
    kelvin = fahrenheit(fahrenheit_air)
    held = air.saturated_humidity_ratio(kelvin, ATMOSPHERE_PA)
    concentration = air.vapor_concentration(held, kelvin, ATMOSPHERE_PA) * 1e3
    assert concentration == pytest.approx(grams, rel=0.05, abs=0.5)


# Common practice, no source: a fall of 11 K (20 degF) about halves what air can hold. "About" is
# 0.45 to 0.57 between 5 and 40 degC.
@pytest.mark.parametrize("celsius", [10, 20, 30, 40])
def test_eleven_kelvin_halve_what_air_can_hold(celsius: float) -> None:
    warm, cold = (
        air.vapor_concentration(air.saturated_humidity_ratio(k, ATMOSPHERE_PA), k, ATMOSPHERE_PA)
        for k in (celsius + ZERO_C, celsius + ZERO_C - 11)
    )
    assert cold / warm == pytest.approx(0.5, abs=0.07)


# Common practice, no source: at 120 psi gauge the ratio of compression at sea level is 9.2, not
# 8.2, for a gauge reads from the atmosphere (9.16 by arithmetic). What air can hold falls by that
# ratio; the enhancement factor and the vapor's own share move it by 3 % and 2 %.
def test_gauges_read_from_the_atmosphere() -> None:
    kelvin = fahrenheit(68)
    written = units.parse_pressure("120 psi")
    assert written.gauge
    line_pa = ATMOSPHERE_PA + written.value_pa
    assert line_pa / ATMOSPHERE_PA == pytest.approx(9.16, abs=0.01)
    ratio = air.saturated_humidity_ratio(kelvin, ATMOSPHERE_PA) / air.saturated_humidity_ratio(
        kelvin, line_pa
    )
    assert ratio == pytest.approx(9.2, rel=0.04)


# Computed with CoolProp: saturation at 7 bar gauge holds 12 % more than at 8; it moves 6 % per K
# and 1.1 % per 0.1 bar at a shop's 20 degC and 8 bar gauge.
def test_how_saturation_moves_with_temperature_and_pressure() -> None:
    at_8 = air.saturated_humidity_ratio(293.15, ATMOSPHERE_PA + 8e5)
    assert air.saturated_humidity_ratio(293.15, ATMOSPHERE_PA + 7e5) / at_8 == pytest.approx(
        1.12, abs=0.005
    )
    assert air.saturated_humidity_ratio(294.15, ATMOSPHERE_PA + 8e5) / at_8 == pytest.approx(
        1.06, abs=0.005
    )
    assert at_8 / air.saturated_humidity_ratio(293.15, ATMOSPHERE_PA + 8.1e5) == pytest.approx(
        1.011, abs=0.0005
    )
