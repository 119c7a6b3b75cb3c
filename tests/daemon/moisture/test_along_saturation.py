"""Interpolated saturation against the formulas it stands for, over the whole range."""

from __future__ import annotations

import numpy as np
import pytest

from daemon.moisture import hardy
from daemon.moisture.along_saturation import saturated_mole_fraction
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


@pytest.mark.parametrize("wander_k", [0.0, 1e-3, 0.1, 1.0, 4.0, 20.0])
@pytest.mark.parametrize("middle_k", [204.0, 240.0, 270.0, 273.16, 276.0, 293.0, 330.0, 371.0])
@pytest.mark.parametrize("alike", [False, True])
def test_it_is_the_formula_to_rounding(middle_k: float, wander_k: float, alike: bool) -> None:
    """Also where it passes the triple point, or stands at an end of the range."""
    kelvin, pressure_pa = members(middle_k, wander_k)
    found = saturated_mole_fraction(kelvin, pressure_pa, alike)
    expected = hardy.saturated_mole_fraction(kelvin, pressure_pa)
    assert np.allclose(found, expected, rtol=ROUNDING, atol=0.0)


def test_temperatures_that_do_not_wander_alike_are_worked_out_each() -> None:
    kelvin, pressure_pa = members(293.0, 1.0)
    kelvin[7, 3] += 1e-6
    found = saturated_mole_fraction(kelvin, pressure_pa)
    assert np.array_equal(found, hardy.saturated_mole_fraction(kelvin, pressure_pa))


def test_it_is_cheaper_by_nodes_that_are_few(monkeypatch: pytest.MonkeyPatch) -> None:
    """An ordinary ten minutes takes the vapor pressure at a handful of temperatures."""
    asked: list[int] = []
    pressure = hardy.pressure

    def counted(phase: hardy.Phase, t: Array) -> Array:
        asked.append(len(t))
        return pressure(phase, t)

    monkeypatch.setattr(hardy, "pressure", counted)
    saturated_mole_fraction(*members(293.0, 0.3))
    assert len(asked) == 1
    assert asked[0] <= 8
