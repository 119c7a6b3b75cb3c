"""What each member believes of its shop: standing in every uncertain figure, as a standard normal.

All that is not known is one number a member and figure, normal with mean 0 and variance 1 before
anything was learned; `offsets` and `parameters` turn it into figures in their own units and keep
them in range. Learning works on the normal numbers only.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np

from daemon.moisture.conditions import Offsets
from daemon.moisture.description import Fixed, Share, Station
from daemon.moisture.ensemble import Array, positive, share, standard_normal
from daemon.moisture.fitting_beliefs import FittingParameters, fitting_parameters
from daemon.moisture.fitting_beliefs import own_names as fitting_names
from daemon.moisture.line import WaterParameters
from daemon.moisture.plan import Plan

Beliefs = Mapping[str, Array]  # (members,) by name

# A receiver's pool gives back 0.6-3 g/h at a 30 % deficit: 2-10 g/h into dry air, lognormal about
# the geometric middle. Common practice, no source.
POOL_KG_PER_S, POOL_LOG_SD = 4.5e-3 / 3600.0, 0.4
# What one round between two drains catches is off by this, besides all that is drawn for good: the
# model's own error. Chosen with virtual shops whose physics differ from the model's.
ROUND_LOG_SD = 0.03

DELIVERED, POOL, DUTY, CUP = "delivered air", "pool", "duty", "cup"
HUMIDITY = "relative humidity of the intake"


@dataclass(frozen=True, slots=True)
class Parameters:
    """Figures of each member's shop, besides the conditions'."""

    water: WaterParameters
    delivered_m3_per_s: Array  # (members,)
    volume_m3: Array  # (receivers, members)
    duty: Array  # (members,), standard normal: of a compressor that nothing watches
    round_factor: Array  # (stations, members): what a trap caught this round, to what is reckoned
    fittings: FittingParameters


def bias_of(channel: str) -> str:
    """A sensor channel's persistent error."""
    return f"bias of {channel}"


def temperature_of(station: str) -> str:
    """How far a station's temperature is from its literal or rule."""
    return f"temperature of {station}"


def pressure_of(station: str) -> str:
    """How far a station's pressure is from its literal or rule."""
    return f"pressure of {station}"


def separation_of(station: str) -> str:
    """The share of liquid that a trap keeps."""
    return f"separation of {station}"


def evaporated_at(station: str) -> str:
    """The share of arriving liquid that may evaporate."""
    return f"evaporated at {station}"


def capacity_of(station: str) -> str:
    """What a trap can hold."""
    return f"capacity of {station}"


def volume_of(station: str) -> str:
    """A receiver's volume."""
    return f"volume of {station}"


def round_of(station: str) -> str:
    """What this round between two drains of a trap has of its own: the model's own error."""
    return f"round of {station}"


def slab_of(outlet: str) -> str:
    """How cold the coldest thing is that the hose lies on, where no sensor says so."""
    return f"slab of {outlet}"


def room_of(outlet: str) -> str:
    """How far the air around an outlet is from its station, where no sensor says so."""
    return f"room of {outlet}"


def names(plan: Plan) -> list[str]:
    """Every figure that is uncertain, in a standing order."""
    found = [bias_of(channel) for channel in plan.channels]
    for station in plan.stations:
        found += own_names(station)
    for outlet in plan.line.outlets:
        found += [slab_of(outlet.id), room_of(outlet.id)]
    return [*found, HUMIDITY, DELIVERED, POOL, DUTY, CUP]


def own_names(station: Station) -> list[str]:
    """The figures that belong to one station."""
    found = [temperature_of(station.id), pressure_of(station.id), evaporated_at(station.id)]
    if station.trap is not None:
        found += [separation_of(station.id), capacity_of(station.id), round_of(station.id)]
    if station.volume is not None:
        found.append(volume_of(station.id))
    return found + fitting_names(station)


def draw(plan: Plan, which: Iterable[str], when: int = 0) -> dict[str, Array]:
    """Draws of these figures from the line's seed; `when` tells one draw of a name from another."""
    line = plan.line
    return {name: standard_normal(line.seed, name, line.members, when) for name in which}


def offsets(plan: Plan, beliefs: Beliefs) -> Offsets:
    """The part of the beliefs that conditions are made of."""
    return Offsets(
        channels={name: beliefs[bias_of(name)] for name in plan.channels},
        temperature=np.array([beliefs[temperature_of(s.id)] for s in plan.stations]),
        pressure=np.array([beliefs[pressure_of(s.id)] for s in plan.stations]),
        relative_humidity=beliefs[HUMIDITY],
    )


def parameters(plan: Plan, beliefs: Beliefs) -> Parameters:
    """The figures, in their own units and ranges."""
    shape = (len(plan.stations), plan.line.members)
    separation, evaporated, capacity = np.zeros(shape), np.zeros(shape), np.zeros(shape)
    rounds = np.ones(shape)
    for i, station in enumerate(plan.stations):
        evaporated[i] = share(beliefs[evaporated_at(station.id)], *_pair(station.evaporated))
        if station.trap is not None:
            kept = station.trap.separation
            separation[i] = share(beliefs[separation_of(station.id)], *_pair(kept))
            holds = station.trap.capacity
            capacity[i] = positive(beliefs[capacity_of(station.id)], *_pair(holds))
            rounds[i] = np.exp(ROUND_LOG_SD * beliefs[round_of(station.id)])
    volumes = [
        positive(beliefs[volume_of(s.id)], *_pair(s.volume))
        for s in (plan.stations[r] for r in plan.receivers)
        if s.volume is not None
    ]
    pool = POOL_KG_PER_S * np.exp(POOL_LOG_SD * beliefs[POOL])
    return Parameters(
        water=WaterParameters(separation, evaporated, capacity, pool),
        delivered_m3_per_s=positive(beliefs[DELIVERED], *_pair(plan.line.compressor.delivered)),
        volume_m3=np.array(volumes).reshape(-1, plan.line.members),
        duty=beliefs[DUTY],
        round_factor=rounds,
        fittings=fitting_parameters(plan, beliefs),
    )


def _pair(described: Share | Fixed) -> tuple[float, float]:
    return described.value, described.give_or_take
