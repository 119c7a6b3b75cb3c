"""The line margin, the surface margin and carried liquid, as arrays."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from daemon.moisture import air, margin
from daemon.moisture.carried import Carried, carry, nothing_yet
from daemon.moisture.density import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.moisture.description import Desiccant, Fixed, Outlet, Power, Share, Station, Trap
from daemon.moisture.ensemble import Array
from daemon.moisture.plan import Plan, plan_line
from daemon.moisture.purity import humidity_class
from tests.daemon.moisture.test_balance import INTAKE, line, receiver

FIXED_K, FIXED_PA = Fixed(293.15, 0.0), Fixed(8e5, 0.0)
LEG = Trap("petcock", Fixed(0.3, 0.03), 0.15, Share(0.6, 0.3))


def station(name: str, after: str, kind: str = "pipe", trap: Trap | None = None) -> Station:
    return Station(name, kind, after, FIXED_K, FIXED_PA, trap=trap)  # type: ignore[arg-type]  # a kind


def plan(*stations: Station, after: str = "") -> Plan:
    every = [INTAKE, receiver("tank", "intake"), *stations]
    return plan_line(line(every, [Outlet("gun", after or every[-1].id, 1.0)], members=8))


def names(of: Plan, rows: tuple[int, ...]) -> list[str]:
    return [of.stations[row].id for row in rows]


# ---- what the air touches ----


def test_the_air_is_judged_after_the_last_station_that_takes_water_out() -> None:
    found = plan(
        station("riser", "tank", trap=LEG),
        station("bowl", "riser", "coalescer", LEG),
        station("run", "bowl"),
        station("set", "run", "regulator"),
    )
    way = margin.way(found, 0)
    assert names(found, way.path) == ["intake", "tank", "riser", "bowl", "run", "set"]
    assert names(found, way.touched) == ["run", "set"]
    assert way.station == 5
    assert margin.relieved(found, way)


def test_a_line_that_ends_at_a_trap_touches_hose_and_slab_only() -> None:
    found = plan(station("bowl", "tank", "separator", LEG))
    way = margin.way(found, 0)
    assert way.touched == ()
    assert not margin.relieved(found, way)


def test_another_branch_is_not_on_the_way() -> None:
    found = plan(station("left", "tank", trap=LEG), station("right", "tank"), after="right")
    assert names(found, margin.way(found, 0).touched) == ["right"]


@pytest.mark.parametrize(("in_service", "touched"), [(True, ["run"]), (False, ["dryer", "run"])])
def test_a_dryer_takes_water_out_unless_it_is_bypassed(
    in_service: bool, touched: list[str]
) -> None:
    beds = Desiccant(Fixed(233.15, 2.0), power=Power(in_service=in_service))
    dryer = Station("dryer", "desiccant", "tank", FIXED_K, FIXED_PA, dryer=beds)
    found = plan(dryer, station("run", "dryer"))
    way = margin.way(found, 0)
    assert names(found, way.touched) == touched
    assert margin.relieved(found, way) == in_service


# ---- the line margin ----


def places(temperatures_k: list[float], pressures_pa: list[float]) -> margin.Places:
    count = len(temperatures_k)
    return margin.Places(
        tuple(f"p{n}" for n in range(count)),
        np.array(temperatures_k)[:, None],
        np.array(pressures_pa)[:, None],
        tuple(range(count)),
    )


KELVIN = st.floats(270.0, 310.0)
PASCAL = st.floats(1e5, 1.1e6)
RATIO = st.floats(1e-5, 6e-3)


@given(st.lists(st.tuples(KELVIN, PASCAL), min_size=1, max_size=4), RATIO)
def test_the_line_margin_is_the_least_of_all_places(
    spots: list[tuple[float, float]], ratio: float
) -> None:
    temperatures, pressures = [t for t, _ in spots], [p for _, p in spots]
    found = margin.line_margin(np.array([ratio]), places(temperatures, pressures))
    margins = [t - air.dew_point(ratio, p) for t, p in spots]
    assert found.margin_k[0] == pytest.approx(min(margins), abs=1e-6)
    assert found.coldest == f"p{margins.index(min(margins))}"


@given(KELVIN, PASCAL, RATIO, st.floats(1.02, 3.0))
def test_wetter_air_or_more_pressure_never_widen_a_margin(
    kelvin: float, pascal: float, ratio: float, times: float
) -> None:
    def of(at_ratio: float, at_pa: float) -> float:
        return float(
            margin.line_margin(np.array([at_ratio]), places([kelvin], [at_pa])).margin_k[0]
        )

    # the formulas step by 0.03 K where ice begins
    assert of(ratio * times, pascal) <= of(ratio, pascal) + 0.04
    assert of(ratio, min(pascal * times, 1.9e6)) <= of(ratio, pascal) + 0.04


@given(st.lists(st.tuples(KELVIN, RATIO), min_size=4, max_size=12), PASCAL, st.floats(0.5, 8.0))
def test_the_cheap_share_below_a_limit_agrees_with_the_margins(
    members: list[tuple[float, float]], pascal: float, limit_k: float
) -> None:
    kelvin, ratio = np.array([k for k, _ in members]), np.array([r for _, r in members])
    touched = margin.Places(("hose",), kelvin[None], np.full((1, kelvin.size), pascal), (0,))
    margins = margin.line_margin(ratio, touched).margin_k
    share = margin.line_margin_below(ratio, touched, np.array([limit_k - 0.05, limit_k + 0.05]))
    assert share[0] <= np.mean(margins < limit_k) + 1e-12
    assert share[1] >= np.mean(margins < limit_k) - 1e-12


def test_a_temperature_that_is_not_known_gives_no_share() -> None:
    touched = places([np.nan, 293.15], [3e5, 3e5])
    assert np.isnan(margin.line_margin_below(np.array([2e-3]), touched, np.array([3.0]))).all()


# ---- the surface ----


@given(st.floats(250.0, 305.0), st.floats(0.0, 30.0))
def test_the_humidity_at_a_surface_falls_with_its_spread(dew_k: float, spread_k: float) -> None:
    def at(spread: float) -> float:
        dew, surface = np.array([dew_k]), np.array([dew_k + spread])
        return float(margin.humidity_at_surface(dew, surface, np.array([101_325.0]))[0])

    assert at(spread_k + 0.5) < at(spread_k) <= 1.0
    assert at(-2.0) == 1.0


# ---- carried liquid ----

GUN = plan(station("bowl", "tank", "separator", LEG))
FIVE_MINUTES_KG = 2.5e-3 * 300.0 * REFERENCE_DRY_AIR_KG_PER_M3


def after(steps: list[tuple[float, float]]) -> Array:
    """g per reference m3 after steps of (kg of air, kg of liquid)."""
    carried: Carried = nothing_yet(GUN)
    for kg_air, kg_liquid in steps:
        carried = carry(GUN, carried, np.full((1, 8), kg_air), np.full((1, 8), kg_liquid))
    return carried.kg_per_m3 * 1e3


def test_before_any_air_nothing_is_carried() -> None:
    assert (after([]) == 0.0).all()


def test_liquid_is_told_per_reference_cubic_metre_of_dry_air() -> None:
    """A reference m3 (20 degC, 1 bar absolute, dry) is 1.18885 kg of dry air."""
    assert after([(1.18885, 1e-4)] * 3)[0] == pytest.approx(0.1, rel=1e-4)


def test_what_was_carried_is_forgotten_with_the_air_and_not_with_the_hours() -> None:
    burst = [(0.01, 1e-4)]
    rests = burst + [(0.0, 0.0)] * 1000
    assert after(rests)[0] == pytest.approx(after(burst)[0])
    # the first breath after a weekend does not wipe out what Friday carried
    breath = [(0.001, 0.0)]
    assert after(rests + breath)[0] == pytest.approx(after(burst + breath)[0])
    dry = after(burst + [(FIVE_MINUTES_KG / 30, 0.0)] * 30 * 3)
    assert dry[0, 0] < 0.1 * after(burst + [(FIVE_MINUTES_KG / 30, 0.0)] * 10)[0, 0]


# no air at all or some that a meter could tell, and shares likewise
AIR_KG = st.just(0.0) | st.floats(1e-6, 0.1)
SHARE = st.just(0.0) | st.floats(1e-9, 1e-4)


@given(st.lists(st.tuples(AIR_KG, SHARE), min_size=1, max_size=30))
def test_a_mean_of_what_was_carried_stays_between_its_ends(
    steps: list[tuple[float, float]],
) -> None:
    moved = [(kg, kg * share * 1e3) for kg, share in steps]  # a share of the air each time
    ends = [share for kg, share in steps if kg > 0]
    got = after(moved)[0, 0] / 1e3 / REFERENCE_DRY_AIR_KG_PER_M3
    if not ends:
        assert got == 0.0
    else:
        assert min(ends) * 1e3 * (1 - 1e-9) <= got <= max(ends) * 1e3 * (1 + 1e-9)


# ---- purity ----

_ORDER = ("1", "2", "3", "4", "5", "6", "7", "8", "9", "X")


@given(st.floats(180.0, 300.0), st.floats(0.0, 0.02), st.floats(0.0, 20.0), st.floats(0.0, 0.02))
def test_wetter_air_is_never_of_a_better_class(
    kelvin: float, liquid: float, more_k: float, more: float
) -> None:
    first = humidity_class((kelvin, kelvin), (liquid, liquid))
    wetter = humidity_class((kelvin + more_k,) * 2, (liquid + more,) * 2)
    assert first is not None
    assert wetter is not None
    assert _ORDER.index(wetter) >= _ORDER.index(first)


@given(st.floats(150.0, 300.0), st.floats(2e-6, 0.05))
def test_air_with_liquid_is_never_below_7(kelvin: float, liquid: float) -> None:
    assert humidity_class((kelvin, kelvin), (0.0, liquid)) in ("7", "8", "9", None)
    assert humidity_class((kelvin, kelvin), (liquid, liquid)) in ("7", "8", "9", "X")
