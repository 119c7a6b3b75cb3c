"""Dew points of a year of weather: the typical years that pvlib carries (TMY3, NSRDB).

Each row has temperature, relative humidity, pressure and a dew point, rounded. Above 0 degC the dew
point that the first three allow, at the ends of their rounding, must hold the row's own. Below,
the files do not share a convention (dew or frost point), so they are only reported.
"""

from __future__ import annotations

import csv
from importlib.util import find_spec
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from daemon.moisture import air

ZERO_C = 273.15
COLUMNS = ("Dry-bulb (C)", "RHum (%)", "Pressure (mbar)", "Dew-point (C)")

Array = NDArray[np.float64]

# Sand Point writes tenths of a degC; Greensboro's tenths are whole degF converted.
TENTH_C = 0.05
WHOLE_F = 0.5 / 1.8


def rows_of(name: str) -> tuple[Array, Array, Array, Array]:
    """Temperature degC, relative humidity %, pressure hPa, dew point degC."""
    package = find_spec("pvlib")
    assert package is not None
    assert package.origin is not None
    with (Path(package.origin).parent / "data" / name).open(newline="") as file:
        next(file)
        rows = [[float(row[column]) for column in COLUMNS] for row in csv.DictReader(file)]
    celsius, percent, hectopascal, dew_c = np.array(rows).T
    assert len(rows) == 8760
    return celsius, percent, hectopascal, dew_c


def dew_point_c(celsius: Array, percent: Array, hectopascal: Array) -> Array:
    rh = np.clip(percent / 100, 0.0, 1.0)
    ratio = air.humidity_ratio(celsius + ZERO_C, hectopascal * 100, rh)
    return air.dew_point_over_water(ratio, hectopascal * 100) - ZERO_C


def agreeing(name: str, half_step_c: float) -> tuple[NDArray[np.bool_], Array]:
    """Which rows hold their dew point within the rounding, and the dew points of the file."""
    celsius, percent, hectopascal, dew_c = rows_of(name)
    # A dew point rises with each of the three.
    low = dew_point_c(celsius - half_step_c, percent - 0.5, hectopascal - 0.5) - half_step_c
    high = dew_point_c(celsius + half_step_c, percent + 0.5, hectopascal + 0.5) + half_step_c
    return (low <= dew_c) & (dew_c <= high), dew_c


@pytest.mark.parametrize(
    ("name", "half_step_c"), [("703165TY.csv", TENTH_C), ("723170TYA.CSV", WHOLE_F)]
)
def test_dew_points_of_a_weather_file_lie_within_its_rounding(
    name: str, half_step_c: float
) -> None:
    inside, dew_c = agreeing(name, half_step_c)
    above = dew_c > 0
    # The few that do not are up to 6 K off in the files themselves.
    assert inside[above].mean() >= 0.985
    print(f"{name}: {inside[above].mean():.2%} above 0 degC, {inside[~above].mean():.2%} below")


def test_both_years_together_lie_within_tenths_of_a_degree() -> None:
    parts = [agreeing(name, TENTH_C) for name in ("703165TY.csv", "723170TYA.CSV")]
    inside = np.concatenate([ok[dew_c > 0] for ok, dew_c in parts])
    assert inside.size > 11_000
    assert inside.mean() >= 0.985


@pytest.mark.parametrize("name", ["703165TY.csv", "723170TYA.CSV"])
def test_half_of_a_weather_files_dew_points_are_met_closely(name: str) -> None:
    celsius, percent, hectopascal, dew_c = rows_of(name)
    above = dew_c > 0
    error = np.abs(dew_point_c(celsius, percent, hectopascal) - dew_c)[above]
    # Half a percent of humidity is 0.08 K of dew point at room conditions, a tenth 0.05 K.
    assert np.median(error) < 0.1


def test_greensboro_was_recorded_in_whole_degrees_fahrenheit() -> None:
    celsius, _, _, dew_c = rows_of("723170TYA.CSV")
    for values in (celsius, dew_c):
        degrees_f = values * 1.8 + 32
        assert (np.abs(degrees_f - np.round(degrees_f)) < 0.091).mean() > 0.99
