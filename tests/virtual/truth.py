"""What is so in each virtual shop: drawn from the very widths that its site file states.

Written apart from the model's own draws: a give_or_take is twice a normal's standard deviation, of
the value for temperatures and pressures, of the logarithm for what cannot be negative, of the
logit for shares (there at most 1.2). Arrays are (shops,).
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from daemon.moisture.description import Fixed, Like, Measured, RiseByDuty, Share, Source
from daemon.site.types import Site
from tests.virtual.rigs import TRAPS

Array = npt.NDArray[np.float64]
STATIONS = ("tank", "riser", "bowl", "booth-regulator")


@dataclass(frozen=True, slots=True)
class Place:
    """A station's temperature (so much of its base's swing, plus) and pressure difference."""

    plus_k: float
    follows: float
    plus_pa: float


@dataclass(frozen=True, slots=True)
class Truth:
    """One shop's true figures."""

    delivered_m3_per_s: float
    volume_m3: float
    cut_in_pa: float
    cut_out_pa: float
    rise_k: float
    rise_time_s: float
    places: Mapping[str, Place]
    separation: Mapping[str, float]
    evaporated: Mapping[str, float]
    capacity_kg: Mapping[str, float]
    pool_kg_per_s: float
    set_pa: float
    bias: Mapping[str, float] = field(default_factory=dict)  # of each channel, SI
    cup_low: float = 0.05


def positive(random: np.random.Generator, fixed: Fixed) -> float:
    """Lognormal about a value."""
    return fixed.value * math.exp(random.normal() * fixed.give_or_take / 2.0 / fixed.value)


def share(random: np.random.Generator, described: Share) -> float:
    """Normal on the logit scale about a share."""
    value = described.value
    sd = min(described.give_or_take / 2.0 / (value * (1.0 - value)), 1.2)
    logit = math.log(value / (1.0 - value)) + sd * random.normal()
    return 1.0 / (1.0 + math.exp(-logit))


def draw_truth(site: Site, random: np.random.Generator) -> Truth:
    """One shop's figures, from its site file's widths."""
    stations = {station.id: station for station in site.line.stations}
    tank, regulator = stations["tank"], stations["booth-regulator"]
    compressor = site.line.compressor
    assert tank.volume is not None
    assert isinstance(regulator.pressure, Fixed)
    rise = tank.temperature
    traps = {name: stations[name].trap for name in TRAPS}
    return Truth(
        delivered_m3_per_s=positive(random, compressor.delivered),
        volume_m3=positive(random, tank.volume),
        cut_in_pa=_normal(random, compressor.cut_in),
        cut_out_pa=_normal(random, compressor.cut_out),
        rise_k=rise.rise if isinstance(rise, RiseByDuty) else 20.0,
        rise_time_s=rise.time_constant_s if isinstance(rise, RiseByDuty) else 1800.0,
        places={name: _place(random, site, name) for name in STATIONS},
        separation={n: share(random, trap.separation) for n, trap in traps.items() if trap},
        evaporated={name: share(random, stations[name].evaporated) for name in STATIONS},
        capacity_kg={n: positive(random, trap.capacity) for n, trap in traps.items() if trap},
        # 0.6-3 g/h at a 30 % deficit, as the trade has it: 2-10 g/h into dry air, 95 %
        pool_kg_per_s=4.5e-3 / 3600.0 * math.exp(0.4 * random.normal()),
        set_pa=_normal(random, regulator.pressure),
        bias=_biases(random, site),
        cup_low=site.cup.reads_low_by + random.normal() * site.cup.give_or_take / 2.0,
    )


def _normal(random: np.random.Generator, fixed: Fixed) -> float:
    return fixed.value + random.normal() * fixed.give_or_take / 2.0


def _place(random: np.random.Generator, site: Site, name: str) -> Place:
    station = next(each for each in site.line.stations if each.id == name)
    pressure = station.pressure
    plus_pa = 0.0
    if isinstance(pressure, Like):
        plus_pa = pressure.plus + random.normal() * pressure.give_or_take / 2.0
    plus_k, follows = _warmer(random, name, station.temperature)
    return Place(plus_k, follows, plus_pa)


def _warmer(random: np.random.Generator, name: str, source: Source) -> tuple[float, float]:
    """How much warmer than its base; where a sensor measures it, it may be anything likely."""
    match source:
        case Like(plus=plus, give_or_take=width):
            return plus + random.normal() * width / 2.0, 1.0
        case RiseByDuty(give_or_take=width):
            return random.normal() * width / 2.0, 1.0
        case Measured() if name == "tank":  # it was never said: as if by the default rule
            return random.normal() * 4.0, 1.0
        case _:
            return random.normal() * 3.0, 0.5


def _biases(random: np.random.Generator, site: Site) -> dict[str, float]:
    found: dict[str, float] = {}
    for station in site.line.stations:
        for source in (station.temperature, station.pressure, station.relative_humidity):
            if isinstance(source, Measured) and source.channel not in found:
                found[source.channel] = random.normal() * source.give_or_take / 2.0
    return found
