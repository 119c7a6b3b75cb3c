"""Float switches in traps: one that closes says that the trap holds at least its level.

One-sided: a member that believed in more has nothing to learn. A closing that hardly any member
can believe is kept and not learned from; a second one is. An open switch teaches nothing: a float
that gums shut stays open too. Where it cannot be, that is a contradiction for people to look at.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from daemon.moisture import beliefs as believed
from daemon.moisture.description import FloatSwitch
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array, standard_normal
from daemon.moisture.learning import (
    LEAST_K_KG,
    MOST_WIDENED,
    SUSPECT_SIGMAS,
    WIDENED_TO_SIGMAS,
    Update,
    local_names,
)
from daemon.moisture.model import Model, State
from daemon.moisture.observing import take
from daemon.moisture.plan import Plan

NOTHING_NEW = 0.1  # of a switch's own error: a closing that says no more has said it before
SURE = 0.95  # of the members, before a switch is said to contradict what is believed


@dataclass(frozen=True, slots=True)
class FloatSeen:
    """What is carried of one float switch."""

    closed: bool | None = None  # None: it has said nothing yet
    since_us: int = -1
    surprised: bool = False  # its last closing was too far off to be learned from


def switches(plan: Plan) -> Iterator[tuple[int, FloatSwitch]]:
    """Every float switch and its station."""
    for i in plan.traps:
        trap = plan.stations[i].trap
        for one in trap.floats if trap is not None else ():
            yield i, one


def observe(
    model: Model,
    state: State,
    seen: Mapping[str, FloatSeen],
    heard: Mapping[str, Sequence[tuple[int, float, bool]]],
) -> tuple[State, Mapping[str, FloatSeen]]:
    """Take in what the switches said in a step: readings by channel as (time_us, value, good)."""
    after = dict(seen)
    for station, switch in switches(model.plan):
        for time_us, value, good in heard.get(switch.channel, ()):
            one = after.get(switch.channel, FloatSeen())
            closed = value > 0.5
            if not good or closed is one.closed:
                continue
            surprised = one.surprised
            if closed:
                state, surprised = _closed(model, state, station, switch, one.surprised)
            after[switch.channel] = FloatSeen(closed, time_us, surprised)
    return state, after


def _closed(
    model: Model, state: State, station: int, switch: FloatSwitch, surprised: bool
) -> tuple[State, bool]:
    """A switch has closed; whether that was too far off to be learned from."""
    level, members = switch.level, model.plan.line.members
    expected = np.log(model.contents(state)[station] + LEAST_K_KG)
    seen = math.log(level.value + LEAST_K_KG)
    sd = level.give_or_take * HALF_WIDTH_TO_SD / (level.value + LEAST_K_KG)
    variance, middle = float(expected.var(ddof=1)), float(expected.mean())
    factor = 1.0
    if seen - middle > SUSPECT_SIGMAS * math.sqrt(variance + sd * sd):
        if not surprised or variance <= 0.0:
            return state, True
        needed = ((seen - middle) / WIDENED_TO_SIGMAS) ** 2 - sd * sd
        factor = min(max(math.sqrt(max(needed, 0.0) / variance), 1.0), MOST_WIDENED)
    # where it closes is off by the same each time: else one that flutters would be many witnesses,
    # and every member would end above the highest that any of them said
    noise = standard_normal(model.plan.line.seed, switch.channel, members)
    wide = middle + factor * (expected - middle)
    miss = np.maximum(seen + sd * noise - wide, 0.0)
    miss[miss < NOTHING_NEW * sd] = 0.0
    if not miss.any():
        return state, False
    update = Update(wide, miss, factor * factor * variance + sd * sd)
    names = [name for name in local_names(model.plan, station) if name != believed.CUP]
    return take(model, state, names, update, factor), False


def contradiction(contents_kg: Array, switch: FloatSwitch, closed: bool) -> bool:
    """Whether a switch says what hardly any member can believe; contents are (members,)."""
    level = switch.level
    if closed:
        against = contents_kg < level.value - level.give_or_take
    else:
        against = contents_kg > level.value + level.give_or_take
    return float(np.count_nonzero(against)) >= SURE * contents_kg.size
