"""Properties of the water and air balance, on lines and records that hypothesis makes up."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from CoolProp.CoolProp import PropsSI
from hypothesis import given, settings
from hypothesis import strategies as st

from daemon.errors import BalanceError
from daemon.moisture.description import (
    Compressor,
    Fixed,
    Like,
    Line,
    Measured,
    Outlet,
    RiseByDuty,
    Share,
    Station,
    StationKind,
    Trap,
)
from daemon.moisture.model import Heard, Model, State

SECOND_US = 1_000_000
PERIOD_US = 10 * SECOND_US
KINDS: tuple[StationKind, ...] = ("pipe", "separator", "coalescer", "cooler", "regulator")

INTAKE = Station(
    "intake",
    "intake",
    "",
    Measured("air.temperature", 1.0),
    Measured("air.pressure", 100.0),
    Measured("air.relative_humidity", 0.03),
)


def receiver(name: str, after: str, capacity_kg: float = 15.0) -> Station:
    return Station(
        name,
        "receiver",
        after,
        RiseByDuty("intake", 20.0, 1800.0, 8.0),
        Measured(f"{name}.pressure", 18_000.0, gauge=True),
        volume=Fixed(0.1, 0.005),
        trap=Trap("petcock", Fixed(capacity_kg, capacity_kg / 10), 0.6, Share(0.7, 0.25)),
    )


def line(stations: list[Station], outlets: list[Outlet], members: int = 16) -> Line:
    compressor = Compressor(
        Fixed(2.5e-3, 2.5e-4),
        "motor.contact",
        Fixed(6e5, 0.0, gauge=True),
        Fixed(8e5, 0.0, gauge=True),
        off_when_closed=True,
    )
    return Line(tuple(stations), tuple(outlets), compressor, 10.0, members, seed=3)


@st.composite
def lines(draw: st.DrawFn) -> Line:
    """A tree behind one or two receivers, traps small enough to run over."""
    stations = [INTAKE, receiver("tank", "intake", draw(st.sampled_from([0.002, 15.0])))]
    for number in range(draw(st.integers(0, 5))):
        after = draw(st.sampled_from(stations[1:])).id
        kind = draw(st.sampled_from((*KINDS, "receiver")))
        if kind == "receiver":
            stations.append(receiver(f"r{number}", after))
            continue
        trap = None
        if kind != "regulator" and draw(st.booleans()):
            capacity = draw(st.sampled_from([0.0005, 0.1]))
            trap = Trap("petcock", Fixed(capacity, 0.0), capacity / 2, Share(0.6, 0.3))
        cooling = Like(after, draw(st.floats(-12.0, 6.0)), 2.0)
        lower = Fixed(draw(st.floats(1e5, 5e5)), 1e4, gauge=True)
        pressure = lower if kind == "regulator" else Like(after, -5_000.0, 2_000.0)
        stations.append(Station(f"s{number}", kind, after, cooling, pressure, trap=trap))
    ends = draw(st.lists(st.sampled_from(stations[1:]), min_size=1, max_size=3))
    outlets = [Outlet(f"o{n}", each.id, 1.0 / len(ends)) for n, each in enumerate(ends)]
    return line(stations, outlets)


@st.composite
def records(draw: st.DrawFn) -> list[dict[str, float]]:
    """Values by channel, a dict a tick; channels fall silent now and then."""
    generator = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    swing = draw(st.floats(0.0, 2e5))
    found = []
    for _ in range(draw(st.integers(5, 60))):
        values = {
            "air.temperature": 293.15 + generator.normal(0.0, 5.0),
            "air.relative_humidity": float(np.clip(generator.normal(0.6, 0.3), 0.0, 1.0)),
            "air.pressure": 101_325.0 + generator.normal(0.0, 500.0),
            "motor.contact": float(generator.random() < 0.6),
        }
        for name in ("tank", "r0", "r1", "r2", "r3", "r4"):
            values[f"{name}.pressure"] = 7e5 + generator.normal(0.0, 1.0) * swing
        found.append({name: v for name, v in values.items() if generator.random() < 0.9})
    return found


def run(model: Model, record: list[dict[str, float]]) -> State:
    state: State | None = None
    for number, values in enumerate(record):
        now_us = number * PERIOD_US
        heard = Heard({name: [(now_us, value, True)] for name, value in values.items()})
        state = (
            model.initial(now_us, heard) if state is None else model.step(state, now_us, heard)[0]
        )
    assert state is not None
    return state


@settings(max_examples=80, deadline=None)
@given(lines(), records())
def test_no_water_is_made_or_lost(description: Line, record: list[dict[str, float]]) -> None:
    model = Model(description)
    state = run(model, record)
    assert state.ledger.residual(state.water).max() <= 1e-9
    for array in (state.water.trap, state.water.waiting, state.water.spilled, state.water.vapor):
        assert array.min() >= -1e-15


def test_a_leak_in_the_books_is_found() -> None:
    model = Model(line([INTAKE, receiver("tank", "intake")], [Outlet("o", "tank", 1.0)]))
    state = model.initial(0, Heard({}))
    wrong = replace(state.water, vapor=state.water.vapor * 1.001)
    with pytest.raises(BalanceError, match="water balance is off"):
        state.ledger.check(wrong)


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 2**32 - 1), st.sampled_from([50.0, 500.0, 5_000.0, 50_000.0]))
def test_pressure_noise_pumps_no_air(seed: int, noise_pa: float) -> None:
    """However long: what is used stays within 6 standard deviations of the stored mass."""
    description = line([INTAKE, receiver("tank", "intake")], [Outlet("o", "tank", 1.0)])
    model = Model(description)
    generator = np.random.default_rng(seed)
    record = [
        {
            "air.temperature": 293.15,
            "air.relative_humidity": 0.5,
            "air.pressure": 101_325.0,
            "motor.contact": 0.0,
            # the first reading may itself be off by as much as any other
            "tank.pressure": 7e5 + float(np.clip(generator.normal(), -3.0, 3.0)) * noise_pa,
        }
        for _ in range(1500)
    ]
    state = run(model, record)
    # real air (CoolProp) of 277 K, the coldest that a member takes the tank for: 0.7 % above ideal
    low, high = (PropsSI("D", "T", 277.0, "P", pascal, "Air") for pascal in (7.5e5, 8.5e5))
    one_sd = noise_pa * 0.1 * (high - low) / 1e5
    assert state.air.used.max() <= 6.0 * one_sd
    assert state.air.drawn.max() == 0.0


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 2**32 - 1), st.sampled_from([50.0, 2_000.0, 50_000.0]))
def test_pressure_noise_alone_never_looks_like_a_compressor(seed: int, noise_pa: float) -> None:
    description = line([INTAKE, receiver("tank", "intake")], [Outlet("o", "tank", 1.0)])
    compressor = replace(description.compressor, running=None)
    model = Model(replace(description, compressor=compressor))
    generator = np.random.default_rng(seed)
    record = [
        {
            "air.temperature": 293.15,
            "air.relative_humidity": 0.5,
            "air.pressure": 101_325.0,
            "tank.pressure": 7e5 + float(generator.normal()) * noise_pa,
        }
        for _ in range(1500)
    ]
    assert run(model, record).air.drawn.max() == 0.0


@settings(max_examples=40, deadline=None)
@given(lines(), records(), st.floats(0.0, 0.9))
def test_a_drier_intake_never_means_more_condensate(
    description: Line, record: list[dict[str, float]], part: float
) -> None:
    model = Model(description)
    wet = [each for each in record if "air.relative_humidity" in each]
    if not wet or wet[0] is not record[0]:
        record = [{**record[0], "air.relative_humidity": 0.6}, *record[1:]]
    dry = [
        {n: v * part if n == "air.relative_humidity" else v for n, v in each.items()}
        for each in record
    ]

    def condensate(states: State) -> object:
        held = states.water.trap.sum(0) + states.water.waiting.sum(0) + states.water.spilled.sum(0)
        return held + states.ledger.liquid_out + states.ledger.drained

    wetter, drier = run(model, record), run(model, dry)
    assert np.all(condensate(drier) <= condensate(wetter) + 1e-12)  # type: ignore[operator]


def test_a_flooded_trap_is_seen_downstream() -> None:
    """A bowl that is full passes its water on, and the next one catches it."""

    def bowls(capacity_kg: float) -> State:
        first = Station(
            "first",
            "separator",
            "tank",
            Fixed(283.15, 0.0),
            Like("tank", 0.0, 0.0),
            trap=Trap("petcock", Fixed(capacity_kg, 0.0), 0.01, Share(1.0, 0.0)),
        )
        second = Station(
            "second",
            "separator",
            "first",
            Fixed(283.15, 0.0),
            Like("first", 0.0, 0.0),
            trap=Trap("petcock", Fixed(5.0, 0.0), 0.01, Share(1.0, 0.0)),
        )
        stations = [INTAKE, receiver("tank", "intake"), first, second]
        model = Model(line(stations, [Outlet("o", "second", 1.0)]))
        tick = {
            "air.temperature": 303.15,
            "air.relative_humidity": 0.8,
            "air.pressure": 101_325.0,
            "motor.contact": 1.0,
            "tank.pressure": 7e5,
        }
        return run(model, [tick] * 720)

    roomy, full = bowls(5.0), bowls(0.002)
    assert roomy.water.trap[3].max() < 1e-6
    assert np.allclose(full.water.trap[2], 0.002)
    lost = roomy.water.trap[2] - full.water.trap[2]
    assert np.allclose(full.water.trap[3] + full.water.spilled[3], lost, atol=2e-5)


def test_a_tank_that_cools_at_rest_sheds_water() -> None:
    tank = replace(receiver("tank", "intake"), temperature=Measured("tank.temperature", 0.0))
    model = Model(line([INTAKE, tank], [Outlet("o", "tank", 1.0)]))
    warm = {
        "air.temperature": 303.15,
        "air.relative_humidity": 0.8,
        "air.pressure": 101_325.0,
        "motor.contact": 0.0,
        "tank.pressure": 7e5,
        "tank.temperature": 313.15,
    }
    cold = warm | {"tank.temperature": 283.15, "tank.pressure": 6.2e5}
    warm_state = run(model, [warm] * 3)
    cold_state = run(model, [warm] * 3 + [cold] * 3)
    assert warm_state.water.trap.max() == 0.0
    assert (cold_state.water.trap[1] + cold_state.water.waiting[1]).min() > 1e-3
