"""The keys of sensor tables: what people write, and what they are told when it is wrong."""

from __future__ import annotations

import math

import pytest

from sensors import keys


@pytest.mark.parametrize(
    ("read", "value", "expected"),
    [
        (keys.whole(0, 3), 3, 3),
        (keys.number(0.05, 1.0), 1, 1.0),
        (keys.address(0x76, 0x77), 0x77, 0x77),
        (keys.choice("up", "down"), "down", "down"),
        (keys.text(r"[a-z]+", "x"), "tank", "tank"),
        (keys.optional(keys.whole(0, 3)), None, None),
        (keys.optional(keys.whole(0, 3)), 2, 2),
        (keys.percent(0.0, 0.2), "1.5 %", 0.015),
        (keys.duration(0.0, 1.0), "20 ms", 0.02),
        (keys.quantity("volume", 0.0, 1.0), "80 ml", 80e-6),
        (keys.yes_or_no, True, True),
    ],
)
def test_what_people_write(read: object, value: object, expected: object) -> None:
    assert callable(read)
    found = read(value)
    if isinstance(expected, float):
        assert math.isclose(found, expected)
        assert isinstance(found, float)
    else:
        assert found == expected
        assert type(found) is type(expected)


@pytest.mark.parametrize(
    ("read", "value", "remedy"),
    [
        (keys.whole(0, 3), 4, "whole number from 0 to 3"),
        (keys.whole(0, 3), True, "whole number"),
        (keys.whole(0, 3), 1.0, "whole number"),
        (keys.number(0.05, 1.0), 2, "number from 0.05 to 1"),
        (keys.number(0.05, 1.0), "0.5", "number from"),
        (keys.number(0.05, 1.0), True, "number from"),
        (keys.address(0x76, 0x77), 76, "0x76 or 0x77, without quotes"),
        (keys.address(0x76, 0x77), "0x76", "without quotes"),
        (keys.choice("up", "down"), "left", 'write "up" or "down"'),
        (keys.text(r"[a-z]+", "write small letters"), "A1", "write small letters"),
        (keys.optional(keys.whole(0, 3)), 9, "whole number"),
        (keys.percent(0.001, 0.2), "40 %", 'from "0.10%" to "20%"'),
        (keys.percent(0.001, 0.2), "1 bar", "fraction"),
        (keys.duration(0.0, 1.0), "20 s", "time of 0 to 1 s"),
        (keys.duration(0.0, 1.0), "20 ml", "duration"),
        (keys.temperature_range, "-200 to 20 degC", "within -123 and 227 degC"),
        (keys.quantity("volume", 0.0, 1.0), "2 m3", "volume from 0 to 1"),
        (keys.yes_or_no, "yes", "true or false"),
    ],
)
def test_what_is_wrong_is_told_with_what_to_write(read: object, value: object, remedy: str) -> None:
    assert callable(read)
    with pytest.raises(ValueError, match=remedy):
        read(value)


def test_a_range_knows_its_span() -> None:
    assert keys.pressure_range("-1 to 9 bar").span_pa == pytest.approx(1e6)
    assert keys.temperature_range("-60 to 20 degC").span_k == pytest.approx(80.0)
