"""Humidity classes of ISO 8573-1, their limits written down from memory."""

from __future__ import annotations

import math

import pytest

from daemon.moisture.purity import class_words, humidity_class

ZERO_C = 273.15


def by_dew_point(celsius: float) -> str | None:
    kelvin = celsius + ZERO_C
    return humidity_class((kelvin, kelvin), (0.0, 0.0))


def by_liquid(grams: float) -> str | None:
    warm = 20.0 + ZERO_C
    return humidity_class((warm, warm), (grams * 1e-3, grams * 1e-3))


# ISO 8573-1, from memory: class, and the pressure dew point at most, degC.
@pytest.mark.parametrize(
    ("name", "at_most_c"), [("1", -70), ("2", -40), ("3", -20), ("4", 3), ("5", 7), ("6", 10)]
)
def test_a_class_reaches_to_its_pressure_dew_point(name: str, at_most_c: float) -> None:
    assert by_dew_point(at_most_c) == name
    drier, wetter = by_dew_point(at_most_c - 0.1), by_dew_point(at_most_c + 0.1)
    assert drier == name  # each is wider than 0.1 K
    assert wetter == str(int(name) + 1)


# ISO 8573-1, from memory: class, and liquid water at most, g/m3.
@pytest.mark.parametrize(
    ("grams", "name"),
    [(0.1, "7"), (0.5, "7"), (0.6, "8"), (5, "8"), (5.1, "9"), (10, "9"), (10.1, "X"), (40, "X")],
)
def test_a_class_of_wet_air_reaches_to_its_liquid(grams: float, name: str) -> None:
    assert by_liquid(grams) == name


def test_air_with_liquid_is_7_or_beyond_however_low_its_dew_point_seems() -> None:
    cold = -80.0 + ZERO_C
    assert humidity_class((cold, cold), (0.0, 1e-4)) == "7"


# A vented cell that reads -20 degC can say no more than "below +1.7 degC" (or -8.9 with a fine
# sensor): class 4 at best, never class 3.
@pytest.mark.parametrize("highest_c", [1.7, -8.9])
def test_a_vented_cell_supports_class_4_and_never_class_3(highest_c: float) -> None:
    interval = (-90.0 + ZERO_C, highest_c + ZERO_C)
    assert humidity_class(interval, (0.0, 0.0)) == "4"


@pytest.mark.parametrize(
    ("dew_point", "liquid"),
    [
        ((math.nan, math.nan), (0.0, 0.0)),
        ((270.0, 272.0), (math.nan, math.nan)),
        ((280.0, 290.0), (0.0, 2e-2)),  # perhaps none, perhaps more than 10 g/m3
    ],
)
def test_what_no_class_holds_cannot_be_told(
    dew_point: tuple[float, float], liquid: tuple[float, float]
) -> None:
    supported = humidity_class(dew_point, liquid)
    assert supported is None
    assert class_words(supported) == "cannot tell"


def test_a_class_is_only_ever_an_estimate() -> None:
    assert class_words("4") == "in the range of class 4 (estimate, humidity only)"
