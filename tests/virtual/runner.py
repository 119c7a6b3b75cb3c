"""Runs virtual shops through the daemon's core, and keeps what it said beside what was so."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from daemon.advance import Core
from daemon.journal import Drain, Entry
from daemon.moisture.ensemble import percentiles
from daemon.moisture.learning import local_names
from daemon.state import CoreState, Inputs
from daemon.ticks import ticks
from sensors.reading import Reading, reading
from tests.virtual import week
from tests.virtual.physics import Kind
from tests.virtual.rigs import TRAPS
from tests.virtual.shops import Shop, Trial, build

NOISE = {"temperature": 0.05, "relative_humidity": 0.003, "pressure": 10.0}  # SI, invented
GAUGE_NOISE_PA = 500.0
CUP_STEP_KG = 0.001


@dataclass(frozen=True, slots=True)
class Said:
    """5, 50 and 95 % of a trap, and the share of members below what was so."""

    low: float
    middle: float
    high: float
    below: float

    def holds(self, true_kg: float) -> bool:
        """Whether the interval holds the truth, to a tenth of a millilitre."""
        return self.low - 1e-4 <= true_kg <= self.high + 1e-4


@dataclass(frozen=True, slots=True)
class Seen:
    """One trap at the opening of a drain: what was said just before, and what was so, kg."""

    shop: int
    rig: str
    trap: str
    day: int
    round: int  # measured drains of this trap before; -1: nothing was measured in the shop yet
    true_kg: float
    said: Said
    measured_kg: float | None = None
    sigmas: float | None = None
    flagged: bool = False


@dataclass(frozen=True, slots=True)
class Run:
    """What one shop's week gave."""

    kind: Kind
    untaught: tuple[Seen, ...]  # every trap, whenever a drain was opened before any learning
    drains: tuple[Seen, ...]  # the opened trap, at every drain
    least_spread: float  # of any belief that drains can teach, at the end


def record(shop: Shop) -> list[Reading]:
    """What the shop's sensors say, biased, noisy and in steps."""
    at_s = np.arange(0.0, shop.times_s[-1] + 1.0, shop.trial.every_s)
    rows = np.searchsorted(shop.times_s, at_s)
    sky = shop.weather
    series = {
        "intake-air.temperature": sky.temperature_k,
        "intake-air.relative_humidity": sky.relative_humidity,
        "intake-air.pressure": sky.pressure_pa,
        "tank-gauge.pressure": shop.tank_pa - sky.pressure_pa,
        "tank-end.temperature": shop.tank_k,
        "pipe-end.temperature": shop.riser_k,
    }
    found = []
    for name, channel in shop.site.channels.items():
        if channel.quantity == "contact":
            found += _contact(shop, rows)
            continue
        noise = GAUGE_NOISE_PA if channel.gauge else NOISE[channel.quantity]
        values = series[name][rows] + shop.truth.bias[name] + _drift(shop, name, at_s)
        values += noise * shop.random.normal(size=values.size)
        if channel.quantity == "relative_humidity":
            values = np.clip(values, 0.0, 1.0)
        found += [
            reading(channel, float(value), _us(at)) for at, value in zip(at_s, values, strict=True)
        ]
    return sorted(found, key=lambda each: each.time_us)


def _us(at_s: float) -> int:
    return week.BEGUN_US + round(at_s * 1e6)


def _drift(shop: Shop, name: str, at_s: np.ndarray) -> np.ndarray:
    """The walk of a humidity sensor that drifts: all of its give_or_take in a week."""
    channel = shop.site.channels[name]
    if shop.trial.kind != "drift" or channel.quantity != "relative_humidity":
        return np.zeros_like(at_s)
    way = 1.0 if shop.number % 2 else -1.0
    return way * channel.give_or_take * at_s / (7 * week.DAY_S)


