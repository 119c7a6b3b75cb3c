"""Learning from measured dew points, which speak all the time and always with the same bias.

They enter as hourly means, each with an error of its own that is so wide that a day of them counts
as one good measurement: an hour's model error is much like the next hour's. The persistent bias is
one of the beliefs, so that averaging for a week does not make a biased sensor right.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np

from daemon.moisture import air, line
from daemon.moisture import beliefs as believed
from daemon.moisture.beliefs import Beliefs, bias_of
from daemon.moisture.description import Measured, Source, VentedCell
from daemon.moisture.dew_sensors import (
    DRIEST,
    behind_dryer,
    bias_and_width,
    channels_of,
    contradicts,
    fresh,
    relative_humidity_in_cell,
    stations,
)
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array, standard_normal
from daemon.moisture.learning import (
    GIVEN_BACK,
    LEAST_K_KG,
    LEAST_SD,
    MOST_WIDENED,
    SUSPECT_SIGMAS,
    WIDENED_TO_SIGMAS,
    Update,
    update_contents,
    within_reach,
)
from daemon.moisture.model import Model, State
from daemon.moisture.plan import Plan

# A day's mean is good to 0.3 % of humidity, or 0.3 K of dew point, beside the bias (estimate);
# each of its 24 hours then counts for a twenty-fourth of that.
HOUR_RH_SD, HOUR_DEW_POINT_SD_K = 0.003 * math.sqrt(24.0), 0.3 * math.sqrt(24.0)
LEAST_SECONDS = 900.0  # of an hour that must have been measured


@dataclass(frozen=True, slots=True)
class Gathered:
    """Sums over the hour of what was measured and believed at a station, times seconds."""

    seconds: float
    reading: float  # dew point in K, or relative humidity in the cell
    cell_k: float
    cell_pa: float
    ratio: Array  # (members,): humidity ratio of the air that leaves
    pressure_pa: Array  # (members,)


@dataclass(frozen=True, slots=True)
class Observed:
    """What is carried of one station that has such a sensor."""

    hour: Gathered | None = None
    surprise: int = 0  # the sign of the last hour's, if it was too far off to be learned from


def gather(
    plan: Plan, observed: Mapping[str, Observed], state: State, dt_s: float
) -> Mapping[str, Observed]:
    """Take in one step: what the sensors say now, and what is believed there."""
    which = stations(plan)
    if not which or dt_s <= 0.0:
        return observed
    after = dict(observed)
    for i in which:
        source = plan.stations[i].measured_dew_point
        if source is None or not fresh(plan, state, source) or contradicts(plan, state, i):
            continue
        name = plan.stations[i].id
        before = after.get(name, Observed())
        after[name] = replace(before, hour=_added(before.hour, state, i, source, dt_s))
    return after


def _added(
    hour: Gathered | None, state: State, i: int, source: Measured | VentedCell, dt_s: float
) -> Gathered:
    held = state.held
    if isinstance(source, Measured):
        reading, cell_k, cell_pa = held[source.channel].value, 0.0, 0.0
    else:
        reading = held[source.relative_humidity.channel].value
        cell_k = held[source.temperature.channel].value
        cell_pa = held[source.pressure.channel].value
    ratio = state.water.leaving_ratio[i] * dt_s
    pressure = state.conditions.pressure_pa[i] * dt_s
    if hour is None:
        return Gathered(dt_s, reading * dt_s, cell_k * dt_s, cell_pa * dt_s, ratio, pressure)
    return Gathered(
        hour.seconds + dt_s,
        hour.reading + reading * dt_s,
        hour.cell_k + cell_k * dt_s,
        hour.cell_pa + cell_pa * dt_s,
        hour.ratio + ratio,
        hour.pressure_pa + pressure,
    )


# ---- learning from it ----


@dataclass(frozen=True, slots=True)
class _Hour:
    """An hour's mean beside what each member expected of it."""

    expected: Array  # (members,)
    measured: float
    sd: float
    above_only: bool  # only members that expected more are wrong: the reading says "below"


def learn(
    model: Model, state: State, observed: Mapping[str, Observed]
) -> tuple[State, Mapping[str, Observed]]:
    """At a full hour: learn from the hour's means, and begin the next."""
    after: dict[str, Observed] = {}
    for name, one in observed.items():
        station = model.plan.index[name]
        source = model.plan.stations[station].measured_dew_point
        surprise = one.surprise
        if source is not None and one.hour is not None and one.hour.seconds >= LEAST_SECONDS:
            hour = _mean(state.beliefs, source, one.hour)
            state, surprise = _learn_hour(model, state, station, hour, one.surprise)
        after[name] = Observed(None, surprise)
    return state, after


