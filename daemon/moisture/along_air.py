"""Conditions and dry air at several ticks at once, as `Model.step` makes them one by one.

The same formulas on arrays of (ticks, members) for (members,): what does not hang on the tick
before is worked out for all ticks together; the cumulative sums go in order, so that they are the
same bits. A stretch of ticks is one period apart and within one hour, so that nobody's beliefs
change in it, and every channel is silent all along or not at all.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Any, cast

import numpy as np
import numpy.typing as npt

from daemon.moisture import air, flow, hardy
from daemon.moisture.along_conditions import least_of
from daemon.moisture.along_course import Course
from daemon.moisture.along_fading import Fading
from daemon.moisture.along_saturation import saturated_ratios
from daemon.moisture.conditions import Conditions
from daemon.moisture.ensemble import Array
from daemon.moisture.model import DUTY_LOGIT_SD, DUTY_MEMORY_S, Model, State
from daemon.moisture.plan import Plan


def column(values: npt.NDArray[Any]) -> Array:
    """One value a tick, to be held against members."""
    return values.astype(np.float64)[:, None]


def running_sum(start: Array, steps: Array) -> Array:
    """`start`, start + steps[0], that + steps[1], ... added up in order: (ticks + 1, members)."""
    total = np.empty((len(steps) + 1, steps.shape[1]))
    total[0] = start
    total[1:] = steps
    rows, add = list(total), np.add
    for before, row in pairwise(rows):
        add(before, row, row)
    return total


def running_maximum(start: Array, values: Array) -> Array:
    """`start`, then the greatest so far: (ticks + 1, members)."""
    greatest = np.empty((len(values) + 1, values.shape[1]))
    greatest[0] = start
    greatest[1:] = values
    spare, reach = np.empty_like(greatest), 1
    while reach < len(greatest):  # each row then knows of twice as many rows before it
        spare[:reach] = greatest[:reach]
        np.maximum(greatest[reach:], greatest[:-reach], out=spare[reach:])
        greatest, spare, reach = spare, greatest, 2 * reach
    return greatest


# ---- how long the compressor ran ----


def duties_known(model: Model, known: float, course: Course, dt_s: float) -> list[float]:
    """`State.duty_known` before the first tick and after each."""
    weight = -math.expm1(-dt_s / DUTY_MEMORY_S)
    found = [known]
    ticks = zip(
        course.on_us.tolist(), course.unknown_us.tolist(), course.is_open.tolist(), strict=True
    )
    for on_us, unknown_us, is_open in ticks:
        if unknown_us == 0 and model.may_run(is_open):
            known += (on_us / 1e6 / dt_s - known) * weight
        found.append(known)
    return found


def on_time(model: Model, state: State, course: Course, known: Sequence[float]) -> Array:
    """Seconds that the compressor made air, (ticks, 1) or (ticks, members)."""
    on_s = column(course.on_us) / 1e6
    unknown = course.unknown_us > 0
    if not unknown.any():
        return on_s
    gauge = model.gauge if model.sees_pump_ups else None
    if gauge is not None and not course.silent.get(gauge[0], True):
        return on_s + np.where(unknown, course.booked_us, 0)[:, None] / 1e6
    if model.plan.line.compressor.off_when_closed:
        unknown &= course.is_open
    middle = np.clip(np.array(known[:-1]), 0.02, 0.98)[:, None]
    logit = np.log(middle / (1.0 - middle)) + DUTY_LOGIT_SD * state.parameters.duty
    unwatched = np.where(unknown, course.unknown_us, 0)[:, None] / 1e6
    found: Array = on_s + unwatched / (1.0 + np.exp(-logit))
    return found


def duties(model: Model, state: State, on_s: Array, dt_s: float) -> dict[int, Array]:
    """The filtered duty of the stations that follow it, (ticks, members)."""
    now = np.minimum(on_s / dt_s, 1.0)
    found = {}
    for i, constant_s in model.lagging:
        weight = -math.expm1(-dt_s / constant_s)
        if now.shape[1] == 1:  # every member goes the same way from where it is
            filtered, way = 0.0, np.empty(len(now))
            for n, share in enumerate(now[:, 0].tolist()):
                filtered += (share - filtered) * weight
                way[n] = filtered
            keeps = (1.0 - weight) ** np.arange(1, len(now) + 1)
            found[i] = way[:, None] + keeps[:, None] * state.duty[i]
            continue
        found[i] = Fading(state.duty[i], now, np.full(len(now), weight)).rows()
    return found


# ---- saturation ----


def saturation(now: Conditions) -> tuple[Array, Array]:
    """Every station's humidity ratio at saturation, and that of the air drawn in, at every tick."""
    saturated, fraction = saturated_ratios(now.temperature_k, now.pressure_pa)
    if least_of(now.temperature_k, 0) <= hardy.TRIPLE_POINT_K:
        fraction *= hardy.water_over_ice(now.temperature_k[0])
    fraction *= now.relative_humidity
    return saturated, np.minimum(air.ratio_of_fraction(fraction), saturated[0])


# ---- dry air ----


