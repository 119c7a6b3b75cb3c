"""The spread of the coming days' air, against a year of weather in two places.

Typical years that pvlib carries (TMY3, NSRDB): Sand Point, Alaska, and Greensboro, North Carolina.
Today's air at the same hour is the forecast; how far off that is after some days is what the
forecast's spread must be like. A shop's own air varies less than the weather outside: the spread
must be about that of the calmer place, and no more than that of the rougher one.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from daemon.moisture import air
from daemon.moisture.outlook import (
    DAY_TO_DAY,
    MOISTER_WHEN_WARM,
    RATIO_LOG_SD,
    TEMPERATURE_SD_K,
)
from tests.reference.test_air_weather import ZERO_C, rows_of

PLACES = ("703165TY.csv", "723170TYA.CSV")


def errors(name: str, days: int) -> tuple[np.ndarray, np.ndarray]:
    """How wrong today's air is some days later: K, and on the logarithm of the humidity ratio."""
    celsius, percent, hectopascal, _ = rows_of(name)
    humidity = np.clip(percent / 100.0, 0.05, 1.0)
    ratio = air.humidity_ratio(celsius + ZERO_C, hectopascal * 100.0, humidity)
    later = 24 * days
    return celsius[later:] - celsius[:-later], np.log(ratio[later:] / ratio[:-later])


@pytest.mark.parametrize("days", [1, 2, 3, 5, 8])
def test_the_spread_grows_as_the_weather_s_does(days: int) -> None:
    grown = math.sqrt(1.0 - DAY_TO_DAY ** (2 * days))
    found = [errors(name, days) for name in PLACES]
    warmth = [float(warmer.std()) for warmer, _ in found]
    moisture = [float(moister.std()) for _, moister in found]
    assert 0.8 * min(warmth) < TEMPERATURE_SD_K * grown < max(warmth)
    assert 0.8 * min(moisture) < RATIO_LOG_SD * grown < max(moisture)
    print(f"{days} days: {warmth} K, {moisture}; spread {TEMPERATURE_SD_K * grown:.2f} K")


@pytest.mark.parametrize("name", PLACES)
def test_warmer_days_are_moister_as_in_the_weather(name: str) -> None:
    warmer, moister = errors(name, 1)
    assert np.corrcoef(warmer, moister)[0, 1] == pytest.approx(MOISTER_WHEN_WARM, abs=0.2)
