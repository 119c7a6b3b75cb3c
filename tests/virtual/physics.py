"""The physics of many shops at once: none of the model's code but the saturation of moist air.

Air is an ideal gas, the tank is well mixed, and liquid that a place does not keep is carried on by
the air that passes next. Arrays are (shops,); SI throughout.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from daemon.moisture import air
from tests.virtual import week
from tests.virtual.rigs import TRAPS
from tests.virtual.truth import STATIONS, Array, Truth
from tests.virtual.week import Round, Weather

R_DRY, R_VAPOR = 287.05, 461.5  # J/(kg K)

Kind = Literal["plain", "separation", "mixing", "drift", "cup"]
KINDS: tuple[Kind, ...] = ("plain", "separation", "mixing", "drift", "cup")
# How a shop breaks what the model assumes, all invented: at twice the compressor's flow a trap
# keeps but 60 % of what it keeps at rest; 30 % of the inflow leaves the tank at once, still 10 K
# warmer. (A humidity sensor that drifts and a cup that reads low are not physics.)
LOSES_AT_TWICE, SHORT_CUT, SHORT_CUT_K = 0.4, 0.3, 10.0


@dataclass(slots=True)
class _World:
    """All shops' figures as arrays, (shops,), and their state."""

    truths: Sequence[Truth]
    kind: Kind
    vapor: Array
    dry: Array
    trap: dict[str, Array]
    waiting: dict[str, Array]
    spilled: dict[str, Array]
    duty: Array
    on: Array
    came: Array  # all water that came in or was there at first, kg
    gone: Array  # all that left by the hose or a drain
    figures: dict[str, Array] = field(default_factory=dict)

    def of(self, name: str) -> Array:
        """A plain figure of all shops."""
        if name not in self.figures:
            self.figures[name] = np.array([getattr(truth, name) for truth in self.truths])
        return self.figures[name]

    def at(self, name: str, place: str) -> Array:
        """A figure of one place in all shops."""
        key = f"{name} {place}"
        if key not in self.figures:
            self.figures[key] = np.array([getattr(t, name)[place] for t in self.truths])
        return self.figures[key]

    def place(self, name: str, station: str) -> Array:
        """How a place stands to the one before it, in all shops."""
        key = f"place {name} {station}"
        if key not in self.figures:
            values = [getattr(truth.places[station], name) for truth in self.truths]
            self.figures[key] = np.array(values)
        return self.figures[key]


def simulate(
    truths: Sequence[Truth],
    kind: Kind,
    times: Array,
    skies: Sequence[Weather],
    wants: Array,
    plans: Sequence[Sequence[Round]],
) -> dict[str, Array]:
    count, steps = len(truths), times.size
    temperature = np.array([sky.temperature_k for sky in skies])
    barometer = np.array([sky.pressure_pa for sky in skies])
    mean_k = np.array([sky.mean_k for sky in skies])
    ratio = air.humidity_ratio(
        temperature, barometer, np.array([sky.relative_humidity for sky in skies])
    )
    world = _begin(truths, kind, temperature[:, 0], barometer[:, 0])
    opened = _openings(times, plans)
    seen = {
        "tank_k": np.empty((steps, count)),
        "riser_k": np.empty((steps, count)),
        "tank_pa": np.empty((steps, count)),
        "running": np.zeros((steps - 1, count)),
        "contents": np.empty((steps, len(TRAPS), count)),
    }
    for n in range(steps):
        tank_k, riser_k, tank_pa = _now(world, temperature[:, n], mean_k)
        seen["tank_k"][n], seen["riser_k"][n], seen["tank_pa"][n] = tank_k, riser_k, tank_pa
        seen["contents"][n] = [world.trap[name] for name in TRAPS]
        for trap, shop in opened.get(n, ()):
            world.gone[shop] += world.trap[trap][shop]
            world.trap[trap][shop] = 0.0
        if n == steps - 1:
            break
        hour = (times[n] + week.BEGUN_S) % week.DAY_S / 3600.0
        powered = week.SWITCHED_ON[0] <= hour < week.SWITCHED_ON[1]
        _switch(world, tank_pa - barometer[:, n], powered)
        seen["running"][n] = world.on
        dt_s = float(times[n + 1] - times[n])
        _step(world, dt_s, temperature[:, n], mean_k, barometer[:, n], ratio[:, n], wants[:, n])
    held = sum(world.trap[name] for name in TRAPS) + world.vapor
    held = held + sum(world.waiting[name] + world.spilled[name] for name in TRAPS)
    seen["missing"] = (world.came - world.gone - held) / world.came
    return seen


def _openings(times: Array, plans: Sequence[Sequence[Round]]) -> dict[int, list[tuple[str, int]]]:
    found: dict[int, list[tuple[str, int]]] = {}
    for shop, plan in enumerate(plans):
        for each in plan:
            step = int(np.searchsorted(times, each.at_s))
            assert times[step] == each.at_s
            found.setdefault(step, []).append((each.trap, shop))
    return found


def _begin(truths: Sequence[Truth], kind: Kind, temperature: Array, barometer: Array) -> _World:
    count = len(truths)
    zero = np.zeros(count)
    world = _World(
        truths,
        kind,
        zero,
        zero,
        {name: np.zeros(count) for name in TRAPS},
        {name: np.zeros(count) for name in STATIONS},
        {name: np.zeros(count) for name in STATIONS},
        zero.copy(),
        np.zeros(count),
        zero,
        np.zeros(count),
    )
    tank_k = temperature + world.place("plus_k", "tank")
    pressure = barometer + world.of("cut_in_pa")
    saturated = air.saturated_humidity_ratio(tank_k, pressure)
    gas = pressure * world.of("volume_m3") / tank_k
    world.dry = gas / (R_DRY + saturated * R_VAPOR)
    world.vapor = saturated * world.dry
    world.came = world.vapor.copy()
    return world


