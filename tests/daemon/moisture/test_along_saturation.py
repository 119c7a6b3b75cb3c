"""Interpolated saturation against the formulas it stands for, over the whole range."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from daemon.moisture import air, hardy
from daemon.moisture.along_saturation import saturated_ratios
from daemon.moisture.conditions import COLDEST_K, HOTTEST_K
from daemon.moisture.ensemble import Array

ROUNDING = 1e-12


def members(middle_k: float, wander_k: float, ticks: int = 90) -> tuple[Array, Array]:
    """Temperatures that wander alike, and pressures that do not."""
    random = np.random.default_rng(round(middle_k * 10.0 + wander_k))
    way = random.uniform(-wander_k, wander_k, ticks)
    kelvin = middle_k + way[:, None] + random.normal(0.0, 0.5, 40)
    kelvin = np.clip(kelvin, COLDEST_K, HOTTEST_K)
    return kelvin, random.uniform(0.9e5, 1.7e6, kelvin.shape)


def stations(*each: tuple[Array, Array]) -> tuple[Array, Array]:
    """One above the other."""
    return np.array([kelvin for kelvin, _ in each]), np.array([pressure for _, pressure in each])


@pytest.mark.parametrize("wander_k", [0.0, 1e-3, 0.03, 0.1, 0.3, 1.0, 4.0, 20.0])
@pytest.mark.parametrize("middle_k", [204.0, 240.0, 270.0, 273.16, 276.0, 293.0, 330.0, 371.0])
def test_it_is_the_formula_to_rounding(middle_k: float, wander_k: float) -> None:
    """Also where it passes the triple point, or stands at an end of the range; beside another
    station at another temperature."""
    kelvin, pressure_pa = stations(members(middle_k, wander_k), members(288.0, 0.2))
    found, fraction = saturated_ratios(kelvin, pressure_pa)
    expected = hardy.saturated_mole_fraction(kelvin, pressure_pa)
    assert np.allclose(fraction, expected[0], rtol=ROUNDING, atol=0.0)
    assert np.allclose(found, air.ratio_of_fraction(expected), rtol=ROUNDING, atol=0.0)


def test_vapor_that_all_but_boils_is_worked_out_exactly() -> None:
    """At 371 K and half a bar e is beyond P: the formula's own limit holds."""
    kelvin, _ = members(371.0, 0.1)
    pressure_pa = np.full(kelvin.shape, 0.5e5)
    fraction = saturated_ratios(*stations((kelvin, pressure_pa)))[1]
    assert np.array_equal(fraction, np.ones(kelvin.shape))


def test_temperatures_that_do_not_wander_alike_are_worked_out_each() -> None:
    kelvin, pressure_pa = members(293.0, 1.0)
    kelvin[7, 3] += 1e-6
    fraction = saturated_ratios(*stations((kelvin, pressure_pa)))[1]
    assert np.array_equal(fraction, hardy.saturated_mole_fraction(kelvin, pressure_pa))


def test_it_is_cheaper_by_nodes_that_are_few(monkeypatch: pytest.MonkeyPatch) -> None:
    """An ordinary twenty minutes takes the vapor pressure at a handful of temperatures."""
    asked: list[int] = []
    logarithm = hardy.WATER.log_pressure

    def counted(t: Array) -> Array:
        asked.append(t.shape[1])
        return logarithm(t)

    monkeypatch.setattr(hardy, "WATER", replace(hardy.WATER, log_pressure=counted))
    saturated_ratios(*stations(members(293.0, 0.3), members(300.0, 0.1)))
    assert len(asked) == 1
    assert asked[0] <= 6