@dataclass(slots=True)
class AirAlong:
    """Dry air at every tick. Arrays are (ticks, members), with what they are of before."""

    drawn: Array  # cumulative
    used: Array  # cumulative
    used_before: Array  # the same before the first tick, (members,)
    entered: list[Array | None]  # by receiver, cumulative; None: what was drawn
    measured: Array  # (receivers, ...)
    stored: Array  # (receivers, ...), after each tick
    before: Array  # (receivers, ...), before each tick
    moved: flow.AirMoved
    good: int  # so many ticks from the first are as here


def moved_along(plan: Plan, state: flow.AirState, drawn: Array, measured: Array) -> AirAlong:
    """`flow.move` over several ticks, for a line without purging dryers."""
    total = running_sum(state.drawn, drawn)[1:]
    change = measured - state.first[:, None, :]
    cumulative = total - change.sum(axis=0)
    several = len(plan.receivers) > 1
    shares = [outlet.share for outlet in plan.line.outlets] if several else []
    least = flow.least_step(state, total)
    used, used_total = _new_maxima(state.used, cumulative, shares, least)
    entered = np.empty_like(measured)
    entered_total: list[Array | None] = []
    for row, receiver in enumerate(plan.receivers):
        if receiver in plan.trunk:
            entered[row] = drawn
            entered_total.append(None)
            continue
        below = [plan.receivers.index(other) for other in plan.receivers_below[receiver]]
        wanted = plan.share[receiver] * cumulative + change[below].sum(axis=0)
        entered[row], so_far = _new_maxima(state.entered[row], wanted, [1.0], least)
        entered_total.append(so_far)
    moved = _routed(plan, drawn, used, entered)
    stored, before = np.empty_like(measured), np.empty_like(measured)
    good = len(drawn)
    for row, receiver in enumerate(plan.receivers):
        net = moved.into[receiver] - moved.through[receiver]
        after_all = running_sum(state.stored[row], net)
        stored[row], before[row] = after_all[1:], after_all[:-1]
        if several:
            stock = flow.MOST_OF_STOCK * before[row] + moved.into[receiver]
            held_back = (stock < moved.through[receiver]).any(axis=1)
            if held_back.any():
                good = min(good, int(held_back.argmax()))
    return AirAlong(
        total, used_total, state.used, entered_total, measured, stored, before, moved, good
    )


def _routed(plan: Plan, drawn: Array, used: Array, entered: Array) -> flow.AirMoved:
    """`flow.route`, where most stations pass on what another one does: nothing is copied."""
    count = len(plan.stations)
    into: list[Array] = [used] * count
    through: list[Array] = [used] * count
    outlets = [_share(outlet.share, used) for outlet in plan.line.outlets]
    for station in range(count - 1, -1, -1):
        leaves = [
            outlets[f.outlet] if f.outlet >= 0 else into[f.station] for f in plan.outflows[station]
        ]
        if len(leaves) == 1:
            through[station] = leaves[0]
        else:
            through[station] = np.zeros_like(used)
            for part in leaves:
                through[station] += part
        if station in plan.receivers:
            into[station] = entered[plan.receivers.index(station)]
        elif station in plan.trunk and plan.receivers:
            into[station] = through[station] = drawn
        else:
            into[station] = through[station]
    several = cast(Any, (outlets, into, through))  # by outlet or station, one after the other
    return flow.AirMoved(drawn, used, *several)


def _share(share: float, used: Array) -> Array:
    return used if share == 1.0 else share * used


def _new_maxima(
    start: Array, wanted: Array, shares: Sequence[float], least: Array
) -> tuple[Array, Array]:
    """By how much each tick goes beyond all before it, and the running maximum.

    Where the steps are added up, it is as the sum of these shares of them. `least` is what a step
    must be more than, (ticks, members).
    """
    if not shares:
        greatest = running_maximum(start, wanted)
        steps = np.diff(greatest, axis=0)
        if ((steps > 0.0) & (steps <= least)).any():
            greatest[1:] = wanted
            for low, before, total in zip(least, greatest[:-1], greatest[1:], strict=True):
                np.copyto(total, before, where=total - before <= low)
            steps = np.diff(greatest, axis=0)
        return steps, greatest[1:]
    steps, totals = np.empty_like(wanted), np.empty_like(wanted)
    before = start
    for want, low, step, total in zip(wanted, least, steps, totals, strict=True):
        np.subtract(want, before, out=step)
        step[step <= low] = 0.0
        if shares == [1.0]:
            np.add(before, step, out=total)
        else:
            np.add(before, np.array([share * step for share in shares]).sum(axis=0), out=total)
        before = total
    return steps, totals


def measured_along(model: Model, state: State, now: Conditions) -> Array:
    """`Model.measured` at every tick, (receivers, ticks, members)."""
    parameters = replace(state.parameters, volume_m3=state.parameters.volume_m3[:, None, :])
    shape = (len(model.plan.receivers), *now.temperature_k.shape[1:])
    before = replace(
        state.air,
        ratio=state.air.ratio[:, None, :],
        measured=np.broadcast_to(state.air.measured[:, None, :], shape),
    )
    return np.ascontiguousarray(model.measured(before, parameters, now))
