"""What dryers, baths and drains carry from step to step, and what they look at in one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from daemon.moisture.conditions import Conditions, Held, Offsets
from daemon.moisture.ensemble import Array
from daemon.moisture.fitted import Fitted
from daemon.moisture.flow import AirMoved
from daemon.moisture.power import Powered


@dataclass(frozen=True, slots=True)
class FittingState:
    """What is carried from step to step. Rows are the stations of that kind in the line's order."""

    power: tuple[Powered, ...]  # a dryer each
    overloaded: tuple[float, ...]  # the share of members in which each dryer is overloaded
    load: Array  # (rated, members), kg/s of dry air, smoothed
    charge: Array  # (cartridges, members), kg of water in each
    uptake: Array  # (cartridges, members), kg/s of late
    heat: Array  # (baths, members), J that each has taken in since its ice was new
    melting: Array  # (baths, members), W of late
    begun_us: int  # since when uptake and melting are known
    draining: Array  # (drains, members), 1 while a level drain stands open
    limited: tuple[float, ...]  # per drain, the share of members in which it could not pass all
    cartridges: tuple[str, ...]  # the stations of the rows of charge
    baths: tuple[str, ...]  # ... and of heat
    empty_since_us: tuple[int, ...]  # per receiver with a petcock: without pressure since; -1: no
    low_since_us: tuple[int, ...]  # ... and not known to hold a bar or more since; -1: it does


@dataclass(frozen=True, slots=True)
class Moment:
    """What the fittings look at in one step."""

    now: Conditions
    saturated: Array  # (stations, members), humidity ratio
    moved: AirMoved
    held: Mapping[str, Held]
    offsets: Offsets
    from_us: int
    to_us: int

    @property
    def dt_s(self) -> float:
        return max(self.to_us - self.from_us, 1) / 1e6


@dataclass(slots=True)
class Prepared:
    """One step as the fittings see it, before the water moves."""

    moment: Moment
    fitted: Fitted
    saturated: Array
    separation: Array
    load: Array
    overloaded: tuple[float, ...]
