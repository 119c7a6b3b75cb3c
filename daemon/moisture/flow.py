"""Dry air through the line: drawn in, stored in the receivers, used.

Stored air is m = P V / (Z R T) less the vapor's share, from gauge readings made absolute with the
measured barometer. Use is what was drawn in less the change of what is stored. Its *cumulative*
value telescopes (the noise of each reading cancels with the next), and air moves with the running
maximum of the cumulative use: clipped increments would rectify the pressure sensor's noise into
air, and so into water, that never was.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from daemon.moisture.description import Line, Measured
from daemon.moisture.ensemble import Array
from daemon.moisture.leaks import REFERENCE_PA
from daemon.moisture.plan import Plan

# The least rise or fall of receiver pressure that is taken for a pump-up or let-down, as a share of
# the pressure switch's span, and as a multiple of the readings' own noise. White noise spans less
# than ten of its standard deviations in a million readings.
SWING_OF_SPAN = 0.05
SWING_OF_NOISE = 12.0
# What goes beyond all before it by no more than this, of all air drawn in and stored, is rounding:
# readings that are the same again would else move air in some members, and none in others.
ROUNDING = 2.0**-46
MOST_OF_STOCK = 0.5  # of what a receiver holds, what may leave it in one step
NOISE_READINGS = 30  # that the noise is averaged over; nothing is taken for a swing before
# No compressor takes longer over the pressure switch's whole span: what rises more slowly is a
# tank that warms, 0.2 bar on a morning after a cold night. An estimate.
LONGEST_PUMP_UP_US = 2 * 3_600_000_000


# A `PumpWatch`'s fields
Watched = tuple[bool, float, int, tuple[float, float], float, int, float, int]


def shortest_pump_up_s(line: Line) -> float:
    """How long the compressor takes over its pressure switch's span while nobody uses air."""
    compressor = line.compressor
    volumes = [station.volume for station in line.stations if station.kind == "receiver"]
    volume_m3 = sum(each.value for each in volumes if each is not None)
    swing_pa = compressor.cut_out.value - compressor.cut_in.value
    return volume_m3 * swing_pa / (REFERENCE_PA * compressor.delivered.value)


def is_gauged(line: Line) -> bool:
    """Whether anybody measures the pressure of a tank."""
    return any(
        station.kind == "receiver" and isinstance(station.pressure, Measured)
        for station in line.stations
    )


def shows_pump_ups(line: Line) -> bool:
    """Whether readings come often enough to tell by the pressure how long the compressor ran."""
    return shortest_pump_up_s(line) >= line.period_s


@dataclass(frozen=True, slots=True)
class PumpWatch:
    """Tells from a receiver's pressure when the compressor ran, for a line without a contact.

    A pump-up is booked from its lowest reading to its highest; both are only known afterwards.
    """

    pumping: bool = False
    extreme_pa: float = math.nan  # lowest since a let-down began, or highest since a pump-up did
    extreme_us: int = -1
    before_pa: tuple[float, float] = (math.nan, math.nan)  # the two readings before
    noise_pa2: float = 0.0  # variance of one reading, from second differences
    readings: int = 0
    anchor_pa: float = math.nan  # while pumping: from where on the rise is judged
    anchor_us: int = -1

    def told(self, pressure_pa: float, time_us: int, span_pa: float) -> tuple[PumpWatch, int, int]:
        """After a reading: the watch, and the span (from_us, to_us] in which it now knows that
        the compressor ran; empty when both are equal."""
        (after,), (from_us,) = told_all(self, [pressure_pa], [time_us], span_pa)
        return PumpWatch(*after), from_us, time_us


