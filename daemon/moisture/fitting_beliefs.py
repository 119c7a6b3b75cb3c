"""What is not known of dryers, baths and drains: the figures' names, and the figures themselves.

Each is a standard normal a member, as all beliefs are; here they get their units and ranges.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from daemon.moisture import dryers
from daemon.moisture.density import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.moisture.description import Desiccant, Fixed, Refrigerated, Share, Station
from daemon.moisture.drains import MOST_OF_CAPACITY, SELF_EMPTYING, emptying_of
from daemon.moisture.ensemble import Array, normal, positive, share
from daemon.moisture.hardy import LOWEST_K
from daemon.moisture.plan import Plan


@dataclass(frozen=True, slots=True)
class FittingParameters:
    """The figures. Rows are the stations of that kind in the line's order."""

    dew_point_k: Array  # (dryers, members), while not overloaded and charge is left
    overload: Array  # (dryers, members), of the table's rise
    power: Array  # (dryers, members), standard normal: whether one that says nothing runs
    rated_kg_per_s: Array  # (rated, members), of dry air
    falls: Array  # (rated, members), how the separation falls beyond that
    holds_kg: Array  # (cartridges, members)
    purge: Array  # (twin beds, members), of the rated flow
    ice_kg: Array  # (baths, members)
    gain_w: Array  # (baths, members), from the room
    opens_at_kg: Array  # (drains, members)
    passes_kg_per_s: Array  # (drains, members)
    phase: Array  # (drains, members), standard normal
    let_down: Array  # (petcocks at receivers, members), standard normal


def dew_point_of(station: str) -> str:
    """What a dryer dries to."""
    return f"dew point of {station}"


def overload_of(station: str) -> str:
    """How much an overloaded dryer's dew point rises."""
    return f"overload of {station}"


def power_of(station: str) -> str:
    """Whether a dryer runs whose contact says nothing."""
    return f"power of {station}"


def rated_flow_of(station: str) -> str:
    """The flow up to which a dryer or a separator does what it is rated for."""
    return f"rated flow of {station}"


def falls_of(station: str) -> str:
    """How the separation falls beyond the rated flow."""
    return f"falling separation of {station}"


def holds_of(station: str) -> str:
    """What a cartridge takes up."""
    return f"charge of {station}"


def purge_of(station: str) -> str:
    """What twin beds blow off."""
    return f"purge of {station}"


def ice_of(station: str) -> str:
    """How much ice a bath began with."""
    return f"ice of {station}"


def gain_of(station: str) -> str:
    """What a bath takes in from its room."""
    return f"gain of {station}"


def opens_of(station: str) -> str:
    """What a trap holds when its drain opens by itself."""
    return f"opening of {station}"


def passes_of(station: str) -> str:
    """How much water a drain passes."""
    return f"passing of {station}"


def phase_of(station: str) -> str:
    """When a timer's clock began."""
    return f"phase of {station}"


def let_down_of(station: str) -> str:
    """Whether a tank without pressure was let down through its drain."""
    return f"letting down of {station}"


def rated_flow(station: Station) -> Fixed | None:
    """The flow that a station is rated for, m3/s of free air."""
    return station.dryer.rated_flow if station.dryer is not None else station.rated_flow


def drains_itself(station: Station) -> bool:
    """Whether a station's trap has a drain that works without anybody."""
    return station.trap is not None and station.trap.drain in SELF_EMPTYING


def may_be_let_down(station: Station) -> bool:
    """Whether a station's drain may have been left open on purpose."""
    petcock = station.trap is not None and station.trap.drain == "petcock"
    return station.kind == "receiver" and petcock