def _contact(shop: Shop, rows: np.ndarray) -> list[Reading]:
    """The motor's contact: its edges at their own times, its level at every sample."""
    channel = shop.site.channels["motor.contact"]
    level = np.concatenate([shop.running, shop.running[-1:]])
    edges = np.flatnonzero(np.diff(level)) + 1
    told = np.unique(np.concatenate([rows, edges]))
    return [reading(channel, float(level[n]), _us(float(shop.times_s[n]))) for n in told]


def journal(shop: Shop) -> list[Entry]:
    """What whoever opens the drains says of it."""
    cup = shop.site.cup
    found = []
    for number, (each, held) in enumerate(zip(shop.rounds, shop.held_kg, strict=True), 1):
        sd = (cup.each_time * held + cup.each_time_kg) / 2.0
        shown = held * (1.0 - shop.truth.cup_low) + sd * shop.random.normal()
        volume = max(round(shown / CUP_STEP_KG) * CUP_STEP_KG, 0.0)
        drain = Drain(each.trap)
        if each.measured:
            drain = Drain(each.trap, "emptied" if volume > 0.0 else "empty", volume)
        at_us = _us(each.at_s)
        found.append(Entry(number, at_us, at_us, drain))
    return found


def run(shop: Shop) -> Run:
    """One shop's week through the core."""
    core = Core(shop.site)
    readings, entries = record(shop), journal(shop)
    begun_us = week.BEGUN_US
    first = [each for each in readings if each.time_us == begun_us]
    state, _, _ = core.initial(begun_us, Inputs(first))
    untaught: list[Seen] = []
    drains: list[Seen] = []
    taught = dict.fromkeys(shop.site.traps, 0)
    rest = readings[len(first) :]
    period_us = core.model.period_us
    for tick in ticks(begun_us, period_us, begun_us, begun_us, rest, entries, rest[-1].time_us):
        now_us, inputs = tick.now_us, tick.inputs
        if inputs.entries:
            before, _, _ = core.advance(state, now_us, Inputs(inputs.readings))
            if not any(taught.values()) and not _same_day(untaught, now_us):
                untaught += [_seen(shop, core, before, trap, -1) for trap in shop.site.traps]
        state, estimate, _ = core.advance(state, now_us, inputs)
        for entry in inputs.entries:
            assert isinstance(entry.body, Drain)
            trap = entry.body.trap
            seen = _seen(shop, core, before, trap, taught[trap])
            for learned in estimate.learned:
                seen = replace(
                    seen,
                    measured_kg=learned.measured_kg,
                    sigmas=learned.sigmas,
                    flagged=learned.flagged,
                )
                taught[trap] += 1
            drains.append(seen)
    return Run(shop.trial.kind, tuple(untaught), tuple(drains), _least_spread(core, state))


def _same_day(seen: Sequence[Seen], now_us: int) -> bool:
    return bool(seen) and seen[-1].day == _day(now_us)


def _day(now_us: int) -> int:
    return int(((now_us - week.BEGUN_US) / 1e6 + week.BEGUN_S) // week.DAY_S)


def _seen(shop: Shop, core: Core, state: CoreState, trap: str, taught: int) -> Seen:
    model = core.model
    contents = model.contents(state.model)[model.plan.index[trap]]
    at_s = (state.time_us - week.BEGUN_US) / 1e6
    step = int(np.searchsorted(shop.times_s, at_s))
    true_kg = float(shop.contents_kg[step, TRAPS.index(trap)])
    low, middle, high = (float(value) for value in percentiles(contents))
    below = float(np.mean(contents < true_kg) + 0.5 * np.mean(contents == true_kg))
    said = Said(low, middle, high, below)
    return Seen(shop.number, shop.rig, trap, _day(state.time_us), taught, true_kg, said)


def _least_spread(core: Core, state: CoreState) -> float:
    """The narrowest belief that a drain can teach, as a share of its prior's spread."""
    plan = core.model.plan
    names = {name for row in plan.traps for name in local_names(plan, row)}
    return min(float(state.model.beliefs[name].std(ddof=1)) for name in names)


def run_all(numbers: Sequence[int], trial: Trial) -> list[Run]:
    """Simulate these shops, then run each."""
    return [run(shop) for shop in build(numbers, trial)]