def told_all(
    watch: PumpWatch, pressures_pa: Sequence[float], times_us: Sequence[int], span_pa: float
) -> tuple[list[Watched], list[int]]:
    """After each of several readings: the watch's fields, and since when it then knows that the
    compressor ran; the reading's own time where it does not."""
    pumping, extreme_pa, extreme_us = watch.pumping, watch.extreme_pa, watch.extreme_us
    (older_pa, last_pa), noise_pa2, readings = watch.before_pa, watch.noise_pa2, watch.readings
    anchor_pa, anchor_us = watch.anchor_pa, watch.anchor_us
    slowest = span_pa / LONGEST_PUMP_UP_US  # Pa per microsecond
    found: list[Watched] = []
    since_us: list[int] = []
    for now_pa, now_us in zip(pressures_pa, times_us, strict=True):
        bend = now_pa - 2.0 * last_pa + older_pa
        older_pa, last_pa = last_pa, now_pa
        if math.isfinite(bend):
            readings += 1
            noise_pa2 += 1.0 / min(readings, NOISE_READINGS) * (bend * bend / 6.0 - noise_pa2)
        swing_pa = math.inf
        if readings >= NOISE_READINGS:
            swing_pa = max(SWING_OF_SPAN * span_pa, SWING_OF_NOISE * math.sqrt(noise_pa2))
        runs_since_us = now_us
        if extreme_us < 0:
            extreme_pa, extreme_us = now_pa, now_us
        elif pumping:
            if now_pa > extreme_pa:
                rise_pa = now_pa - anchor_pa
                # else it stopped long ago, and its tank warms
                pumping = not rise_pa + swing_pa < slowest * (now_us - anchor_us)
                pumping &= now_us - extreme_us <= LONGEST_PUMP_UP_US
                runs_since_us = extreme_us if pumping else now_us
                if rise_pa > swing_pa:
                    anchor_pa, anchor_us = now_pa, now_us
                extreme_pa, extreme_us = now_pa, now_us
            elif now_pa < extreme_pa - swing_pa:
                pumping, extreme_pa, extreme_us = False, now_pa, now_us
        elif now_pa <= extreme_pa:
            extreme_pa, extreme_us = now_pa, now_us
        elif now_pa > extreme_pa + swing_pa:
            pumping = now_pa - extreme_pa >= slowest * (now_us - extreme_us)
            runs_since_us = extreme_us if pumping else now_us
            anchor_pa, anchor_us = extreme_pa, extreme_us
            extreme_pa, extreme_us = now_pa, now_us
        before_pa = (older_pa, last_pa)
        judged = anchor_pa, anchor_us
        found.append((pumping, extreme_pa, extreme_us, before_pa, noise_pa2, readings, *judged))
        since_us.append(runs_since_us)
    return found, since_us


@dataclass(frozen=True, slots=True)
class AirState:
    """Dry air, kg, per member. Rows are the plan's receivers in their order."""

    measured: Array  # (receivers, members): as last measured
    first: Array  # (receivers, members): as first measured
    stored: Array  # (receivers, members): as the water balance carries it
    drawn: Array  # (members,): cumulative
    used: Array  # (members,): cumulative, its running maximum
    entered: Array  # (receivers, members): cumulative into each, its running maximum
    seen: tuple[bool, ...]  # receivers whose pressure has been measured
    purged: Array  # (purging, members): cumulative, what dryers blew off
    # (receivers, members): humidity ratio that the gauges' stock is reckoned with, over an hour:
    # 1 g/kg more or less is 0.16 % of the stock, and is no hurry
    ratio: Array


@dataclass(frozen=True, slots=True)
class AirMoved:
    """What moved in one step, kg of dry air, all >= 0."""

    drawn: Array  # (members,)
    used: Array  # (members,), by all outlets
    outlets: Array  # (outlets, members), by each
    into: Array  # (stations, members)
    through: Array  # (stations, members): what leaves each, to the next ones and to outlets
    purge: Array | None = None  # (purging, members), what dryers blew off; None: there are none


def start(plan: Plan, stored: Array, ratio: Array) -> AirState:
    """Before anything has moved, with this much dry air stored, and its humidity ratio: both
    (receivers, members)."""
    members = plan.line.members
    return AirState(
        measured=stored.copy(),
        first=stored.copy(),
        stored=stored.copy(),
        drawn=np.zeros(members),
        used=np.zeros(members),
        entered=np.zeros_like(stored),
        seen=tuple(False for _ in plan.receivers),
        purged=np.zeros((len(plan.purging), members)),
        ratio=ratio,
    )


def first_sight(state: AirState, row: int, measured: Array) -> tuple[AirState, Array]:
    """A receiver's pressure is measured for the first time: what it holds is corrected at once.

    Gives the ratio of dry air after to before, (members,), for the vapor that goes with it.
    """
    shift = measured - state.measured[row]
    ratio = (state.stored[row] + shift) / state.stored[row]
    updated = {}
    for name in ("measured", "first", "stored"):
        array = getattr(state, name).copy()
        array[row] += shift
        updated[name] = array
    seen = tuple(done or number == row for number, done in enumerate(state.seen))
    return replace(state, seen=seen, **updated), ratio


def bias_changed(state: AirState, shift: Array) -> AirState:
    """The gauges' errors are believed to be others now: what that changes, (receivers, members),
    is not air that moved."""
    return replace(state, first=state.first + shift, measured=state.measured + shift)


