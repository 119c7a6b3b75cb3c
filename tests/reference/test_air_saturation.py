"""Saturated air against steam tables, against the formulation over ice, and against CoolProp."""

from __future__ import annotations

import itertools

import numpy as np
import psychrolib
import pytest
from CoolProp.CoolProp import HAPropsSI
from iapws import IAPWS95
from iapws._iapws import _Sublimation_Pressure

from daemon.moisture import air

ZERO_C = 273.15
ATMOSPHERE_PA = 101325.0


# Hardy fitted ITS-90 forms to the older formulation of Wexler: 0.01 % is what he states for water,
# and over ice the two drift apart to 0.12 % at -70 degC.
@pytest.mark.parametrize("celsius", [0.02, 3, 10, 20, 35, 50, 75, 100])
def test_vapor_pressure_over_water_follows_iapws_95(celsius: float) -> None:
    expected = IAPWS95(T=celsius + ZERO_C, x=1).P * 1e6
    assert air.saturation_vapor_pressure(celsius + ZERO_C) == pytest.approx(expected, rel=1e-4)


@pytest.mark.parametrize(
    ("celsius", "relative"), [(-70, 1.3e-3), (-55, 8e-4), (-40, 5e-4), (-20, 3e-4), (0, 2e-5)]
)
def test_vapor_pressure_over_ice_follows_iapws_r14_08(celsius: float, relative: float) -> None:
    expected = _Sublimation_Pressure(celsius + ZERO_C) * 1e6
    assert air.saturation_vapor_pressure(celsius + ZERO_C) == pytest.approx(expected, rel=relative)


@pytest.mark.parametrize(
    ("kelvin", "expected_pa", "relative", "source"),
    [
        (230.0, 8.94735, 5e-4, "IAPWS R14-08(2011), check value; Hardy differs by 0.04 %"),
        (293.15, 2339.3, 5e-5, "IAPWS-95 tables, five digits"),
        (273.16, 611.657, 1e-5, "triple point, IAPWS-95, six digits"),
    ],
)
def test_published_saturation_values(
    kelvin: float, expected_pa: float, relative: float, source: str
) -> None:
    assert air.saturation_vapor_pressure(kelvin) == pytest.approx(expected_pa, rel=relative), source


# Both formulas are fitted through the triple point, where ice and liquid have one vapor pressure.
def test_ice_and_water_meet_at_the_triple_point() -> None:
    ice, water = (air.saturation_vapor_pressure(k) for k in (273.16, 273.16 + 1e-9))
    assert ice == pytest.approx(water, rel=1e-6)


# Published vapor contents (pure vapor from IAPWS-95's density; in air by CoolProp 8), g/m3. In air
# the four digits and 0.1 % of the formulation. The pure ones lack the vapor's own Z, 0.15 %.
@pytest.mark.parametrize(
    ("celsius", "pure", "at_one_atmosphere", "at_8_bar_gauge"),
    [(20.0, 17.30, 17.37, 17.84), (35.0, 39.63, 39.78, 40.70)],
)
def test_saturated_air_holds_the_published_grams_in_a_cubic_metre(
    celsius: float, pure: float, at_one_atmosphere: float, at_8_bar_gauge: float
) -> None:
    kelvin = celsius + ZERO_C
    ideal = air.saturation_vapor_pressure(kelvin) * 0.018015268 / (8.314462618 * kelvin)
    assert ideal * 1e3 == pytest.approx(pure, rel=2e-3)
    for pressure_pa, expected in (
        (ATMOSPHERE_PA, at_one_atmosphere),
        (ATMOSPHERE_PA + 8e5, at_8_bar_gauge),
    ):
        held = air.saturated_humidity_ratio(kelvin, pressure_pa)
        grams = air.vapor_concentration(held, kelvin, pressure_pa) * 1e3
        assert grams == pytest.approx(expected, rel=1e-3, abs=0.005)


# Stated for this set of formulas against CoolProp, by temperature band: the worst relative error
# of the saturated humidity ratio up to 8 bar gauge, up to 14 bar gauge.
BANDS = [
    ("above 0 degC", range(2, 61, 2), 0.0010, 0.0018),
    ("-40 to 0 degC", range(-40, 1, 2), 0.0034, 0.0059),
    ("-70 to -40 degC", range(-70, -39, 2), 0.0080, 0.014),
]


@pytest.mark.parametrize(
    ("band", "celsius", "to_8_bar", "to_14_bar"), BANDS, ids=[b[0] for b in BANDS]
)
def test_saturated_humidity_ratio_stays_near_coolprop(
    band: str, celsius: range, to_8_bar: float, to_14_bar: float
) -> None:
    for gauge_bar, limit in [(g, to_8_bar) for g in (-0.2, 0, 1, 2, 4, 7, 8)] + [
        (g, to_14_bar) for g in (10, 12, 14)
    ]:
        pressure_pa = ATMOSPHERE_PA + gauge_bar * 1e5
        for t in celsius:
            expected = HAPropsSI("W", "T", t + ZERO_C, "P", pressure_pa, "R", 1.0)
            got = air.saturated_humidity_ratio(t + ZERO_C, pressure_pa)
            assert got == pytest.approx(expected, rel=limit), f"{band}: {t} degC, {gauge_bar} bar g"


# The corners of the range, where the error is greatest: the docstring's figures.
@pytest.mark.parametrize(
    ("celsius", "bar", "limit"),
    [
        (0.02, 9.5, 1.0e-3),
        (0.02, 16, 1.9e-3),
        (-40, 9.5, 3.6e-3),
        (-40, 16, 6.2e-3),
        (-70, 9.5, 8.4e-3),
        (-70, 16, 1.43e-2),
        (60, 16, 1e-3),
    ],
)
def test_the_stated_accuracy_holds_at_the_corners(celsius: float, bar: float, limit: float) -> None:
    expected = HAPropsSI("W", "T", celsius + ZERO_C, "P", bar * 1e5, "R", 1.0)
    got = air.saturated_humidity_ratio(celsius + ZERO_C, bar * 1e5)
    assert got == pytest.approx(expected, rel=limit)