def _now(world: _World, temperature: Array, mean_k: Array) -> tuple[Array, Array, Array]:
    """The tank's and the riser's temperature, and the tank's absolute pressure."""
    tank_k = temperature + world.place("plus_k", "tank") + world.of("rise_k") * world.duty
    swing = temperature - mean_k
    riser_k = mean_k + world.place("follows", "riser") * swing + world.place("plus_k", "riser")
    gas = world.dry * R_DRY + world.vapor * R_VAPOR
    return tank_k, riser_k, gas * tank_k / world.of("volume_m3")


def _switch(world: _World, gauge_pa: Array, powered: bool) -> None:
    full, low = gauge_pa >= world.of("cut_out_pa"), gauge_pa <= world.of("cut_in_pa")
    world.on = np.where(full, 0.0, np.where(low, 1.0, world.on))
    if not powered:
        world.on = np.zeros_like(world.on)


def _step(
    world: _World,
    dt_s: float,
    temperature: Array,
    mean_k: Array,
    barometer: Array,
    ratio: Array,
    want: Array,
) -> None:
    """One step: air in, air out, and the water with it."""
    tank_k, riser_k, tank_pa = _now(world, temperature, mean_k)
    free_density = barometer / (R_DRY + ratio * R_VAPOR) / temperature  # kg dry air per m3
    drawn = world.of("delivered_m3_per_s") * free_density * dt_s * world.on
    pressed = np.clip((tank_pa - barometer) / world.of("set_pa"), 0.0, 1.0)
    used = np.minimum(want * pressed * dt_s * free_density, 0.5 * world.dry)
    world.duty += (world.on - world.duty) * -np.expm1(-dt_s / world.of("rise_time_s"))
    flow = used / free_density / dt_s / world.of("delivered_m3_per_s")
    leaving = _tank(world, dt_s, drawn, used, flow, ratio, tank_k, tank_pa)
    riser_pa = np.maximum(tank_pa + world.place("plus_pa", "riser"), barometer)
    bowl_pa = np.maximum(riser_pa + world.place("plus_pa", "bowl"), barometer)
    bowl_k = riser_k + world.place("plus_k", "bowl")
    vapor, liquid, spill = leaving, *_carried(world, "tank", used)
    for name, kelvin, pascal in (("riser", riser_k, riser_pa), ("bowl", bowl_k, bowl_pa)):
        room = air.saturated_humidity_ratio(kelvin, pascal) * used - vapor
        taken = np.minimum(world.at("evaporated", name) * liquid, np.maximum(room, 0.0))
        condensed = np.maximum(-room, 0.0)
        vapor = vapor + taken - condensed
        _catch(world, name, liquid - taken + condensed, spill, flow)
        liquid, spill = _carried(world, name, used)
    world.came += drawn * ratio
    world.gone += vapor + liquid + spill


def _tank(
    world: _World,
    dt_s: float,
    drawn: Array,
    used: Array,
    flow: Array,
    ratio: Array,
    tank_k: Array,
    tank_pa: Array,
) -> Array:
    """The receiver's own step; gives the vapor that leaves it, kg."""
    coming = drawn * ratio
    past = np.zeros_like(used)  # air that goes straight through
    vapor_past = np.zeros_like(used)
    if world.kind == "mixing":
        past = np.minimum(SHORT_CUT * drawn, used)
        warm = air.saturated_humidity_ratio(tank_k + SHORT_CUT_K, tank_pa)
        vapor_past = past * np.minimum(ratio, warm)
        coming -= vapor_past
    total = world.dry + drawn - past
    vapor = world.vapor + coming
    room = air.saturated_humidity_ratio(tank_k, tank_pa) * total
    condensed = np.maximum(vapor - room, 0.0)
    vapor = vapor - condensed
    back = world.of("pool_kg_per_s") * dt_s * (1.0 - vapor / room)
    back = np.clip(back, 0.0, np.minimum(world.trap["tank"], room - vapor))
    world.trap["tank"] -= back
    vapor = vapor + back
    _catch(world, "tank", condensed, np.zeros_like(condensed), flow)
    leaving: Array = vapor * ((used - past) / total)
    world.vapor = vapor - leaving
    world.dry = total - (used - past)
    return leaving + vapor_past


def _catch(world: _World, name: str, liquid: Array, spill: Array, flow: Array) -> None:
    """A trap keeps its share; what it does not keep, and what runs over, waits for moving air."""
    kept = world.at("separation", name)
    if world.kind == "separation":
        kept = kept * (1.0 - LOSES_AT_TWICE * np.minimum(flow, 2.0) / 2.0)
    filled = world.trap[name] + kept * (liquid + spill)
    over = np.maximum(filled - world.at("capacity_kg", name), 0.0)
    world.trap[name] = filled - over
    world.waiting[name] += (1.0 - kept) * liquid
    world.spilled[name] += (1.0 - kept) * spill + over


def _carried(world: _World, name: str, used: Array) -> tuple[Array, Array]:
    """Liquid that the air takes along from a place, and what had run over there, kg."""
    moving = used > 0.0
    liquid = np.where(moving, world.waiting[name], 0.0)
    spill = np.where(moving, world.spilled[name], 0.0)
    world.waiting[name] = world.waiting[name] - liquid
    world.spilled[name] = world.spilled[name] - spill
    return liquid, spill