def move(
    plan: Plan, state: AirState, drawn: Array, measured: Array, purging: Array | None = None
) -> tuple[AirState, AirMoved]:
    """Advance by one step: `drawn` kg came in (members,), receivers now hold `measured`.

    `purging` is what purging dryers blow off of the air that comes to them, (purging, members).
    """
    total_drawn = state.drawn + drawn
    change = measured - state.first
    cumulative_use = total_drawn - change.sum(axis=0)
    least = least_step(state, total_drawn)
    used_by_now = np.where(cumulative_use - state.used > least, cumulative_use, state.used)
    used = used_by_now - state.used
    entered = np.empty_like(state.entered)
    for row, receiver in enumerate(plan.receivers):
        if receiver in plan.trunk:
            entered[row] = drawn
            continue
        below = [plan.receivers.index(other) for other in plan.receivers_below[receiver]]
        wanted = plan.share[receiver] * cumulative_use + change[below].sum(axis=0)
        for number in plan.purged_above[receiver]:
            part = plan.share[receiver] / max(plan.share[plan.purging[number]], 1e-300)
            wanted = wanted - part * state.purged[number]
        step = wanted - state.entered[row]
        entered[row] = np.where(step > least, step, 0.0)
    moved = route(plan, drawn, used, entered, purging)
    if len(plan.receivers) > 1:
        moved = _within_stock(plan, state, moved)
        used_by_now = state.used + moved.used
    rows = list(plan.receivers)
    after = replace(
        state,
        measured=measured,
        stored=state.stored + (moved.into[rows] - moved.through[rows]),
        drawn=total_drawn,
        used=used_by_now,
        entered=state.entered + moved.into[rows],
        purged=state.purged if moved.purge is None else state.purged + moved.purge,
    )
    return after, moved


def least_step(state: AirState, total_drawn: Array) -> Array:
    """What is not more than rounding of the air drawn in and stored, kg."""
    least: Array = ROUNDING * (total_drawn + state.first.sum(axis=0))
    return least


def _purge(plan: Plan, used: Array, outlets: Array, purging: Array) -> tuple[Array, Array]:
    """What dryers blow off, kg (purging, members), and what outlets are left with."""
    purge, outlets = np.zeros_like(purging), outlets.copy()
    kept = 1.0 - purging

    def left(station: int) -> Array:
        above: Array = np.ones(used.size)
        for number in plan.purged_above[station]:
            above = above * kept[number]
        return above

    for number, station in enumerate(plan.purging):
        purge[number] = purging[number] * plan.share[station] * used * left(station)
    for number, outlet in enumerate(plan.line.outlets):
        station = plan.index[outlet.after]
        outlets[number] *= left(station)
        if station in plan.purging:
            outlets[number] *= kept[plan.purging.index(station)]
    return purge, outlets


def route(plan: Plan, drawn: Array, used: Array, entered: Array, purging: Array | None) -> AirMoved:
    """Air into and out of every station, from the ends of the line back to the intake.

    All arrays may be of several ticks: (ticks, members) for (members,).
    """
    shape = (len(plan.stations), *used.shape)
    into, through = np.zeros(shape), np.zeros(shape)
    outlets = np.empty((len(plan.line.outlets), *used.shape))
    for number, outlet in enumerate(plan.line.outlets):
        outlets[number] = outlet.share * used
    purge = None
    if purging is not None:
        purge, outlets = _purge(plan, used, outlets, purging)
    for station in range(shape[0] - 1, -1, -1):
        for flow in plan.outflows[station]:
            through[station] += outlets[flow.outlet] if flow.outlet >= 0 else into[flow.station]
        if station in plan.receivers:
            into[station] = entered[plan.receivers.index(station)]
        elif station in plan.trunk and plan.receivers:
            into[station] = through[station] = drawn
        else:
            into[station] = through[station]
            if purge is not None and station in plan.purging:
                into[station] += purge[plan.purging.index(station)]
    return AirMoved(drawn, used, outlets, into, through, purge)


def _within_stock(plan: Plan, state: AirState, moved: AirMoved) -> AirMoved:
    """Keep what leaves a receiver below what it holds: the noise of several gauges adds up.

    What is held back is still wanted in the next step, since the cumulative sums stand.
    """
    into, through, outlets = moved.into.copy(), moved.through.copy(), moved.outlets.copy()
    scale = np.ones_like(into)
    for station, parent in enumerate(plan.parent):
        if station in plan.trunk and station not in plan.receivers:
            continue
        if parent >= 0:
            into[station] *= scale[parent]
            scale[station] = scale[parent]
        if station in plan.receivers:
            stock = MOST_OF_STOCK * state.stored[plan.receivers.index(station)] + into[station]
            wanted = np.maximum(through[station], 1e-300)
            scale[station] = np.minimum(1.0, stock / wanted)
        through[station] *= scale[station]
        for flow in plan.outflows[station]:
            if flow.outlet >= 0:
                outlets[flow.outlet] *= scale[station]
    used, purge = outlets.sum(axis=0), moved.purge
    if purge is not None:
        rows = list(plan.purging)
        purge = into[rows] - through[rows]
        used = used + purge.sum(axis=0)
    return replace(moved, into=into, through=through, outlets=outlets, used=used, purge=purge)
