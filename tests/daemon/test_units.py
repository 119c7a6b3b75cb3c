"""Units against NIST SP 811 (2008), appendix B.8 (figures from memory), and round trips."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from daemon import units
from daemon.errors import UnitError
from daemon.unit_tables import UNITS, Kind

# NIST prints seven figures: half a unit in the last is at most 5e-7 of the value.
SP_811 = [
    ("1 bar", "pressure difference", 1.0e5),
    ("1 mbar", "pressure difference", 1.0e2),
    ("1 psi", "pressure difference", 6.894757e3),
    ("1 inHg", "pressure difference", 3.386389e3),
    ("1 mmHg", "pressure difference", 1.333224e2),
    ("1 gal", "volume", 3.785412e-3),
    ("1 oz", "volume", 2.957353e-5),
    ("1 ft3", "volume", 2.831685e-2),
    ("1 L", "volume", 1.0e-3),
    ("1 cfm", "flow", 4.719474e-4),
    ("1 in", "length", 2.54e-2),
    ("1 ft", "length", 3.048e-1),
    ("1 lb", "mass", 4.535924e-1),
    ("1 min", "duration", 6.0e1),
    ("1 h", "duration", 3.6e3),
    ("1 day", "duration", 8.64e4),
    ("1 degF", "temperature difference", 5.555556e-1),
]


@pytest.mark.parametrize(("text", "kind", "si"), SP_811)
def test_factors_are_those_of_nist(text: str, kind: Kind, si: float) -> None:
    assert units.parse(text, kind) == pytest.approx(si, rel=5e-7)


# SP 811, B.8: T/K = t/degC + 273.15 and T/K = (t/degF + 459.67)/1.8; fixed points of water.
@pytest.mark.parametrize(
    ("text", "kelvin"),
    [
        ("0 degC", 273.15),
        ("32 degF", 273.15),
        ("212 degF", 373.15),
        ("100 °C", 373.15),
        ("-40 °F", 233.15),
        ("-40 C", 233.15),
        ("293.15 K", 293.15),
    ],
)
def test_temperatures_have_their_offset(text: str, kelvin: float) -> None:
    assert units.parse(text, "temperature") == pytest.approx(kelvin, abs=1e-10)


def test_a_difference_of_temperatures_has_no_offset() -> None:
    # 5 degF is 2.78 K: ISO 8502-4's 3 K as US practice writes it
    assert units.parse("5 degF", "temperature difference") == pytest.approx(2.78, abs=0.003)
    assert units.parse("3 degC", "temperature difference") == 3.0
    assert units.parse("3 K", "temperature difference") == 3.0


@pytest.mark.parametrize(
    ("text", "pascal", "gauge", "said"),
    [
        ("8 bar", 8e5, True, False),
        ("120 psi", 827_371.0, True, False),
        ("8 bar abs", 8e5, False, True),
        ("8 bara", 8e5, False, True),
        ("8 bar(a)", 8e5, False, True),
        ("8 bar (abs)", 8e5, False, True),
        ("100 psia", 689_476.0, False, True),
        ("100 PSIG", 689_476.0, True, True),
        ("8 barg", 8e5, True, True),
        ("8 bar gauge", 8e5, True, True),
        ("800 kPa absolute", 8e5, False, True),
        ("0.8 MPa", 8e5, True, False),
        ("-0.1 bar", -1e4, True, False),
        ("\u22120.1 bar", -1e4, True, False),
        ("1013.25 hPa abs", 101_325.0, False, True),
    ],
)
def test_a_pressure_is_gauge_unless_it_says_abs(
    text: str, pascal: float, gauge: bool, said: bool
) -> None:
    found = units.parse_pressure(text)
    assert found.value_pa == pytest.approx(pascal, rel=1e-6)
    assert (found.gauge, found.said) == (gauge, said)


@pytest.mark.parametrize(
    ("text", "kind", "same"),
    [
        ("150 l/min", "flow", "150 L/min"),
        ("150 lpm", "flow", "150 L/min"),
        ("150 litres/minute", "flow", "150 L/min"),
        ("5.6 CFM", "flow", "5.6 cfm"),
        ("5.6 ft³/min", "flow", "5.6 cfm"),
        ("9 m³/h", "flow", "9 m3/h"),
        ("60 US gal", "volume", "60 gal"),
        ("12 fl oz", "volume", "12 oz"),
        ("350 ML", "volume", "350 ml"),
        ("2 hrs", "duration", "2 h"),
        ("5 percent", "fraction", "5 %"),
        (".5 L", "volume", "0.5 L"),
        ("1e3 ml", "volume", "1 L"),
        ("  8  L ", "volume", "8 L"),
    ],
)
def test_people_spell_units_in_many_ways(text: str, kind: Kind, same: str) -> None:
    assert units.parse(text, kind) == pytest.approx(units.parse(same, kind), rel=1e-12)


def test_a_bare_number_is_a_fraction_and_nothing_else() -> None:
    assert units.parse(0.3, "fraction") == 0.3
    assert units.parse("0.3", "fraction") == 0.3
    with pytest.raises(UnitError, match=r"8 has no unit; a volume is written in quotes"):
        units.parse(8, "volume")


@pytest.mark.parametrize(
    ("text", "kind", "message"),
    [
        ("8 degC", "volume", '"8 degC" is a temperature, but a volume belongs here'),
        ("8 L", "temperature", '"8 L" is a volume, but a temperature belongs here'),
        ("8 bar abs", "volume", '"8 bar abs" is a pressure, but a volume belongs here'),
        ("0.2 bar abs", "pressure difference", 'has no "abs"; leave that word out'),
        ("8,5 L", "volume", "has a comma in its number"),
        ("8", "volume", '"8" has no unit'),
        ("3 blobs", "volume", '"blobs" is not a unit of volume; known are L, ml, gal'),
        ("5 scfm", "flow", "means different volumes to different makers"),
        ("lots", "volume", "does not begin with a number"),
        ("", "volume", "nothing is written"),
        (True, "volume", "true is not a volume"),
        (["8 L"], "volume", "is not a volume"),
        ("1e999 L", "volume", "is not a finite number"),
        (math.inf, "fraction", "is not a finite number"),
        ("5 L/h", "flow", '"L/h" is not a unit of flow'),
    ],
)
def test_errors_say_what_was_found_and_what_to_write(
    text: object, kind: Kind, message: str
) -> None:
    with pytest.raises(UnitError) as caught:
        units.parse(text, kind)
    assert message in str(caught.value)


def test_millipascals_are_not_guessed_to_be_megapascals() -> None:
    for text in ("0.8 mPa", "0.8 mpa"):
        with pytest.raises(UnitError, match="not a unit of pressure"):
            units.parse_pressure(text)
    assert units.parse_pressure("0.8 MPA").value_pa == 8e5


def test_a_pressure_needs_its_own_reader() -> None:
    with pytest.raises(TypeError, match="parse_pressure"):
        units.parse("8 bar", "pressure")


@pytest.mark.parametrize(
    ("text", "kind", "ends"),
    [
        ("0-12 bar", "pressure difference", (0.0, 12e5)),
        ("0 to 12 bar", "pressure difference", (0.0, 12e5)),
        ("-1..10 bar", "pressure difference", (-1e5, 10e5)),
        ("0.5-4.5 V", "voltage", (0.5, 4.5)),
        ("-60 to 20 degC", "temperature", (213.15, 293.15)),
    ],
)
def test_a_range_has_two_ends(text: str, kind: Kind, ends: tuple[float, float]) -> None:
    assert units.parse_range(text, kind) == pytest.approx(ends)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("12 bar", 'is not a range; write it like "0-'),
        (12, "is not a range"),
        ("12-0 bar", "begins with its lower end"),
        ("0-12 L", "is a volume"),
    ],
)
def test_a_range_that_is_none_is_refused(text: object, message: str) -> None:
    with pytest.raises(UnitError) as caught:
        units.parse_range(text, "pressure difference")
    assert message in str(caught.value)


NUMBERS = st.floats(min_value=-1e9, max_value=1e9, allow_nan=False)
EVERY_UNIT = [(kind, unit) for kind, table in UNITS.items() for unit in table]


@given(NUMBERS, st.sampled_from(EVERY_UNIT))
def test_from_si_undoes_to_si(value: float, place: tuple[Kind, str]) -> None:
    kind, unit = place
    back = units.from_si(units.to_si(value, unit, kind), unit, kind)
    assert back == pytest.approx(value, rel=1e-12, abs=1e-10)


@given(NUMBERS, st.sampled_from([pair for pair in EVERY_UNIT if pair[0] != "pressure"]))
def test_what_is_written_out_is_read_back(value: float, place: tuple[Kind, str]) -> None:
    kind, unit = place
    assert units.parse(f"{value!r} {unit}", kind) == units.to_si(value, unit, kind)


@given(NUMBERS, st.sampled_from([pair for pair in EVERY_UNIT if pair[0] == "pressure"]))
def test_pressures_are_read_back_with_their_reference(
    value: float, place: tuple[Kind, str]
) -> None:
    unit = place[1]
    for word, gauge in (("", True), (" abs", False), (" gauge", True)):
        found = units.parse_pressure(f"{value!r} {unit}{word}")
        assert (found.value_pa, found.gauge) == (units.to_si(value, unit, "pressure"), gauge)


@given(st.floats(min_value=1e-6, max_value=50.0), st.sampled_from(["metric", "us"]))
def test_a_shown_volume_is_read_back_to_three_figures(volume: float, people: units.People) -> None:
    shown = units.show_volume(volume, people)
    assert "e" not in shown
    assert units.parse(shown, "volume") == pytest.approx(volume, rel=5e-3)


@given(st.floats(min_value=200.0, max_value=400.0), st.sampled_from(["metric", "us"]))
def test_a_shown_temperature_is_read_back_to_a_tenth(kelvin: float, people: units.People) -> None:
    shown = units.show_temperature(kelvin, people)
    assert units.parse(shown, "temperature") == pytest.approx(kelvin, abs=0.0501)


@given(st.floats(min_value=-1e5, max_value=2e6), st.sampled_from(["metric", "us"]), st.booleans())
def test_a_shown_pressure_keeps_its_reference(
    pascal: float, people: units.People, gauge: bool
) -> None:
    found = units.parse_pressure(units.show_pressure(pascal, people, gauge=gauge))
    assert found.gauge == gauge
    assert found.value_pa == pytest.approx(pascal, abs=501.0)


@pytest.mark.parametrize(
    ("shown", "expected"),
    [
        (units.show_volume(410e-6, "metric"), "410 ml"),
        (units.show_volume(410e-6, "us"), "13.9 oz"),
        (units.show_volume(0.1, "us"), "26.4 gal"),
        (units.show_volume(0.015, "metric"), "15 L"),
        (units.show_volume(0.0, "metric"), "0 ml"),
        (units.show_difference(3.0, "us"), "5.4 degF"),
        (units.show_difference(3.0, "metric"), "3 K"),
        (units.show_temperature(293.15, "us"), "68 degF"),
        (units.show_temperature(273.1499, "metric"), "0 degC"),
        (units.show_pressure(8e5, "us", gauge=True), "116 psi"),
        (units.show_pressure(901_325.0, "metric", gauge=False), "9.01 bar abs"),
        (units.show_barometer(101_325.0, "metric"), "1013 hPa"),
        (units.show_barometer(101_325.0, "us"), "29.92 inHg"),
        (units.show_pressure_difference(5e3, "metric"), "0.05 bar"),
        (units.show_flow(2.5e-3, "metric"), "150 L/min"),
        (units.show_flow(2.5e-3, "us"), "5.3 cfm"),
        (units.show_duration(1800.0), "30 min"),
        (units.show_duration(86400.0), "1 day"),
        (units.show_duration(259200.0), "3 days"),
        (units.show_duration(0.5), "0.5 s"),
        (units.show_percent(0.05), "5 %"),
    ],
)
def test_values_are_shown_as_gauges_show_them(shown: str, expected: str) -> None:
    assert shown == expected


# --- recorded readings ---


@pytest.mark.parametrize(
    ("value", "unit", "quantity", "gauge", "si"),
    [
        (20.0, "degC", "temperature", False, 293.15),
        (68.0, "degF", "temperature", False, 293.15),
        (293.15, "K", "dew_point", False, 293.15),
        (55.0, "%", "relative_humidity", False, 0.55),
        (8.0, "bar", "pressure", True, 8e5),
        (8.0, "barg", "pressure", True, 8e5),
        (116.03, "psig", "pressure", True, 8.0e5),
        (116.03, "psi", "pressure", True, 8.0e5),
        (1.01325, "bara", "pressure", False, 101_325.0),
        (101.325, "kPa", "pressure", False, 101_325.0),
        (101_325.0, "Pa", "pressure", False, 101_325.0),
        (1.0, "", "contact", False, 1.0),
        (0.0, "", "contact", False, 0.0),
        (150.0, "L/min", "free_air_flow", False, 2.5e-3),
    ],
)
def test_recorded_values_become_si_as_their_channel_is(
    value: float, unit: str, quantity: str, gauge: bool, si: float
) -> None:
    assert units.recorded_to_si(value, unit, quantity, gauge=gauge) == pytest.approx(si, rel=2e-5)


@pytest.mark.parametrize(
    ("value", "unit", "quantity", "gauge", "message"),
    [
        (9.0, "bara", "pressure", True, "9 bara is absolute, but the channel is gauge"),
        (9.0, "psig", "pressure", False, "9 psig is gauge, but the channel is absolute"),
        (9.0, "degC", "pressure", True, 'unit "degC" does not fit a pressure reading'),
        (9.0, "bar", "temperature", False, "expected degC, degF, K"),
        (0.5, "", "contact", False, "0.5 is not a contact's state"),
        (1.0, "%", "contact", False, "expected an empty unit"),
        (1.0, "", "temperature", False, 'unit "" does not fit a temperature reading'),
    ],
)
def test_recorded_values_that_do_not_fit_are_refused(
    value: float, unit: str, quantity: str, gauge: bool, message: str
) -> None:
    with pytest.raises(UnitError) as caught:
        units.recorded_to_si(value, unit, quantity, gauge=gauge)
    assert message in str(caught.value)


@given(
    st.floats(min_value=0.0, max_value=1.5e6),
    st.sampled_from(["temperature", "dew_point", "relative_humidity", "pressure", "free_air_flow"]),
    st.booleans(),
)
def test_recorded_values_are_read_back(value: float, quantity: str, gauge: bool) -> None:
    number, unit = units.recorded_from_si(value, quantity, gauge=gauge)
    back = units.recorded_to_si(number, unit, quantity, gauge=gauge)
    assert back == pytest.approx(value, rel=1e-12, abs=1e-9)


def test_a_recorded_contact_has_no_unit() -> None:
    assert units.recorded_from_si(1.0, "contact", gauge=False) == (1.0, "")
