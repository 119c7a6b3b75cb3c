"""Dryers and chilled coils against published figures."""

from __future__ import annotations

import numpy as np
import pytest

from daemon.advance import Core
from daemon.moisture import air, dryers
from daemon.moisture.density import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.replay import replay, summarise
from daemon.site.reader import parse_site
from tests.daemon.records import exact_text
from tests.reference.test_condensate_by_replay import running

ZERO_C = 273.15
GALLON_ML = 3785.411784  # the US gallon, by definition
POUND_KG = 0.45359237

# A published table of correction factors for refrigerated dryers, from memory; makers differ by
# 10 %. Rated at 7 bar gauge, 35 degC in, 25 degC around, +3 degC pressure dew point.
PRESSURES = [(4, 0.77), (6, 0.93), (7, 1.0), (8, 1.05), (10, 1.14)]
INLETS = [(25, 1.2), (30, 1.12), (35, 1.0), (40, 0.83), (45, 0.69), (50, 0.59)]
ROOMS = [(25, 1.0), (30, 0.96), (35, 0.90), (40, 0.82), (45, 0.72)]
DEW_POINTS = [(3, 1.0), (5, 1.09), (7, 1.19), (10, 1.37)]


@pytest.mark.parametrize(
    ("at", "expected"),
    [
        *(((bar, 35, 25, 3), factor) for bar, factor in PRESSURES),
        *(((7, inlet, 25, 3), factor) for inlet, factor in INLETS),
        *(((7, 35, room, 3), factor) for room, factor in ROOMS),
        *(((7, 35, 25, point), factor) for point, factor in DEW_POINTS),
        # between two rows, linear: by hand
        ((7, 37.5, 25, 3), 0.915),
        ((5, 35, 25, 3), 0.85),
    ],
)
def test_a_dryer_takes_what_the_table_says(
    at: tuple[float, float, float, float], expected: float
) -> None:
    bar, inlet, room, point = at
    found = dryers.correction(bar * 1e5, ZERO_C + inlet, ZERO_C + room, ZERO_C + point)
    assert found == pytest.approx(expected, rel=1e-9)


def test_a_maker_s_example_of_all_four_factors() -> None:
    """108 m3/h at 8 bar, 45 degC around, 50 degC in, +10 degC: a published example, 66.0 m3/h;
    0.5 % for its rounding."""
    found = 108.0 * dryers.correction(8e5, ZERO_C + 50.0, ZERO_C + 45.0, ZERO_C + 10.0)
    assert found == pytest.approx(66.0, rel=0.005)


def test_what_a_dryer_cannot_take_at_3_degc_it_takes_at_the_class_above() -> None:
    """The same table read the other way round: 1.19 times the flow leaves at +7 degC."""
    load = np.array([0.5, 1.0, *(factor for _, factor in DEW_POINTS[1:])])
    rise = dryers.dew_point_rise(load, ZERO_C + 3.0)
    assert rise == pytest.approx([0.0, 0.0, 2.0, 4.0, 7.0], abs=1e-9)


def test_a_chilled_coil_s_heat_and_water() -> None:
    """150 L/min of free air, saturated at 30 degC, to 3 degC at 8 bar gauge: 101 W, 1.09 kg of ice
    an hour, 26.6 g of water an hour; computed with CoolProp by others. 3 %."""
    pressure = np.array([8e5 + 101_325.0])
    dry_air = np.array([150e-3 / 60.0 * REFERENCE_DRY_AIR_KG_PER_M3])  # kg/s
    warm, cold = np.array([ZERO_C + 30.0]), np.array([ZERO_C + 3.0])
    comes = dry_air * air.saturated_humidity_ratio(warm, pressure)
    leaves = dry_air * air.saturated_humidity_ratio(cold, pressure)
    condensed = comes - leaves
    watt = dryers.coil_heat(dry_air, leaves, condensed, warm, cold, pressure)
    assert float(watt[0]) == pytest.approx(101.0, rel=0.03)
    ice = 5.0 - dryers.ice_left(np.array([5.0]), watt * 3600.0)
    assert float(ice[0]) == pytest.approx(1.09, rel=0.03)
    assert float(condensed[0]) * 3.6e6 == pytest.approx(26.6, rel=0.03)


def test_heat_capacity_and_latent_heat_against_coolprop() -> None:
    """Within the errors that their docstrings state, against CoolProp 8."""
    coolprop = pytest.importorskip("CoolProp.CoolProp")
    for pressure in (1e5, 5e5, 9e5, 16e5):
        for celsius in (0.0, 20.0, 40.0):
            real = coolprop.PropsSI("C", "T", ZERO_C + celsius, "P", pressure, "Air")
            found = float(dryers.air_heat_capacity(np.array([pressure]))[0])
            assert found == pytest.approx(real, rel=0.006)
    for celsius in (1.0, 20.0, 40.0):
        ends = [
            coolprop.PropsSI("H", "T", ZERO_C + celsius, "Q", quality, "Water")
            for quality in (0.0, 1.0)
        ]
        found = float(dryers.latent_heat(np.array([ZERO_C + celsius]))[0])
        assert found == pytest.approx(ends[1] - ends[0], rel=0.001)


DRYER = """
[[station]]
id = "dryer"
kind = "refrigerated"
after = "tank"
rated_flow = { value = "150 m3/min", give_or_take = "0 %" }
dew_point = { value = "38 degF", give_or_take = "0 K" }
temperature = { like = "tank", plus = "0 K", give_or_take = "0 K" }
pressure = { like = "tank", plus = "0 bar", give_or_take = "0 bar" }
trap = { capacity = "500 L", separation = { value = 1.0, give_or_take = 0 } }
"""


def test_a_thousand_scfm_of_summer_air_to_a_refrigerated_dryer() -> None:
    """A published example: 1000 scfm at 85 degF and 70 % to 100 psig and a refrigerated dryer shed
    9.7 gal/h (130 grains a pound drawn in). scfm here is 0.075 lb a cubic foot. 3 %, through a
    whole replay: what the tank does not shed the dryer does."""
    dry_kg_per_s = 1000.0 * 0.075 * POUND_KG / 60.0
    warm_k, ratio = ZERO_C + 29.444, air.humidity_ratio(ZERO_C + 29.444, 101_325.0, 0.70)
    delivery = dry_kg_per_s / air.dry_air_density(warm_k, 101_325.0, ratio)
    text = exact_text(
        sample_every="60 s",
        delivery=f"{delivery} m3/s",
        pressure="100 psi",
        cooled_to="100 degF",
        volume="2000 L",
        capacity="500 L",
        drain_at="400 L",
    )
    text = text.replace("[[outlet]]", DRYER + "[[outlet]]").replace(
        'id = "hose"\nafter = "tank"', 'id = "hose"\nafter = "dryer"'
    )
    shop = parse_site(text, "elm-row.toml")
    core = Core(shop)
    summary = summarise(core, replay(core, list(running(shop, 29.444, 0.70, 3)), []), [])
    grains = ratio * 7000.0
    assert grains == pytest.approx(130.0, rel=0.03)
    shed_ml = sum(summary["shed_ml"][trap]["p50"] for trap in ("tank", "dryer"))
    assert shed_ml / 3.0 / GALLON_ML == pytest.approx(9.7, rel=0.03)
    assert summary["shed_ml"]["dryer"]["p50"] > 0.2 * shed_ml
    assert summary["balance_residual"] < 1e-9