def _mean(beliefs: Beliefs, source: Measured | VentedCell, hour: Gathered) -> _Hour:
    """What the sensor said on average, and what it would have said of each member's air."""
    reading = hour.reading / hour.seconds
    ratio = np.maximum(hour.ratio / hour.seconds, DRIEST)
    if isinstance(source, Measured):
        dew_point_k = air.dew_point_unchecked(ratio, hour.pressure_pa / hour.seconds)
        expected = dew_point_k + _offset(beliefs, source)
        return _Hour(expected, reading, HOUR_DEW_POINT_SD_K, above_only=False)
    cell_k = hour.cell_k / hour.seconds - _offset(beliefs, source.temperature)
    cell_pa = np.full_like(cell_k, hour.cell_pa / hour.seconds)
    true = relative_humidity_in_cell(ratio, cell_k, cell_pa)
    expected = true + _offset(beliefs, source.relative_humidity)
    _, width = bias_and_width(beliefs, source.relative_humidity)
    return _Hour(expected, reading, HOUR_RH_SD, above_only=reading <= width)


def _offset(beliefs: Beliefs, source: Measured) -> Array:
    """How much too high each member takes a channel to read."""
    return beliefs[bias_of(source.channel)] * (source.give_or_take * HALF_WIDTH_TO_SD)


def _learn_hour(
    model: Model, state: State, station: int, hour: _Hour, surprise: int
) -> tuple[State, int]:
    """The state after one hour's mean; and the sign of a surprise that was not learned from."""
    off = hour.measured - float(hour.expected.mean())
    variance = float(hour.expected.var(ddof=1))
    if hour.above_only and off >= 0.0:
        return state, 0
    factor = 1.0
    if abs(off) > SUSPECT_SIGMAS * math.sqrt(variance + hour.sd**2):
        sign = 1 if off > 0.0 else -1
        # a dryer that does not dry is likelier than all before it being other than believed
        broken = sign > 0 and behind_dryer(model.plan, station)
        if surprise != sign or variance <= 0.0 or broken:
            return state, sign
        needed = (off / WIDENED_TO_SIGMAS) ** 2 - hour.sd**2
        factor = min(max(math.sqrt(max(needed, 0.0) / variance), 1.0), MOST_WIDENED)
    name = f"dew point at {model.plan.stations[station].id}"
    members = hour.expected.size
    noise = standard_normal(model.plan.line.seed, name, members, state.time_us)
    middle = float(hour.expected.mean())
    expected = middle + factor * (hour.expected - middle)
    miss = hour.measured + hour.sd * noise - expected
    if hour.above_only:
        miss = np.minimum(miss, 0.0)
    update = Update(expected, miss, factor * factor * variance + hour.sd**2)
    return take(model, state, local_names(model.plan, station), update, factor), 0


def take(
    model: Model, state: State, names: list[str], update: Update, factor: float = 1.0
) -> State:
    """The state after an update of beliefs and of what every trap holds."""
    beliefs = dict(state.beliefs)
    for name in names:
        beliefs[name] = _updated(beliefs[name], update, factor)
    contents = model.contents(state)
    water, ledger = state.water, state.ledger
    for trap in model.plan.traps:
        most = state.parameters.water.capacity_kg[trap]
        held = update_contents(contents[trap], update, LEAST_K_KG, most)
        water, ledger = line.hold(water, ledger, trap, held)
    state = replace(state, water=water, ledger=ledger, round_start=water.trap.copy())
    return model.believing(state, beliefs)


def _updated(before: Array, update: Update, factor: float) -> Array:
    """A belief after an update, part of its lost spread given back, never below a floor."""
    wide: Array = before.mean() + factor * (before - before.mean())
    moved = wide + update.shift(wide)
    prior_sd, sd = float(wide.std(ddof=1)), float(moved.std(ddof=1))
    if sd <= 0.0:
        return before
    wanted = max(sd + GIVEN_BACK * max(prior_sd - sd, 0.0), LEAST_SD)
    middle = float(moved.mean())
    return within_reach(middle + (moved - middle) * (wanted / sd))


def local_names(plan: Plan, station: int) -> list[str]:
    """The beliefs that a measured dew point at this station can say something about."""
    found: dict[str, None] = {}
    at = station
    while at >= 0:
        one = plan.stations[at]
        own = believed.own_names(one)
        found |= dict.fromkeys(n for n in own if not n.startswith(("round of ", "capacity of ")))
        found |= dict.fromkeys(_biases(one.temperature, one.pressure, one.relative_humidity))
        at = plan.parent[at]
    source = plan.stations[station].measured_dew_point
    if source is not None:
        found |= dict.fromkeys(bias_of(channel) for channel in channels_of(source))
    return [*found, believed.HUMIDITY]


def _biases(*sources: Source | None) -> Iterator[str]:
    for source in sources:
        if isinstance(source, Measured):
            yield bias_of(source.channel)
