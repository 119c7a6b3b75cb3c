"""Lines with dryers, baths and self-emptying drains that hypothesis makes up; figures invented."""

from __future__ import annotations

from dataclasses import replace

from hypothesis import strategies as st

from daemon.moisture.description import (
    Desiccant,
    DrainKind,
    Emptying,
    Fixed,
    Like,
    Line,
    Measured,
    Outlet,
    Power,
    Refrigerated,
    Share,
    Station,
    Trap,
)
from tests.daemon.moisture.test_balance import INTAKE, line, receiver

DRAINS: tuple[DrainKind, ...] = ("petcock", "float", "timer", "level", "pressure-off", "none")
SMALL_FLOW = Fixed(1e-3, 1e-4)  # m3/s: half of what the compressor gives


@st.composite
def traps(draw: st.DrawFn) -> Trap:
    capacity = draw(st.sampled_from([0.0005, 0.1]))
    drain = draw(st.sampled_from(DRAINS))
    emptying = None
    if draw(st.booleans()):
        passes = draw(st.sampled_from([1e-7, 1e-2]))
        emptying = Emptying(
            Fixed(0.3 * capacity, 0.1 * capacity),
            0.1 * capacity,
            Fixed(passes, passes / 2),
            draw(st.sampled_from([7.0, 35.0, 400.0])),
            3.0,
        )
    return Trap(drain, Fixed(capacity, 0.0), capacity / 2, Share(0.6, 0.3), 1e-5, emptying=emptying)


@st.composite
def powers(draw: st.DrawFn) -> Power:
    return Power(
        contact=draw(st.sampled_from([None, "p.contact"])),
        off_when_closed=draw(st.booleans()),
        in_service=draw(st.sampled_from([True, True, False])),
    )


@st.composite
def fitted(draw: st.DrawFn, name: str, after: str, ice: bool = True) -> Station:
    """One station of any fitted kind."""
    station = Station(
        name,
        "pipe",
        after,
        Like(after, draw(st.floats(-12.0, 6.0)), 2.0),
        Like(after, -5_000.0, 2_000.0),
        trap=draw(traps()) if draw(st.booleans()) else None,
    )
    kinds = ["refrigerated", "twin", "cartridge", "separator", "pipe"]
    match draw(st.sampled_from([*kinds, "bath"] if ice else kinds)):
        case "refrigerated":
            dryer = Refrigerated(SMALL_FLOW, Fixed(276.15, 2.0), draw(powers()))
            around = draw(st.sampled_from([None, Fixed(313.15, 1.0), Measured("room.t", 1.0)]))
            station = replace(station, kind="refrigerated", dryer=dryer, around=around)
        case "twin":
            twin = Desiccant(
                Fixed(233.15, 10.0),
                rated_flow=SMALL_FLOW,
                purge=Share(0.175, 0.05),
                power=draw(powers()),
            )
            station = replace(station, kind="desiccant", dryer=twin, trap=None)
        case "cartridge":
            holds = draw(st.sampled_from([1e-5, 1e-3, 0.1]))
            cartridge = Desiccant(Fixed(243.15, 10.0), Fixed(holds, holds / 2.4), holds / 4)
            station = replace(station, kind="desiccant", dryer=cartridge, trap=None)
        case "bath":
            ice_kg = draw(st.sampled_from([1e-4, 1.0]))
            station = replace(
                station,
                kind="cooler",
                temperature=Fixed(276.15, 2.0),
                ice=Fixed(ice_kg, ice_kg / 10),
            )
        case "separator":
            station = replace(station, kind="separator", rated_flow=SMALL_FLOW)
    return station


@st.composite
def fitted_lines(draw: st.DrawFn, ice: bool = True) -> Line:
    """A tree behind one or two receivers, with fittings anywhere, also before the first tank."""
    stations = [INTAKE]
    if draw(st.booleans()):
        stations.append(draw(fitted("before", "intake", ice)))
    stations.append(receiver("tank", stations[-1].id, draw(st.sampled_from([0.002, 15.0]))))
    if draw(st.booleans()):
        stations[-1] = replace(stations[-1], trap=draw(traps()))
    first = len(stations) - 1
    for number in range(draw(st.integers(1, 5))):
        after = draw(st.sampled_from(stations[first:])).id
        if draw(st.integers(0, 4)) == 0:
            stations.append(receiver(f"r{number}", after))
        else:
            stations.append(draw(fitted(f"s{number}", after, ice)))
    ends = draw(st.lists(st.sampled_from(stations[first:]), min_size=1, max_size=3))
    outlets = [Outlet(f"o{n}", each.id, 1.0 / len(ends)) for n, each in enumerate(ends)]
    return line(stations, outlets)