# Hyland and Wexler's vapor pressure in psychrolib: another fit to the same measurements, 0.14 %.
def test_vapor_pressure_agrees_with_psychrolib() -> None:
    psychrolib.SetUnitSystem(psychrolib.SI)
    for celsius in range(-70, 100, 5):
        expected = psychrolib.GetSatVapPres(celsius)
        got = air.saturation_vapor_pressure(celsius + ZERO_C)
        assert got == pytest.approx(expected, rel=1.5e-3), celsius


# psychrolib has no enhancement factor; taken out of ours, the rest must be the same.
def test_humidity_ratio_agrees_with_psychrolib_but_for_the_enhancement_factor() -> None:
    psychrolib.SetUnitSystem(psychrolib.SI)
    for celsius, rh in itertools.product(range(1, 50, 6), (0.1, 0.5, 0.8, 1.0)):
        kelvin = celsius + ZERO_C
        enhancement = air.enhancement_factor(kelvin, ATMOSPHERE_PA)
        got = air.humidity_ratio(kelvin, ATMOSPHERE_PA, rh) / enhancement
        assert got == pytest.approx(
            psychrolib.GetHumRatioFromRelHum(celsius, rh, ATMOSPHERE_PA), rel=1.5e-3
        )


# Relative humidity is over water above 0 degC in CoolProp too; below it is over ice there.
def test_humidity_ratio_of_damp_air_follows_coolprop_above_freezing() -> None:
    for celsius, rh, bar in itertools.product((2, 20, 35, 50), (0.1, 0.5, 0.8), (0.95, 1.01325)):
        expected = HAPropsSI("W", "T", celsius + ZERO_C, "P", bar * 1e5, "R", rh)
        got = air.humidity_ratio(celsius + ZERO_C, bar * 1e5, rh)
        assert got == pytest.approx(expected, rel=3e-4)


# Supercooled water holds more than ice: 9 % of what it holds at -10 degC (CoolProp's R is over
# ice). Ratio of WMO's Magnus pair, 1.103 at -10 and 1.215 at -20 degC (WMO-No. 8, from memory).
@pytest.mark.parametrize(("celsius", "ratio"), [(-10.0, 1.103), (-20.0, 1.215)])
def test_relative_humidity_is_over_water_below_freezing(celsius: float, ratio: float) -> None:
    kelvin = celsius + ZERO_C
    over_water = air.humidity_ratio(kelvin, ATMOSPHERE_PA, 1.0)
    over_ice = HAPropsSI("W", "T", kelvin, "P", ATMOSPHERE_PA, "R", 1.0)
    assert over_water / over_ice == pytest.approx(ratio, rel=3e-3)


# Compared with CoolProp: without f, a saturated humidity ratio at 8 bar is 2.5 % low at 20 degC and
# 4.3 % low at -40; f steps at 273.16 K by 0.09 % at 8 bar and 0.18 % at 16 bar.
def test_the_enhancement_factor_is_as_large_as_measured() -> None:
    for celsius, low in ((20.0, 0.025), (-40.0, 0.043)):
        factor = air.enhancement_factor(celsius + ZERO_C, 8e5)
        # 0.3 % of W is the formulation's own error in this band.
        assert 1 - 1 / factor == pytest.approx(low, abs=0.003)
    for bar, step in ((8, 0.0009), (16, 0.0018)):
        ice, water = (air.enhancement_factor(k, bar * 1e5) for k in (273.16, 273.1600001))
        assert ice / water - 1 == pytest.approx(step, abs=0.00005)


def test_air_density_follows_coolprop_through_the_range() -> None:
    for celsius, bar, rh in itertools.product((-20, 0, 20, 40, 60), (0.8, 3, 9, 16), (0.0, 0.5, 1)):
        state = ("T", celsius + ZERO_C, "P", bar * 1e5, "R", rh)
        expected = 1 / HAPropsSI("Vda", *state)
        got = air.dry_air_density(celsius + ZERO_C, bar * 1e5, HAPropsSI("W", *state))
        # 0.04 %: CIPM-2007's Z far beyond the range it was fitted on.
        assert got == pytest.approx(expected, rel=4.2e-4), (celsius, bar, rh)


def test_a_reference_cubic_metre_weighs_what_coolprop_says() -> None:
    # ISO 1217 and ISO 8573-1 reference conditions: 20 degC, 1 bar absolute, dry.
    expected = 1 / HAPropsSI("Vda", "T", 293.15, "P", 1e5, "R", 0.0)
    assert pytest.approx(expected, rel=5e-5) == air.REFERENCE_DRY_AIR_KG_PER_M3
    assert pytest.approx(1.18885, rel=5e-5) == air.REFERENCE_DRY_AIR_KG_PER_M3


# "Z = 1 costs 0.5 % at 16 bar" (compared with CoolProp).
def test_real_air_at_16_bar_is_half_a_percent_denser_than_ideal() -> None:
    assert air.compressibility(293.15, 16e5, 0.0) == pytest.approx(0.995, abs=3e-4)


def test_arrays_and_floats_give_the_same_bits() -> None:
    kelvin = np.array([230.0, 273.16, 293.15, 330.0])
    held = air.saturated_humidity_ratio(kelvin, 8e5)
    one_by_one = [air.saturated_humidity_ratio(float(k), 8e5) for k in kelvin]
    assert held.tolist() == one_by_one