def own_names(station: Station) -> list[str]:
    """The uncertain figures of one station's fittings."""
    found: list[str] = []
    name = station.id
    if station.dryer is not None:
        found += [dew_point_of(name), overload_of(name), power_of(name)]
        if isinstance(station.dryer, Desiccant):
            found.append(holds_of(name) if station.dryer.holds is not None else purge_of(name))
    if rated_flow(station) is not None:
        found += [rated_flow_of(name), falls_of(name)]
    if station.ice is not None:
        found += [ice_of(name), gain_of(name)]
    if drains_itself(station):
        found += [opens_of(name), passes_of(name), phase_of(name)]
    if may_be_let_down(station):
        found.append(let_down_of(name))
    return found


def fitting_parameters(plan: Plan, beliefs: Mapping[str, Array]) -> FittingParameters:
    """The figures of every member."""
    members = plan.line.members
    stations = plan.stations

    def rows(found: list[Array]) -> Array:
        return np.array(found).reshape(-1, members)

    dried = [(s.id, s.dryer) for s in stations if s.dryer is not None]
    cartridges = [
        (name, dryer.holds)
        for name, dryer in dried
        if isinstance(dryer, Desiccant) and dryer.holds is not None
    ]
    twins = [
        (name, dryer.purge)
        for name, dryer in dried
        if isinstance(dryer, Desiccant) and dryer.holds is None
    ]
    rated = [(s.id, flow) for s in stations if (flow := rated_flow(s)) is not None]
    baths = [(s.id, s.ice) for s in stations if s.ice is not None]
    drained = [
        (s.id, emptying_of(s.trap), s.trap.capacity.value)
        for s in stations
        if s.trap is not None and drains_itself(s)
    ]
    tanks = [s.id for s in stations if may_be_let_down(s)]
    return FittingParameters(
        dew_point_k=rows([_dew_point(beliefs[dew_point_of(n)], dryer) for n, dryer in dried]),
        overload=rows([np.exp(dryers.OVERLOAD_LOG_SD * beliefs[overload_of(n)]) for n, _ in dried]),
        power=rows([beliefs[power_of(n)] for n, _ in dried]),
        rated_kg_per_s=rows([_flow(beliefs[rated_flow_of(n)], flow) for n, flow in rated]),
        falls=rows(
            [dryers.FALLS * np.exp(dryers.FALLS_LOG_SD * beliefs[falls_of(n)]) for n, _ in rated]
        ),
        holds_kg=rows([_positive(beliefs[holds_of(n)], holds) for n, holds in cartridges]),
        purge=rows([_share(beliefs[purge_of(n)], purge) for n, purge in twins]),
        ice_kg=rows([_positive(beliefs[ice_of(n)], ice) for n, ice in baths]),
        gain_w=rows(
            [
                dryers.BATH_GAIN_W * np.exp(dryers.BATH_GAIN_LOG_SD * beliefs[gain_of(n)])
                for n, _ in baths
            ]
        ),
        opens_at_kg=rows(
            [
                np.minimum(_positive(beliefs[opens_of(n)], how.opens_at), MOST_OF_CAPACITY * most)
                for n, how, most in drained
            ]
        ),
        passes_kg_per_s=rows(
            [_positive(beliefs[passes_of(n)], how.passes) for n, how, _ in drained]
        ),
        phase=rows([beliefs[phase_of(n)] for n, _, _ in drained]),
        let_down=rows([beliefs[let_down_of(n)] for n in tanks]),
    )


def _positive(base: Array, fixed: Fixed) -> Array:
    return positive(base, fixed.value, fixed.give_or_take)


def _share(base: Array, described: Share) -> Array:
    return share(base, described.value, described.give_or_take)


def _flow(base: Array, flow: Fixed) -> Array:
    return positive(base, flow.value, flow.give_or_take) * REFERENCE_DRY_AIR_KG_PER_M3


def _dew_point(base: Array, dryer: Refrigerated | Desiccant) -> Array:
    drawn = normal(base, dryer.dew_point.value, dryer.dew_point.give_or_take)
    coldest = dryers.COLDEST_DEW_POINT_K if isinstance(dryer, Refrigerated) else LOWEST_K
    least: Array = np.maximum(drawn, coldest)
    return least
