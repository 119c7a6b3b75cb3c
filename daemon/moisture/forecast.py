"""When a level will be reached: every member run forward until it is, or to the horizon.

A trap's level is its drain-at volume; where a date asks for a drain sooner, it is that date. What
has been reached is taken to be drained, so that a trap that is drained in time does not flood
those behind it.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
import numpy.typing as npt

from daemon.clock import DAY_US
from daemon.moisture.ahead import Ahead, Stretch
from daemon.moisture.ensemble import PERCENTILES, Array
from daemon.moisture.model import State

HORIZON_US = 10 * DAY_US
NO_DATE = -1

Because = Literal["volume", "calendar"]


Values = Callable[[State], Array]  # of all levels at once, (levels, members)


@dataclass(frozen=True, slots=True)
class Level:
    """Something that rises towards a limit in each member."""

    name: str
    limit: Array  # (members,)
    date_us: int = NO_DATE  # when it is due whatever it holds
    station: int = -1  # whose trap is drained when it is due
    heel_kg: float = 0.0


@dataclass(frozen=True, slots=True)
class Due:
    """When something is due: 5, 50 and 95 %; None beyond the horizon."""

    p05_us: int | None
    p50_us: int | None
    p95_us: int | None
    because: Because | None  # None: it is not due within the horizon


def foresee(
    ahead: Ahead,
    state: State,
    through: Sequence[Stretch],
    levels: Sequence[Level],
    values: Values,
) -> tuple[Due, ...]:
    """When each level is due, in the order of `levels`."""
    times = reached(ahead, state, through, levels, values)
    end_us = through[-1].until_us if through else state.time_us
    return tuple(
        due(state.time_us, end_us, row, level.date_us)
        for row, level in zip(times, levels, strict=True)
    )


def reached(
    ahead: Ahead,
    state: State,
    through: Sequence[Stretch],
    levels: Sequence[Level],
    values: Values,
) -> Array:
    """Seconds from the state until each level is reached, (levels, members); infinite: not."""
    limits = np.stack([level.limit for level in levels]) if levels else np.empty((0, 0))
    begun_us, now = state.time_us, values(state)
    times = np.where(now >= limits, 0.0, np.inf)
    state = _drained(state, levels, now >= limits, begun_us, -1)
    before = values(state)
    for stretch in through:
        if _settled(times, levels, stretch.from_us):
            break
        state = ahead.step(state, stretch)
        now = values(state)
        over = now >= limits
        here = over & np.isinf(times)
        if here.any():
            part = np.clip((limits - before) / np.maximum(now - before, 1e-12), 0.0, 1.0)
            from_s = (stretch.from_us - begun_us) / 1e6
            length_s = (stretch.until_us - stretch.from_us) / 1e6
            times = np.where(here, from_s + part * length_s, times)
        after = _drained(state, levels, over, stretch.until_us, stretch.from_us)
        before = now if after is state else values(after)
        state = after
    return times


def _settled(times: Array, levels: Sequence[Level], now_us: int) -> bool:
    """Whether nothing more can change when anything is due."""
    return all(
        (level.date_us != NO_DATE and level.date_us <= now_us) or bool(np.isfinite(row).all())
        for row, level in zip(times, levels, strict=True)
    )


def _drained(
    state: State,
    levels: Sequence[Level],
    over: npt.NDArray[np.bool_],
    now_us: int,
    before_us: int,
) -> State:
    """Traps whose level was reached, or whose date came, hold their heel."""
    trap = starts = None
    for level, emptied in zip(levels, over, strict=True):
        dated = level.date_us != NO_DATE and before_us < level.date_us <= now_us
        if level.station < 0 or not (dated or emptied.any()):
            continue
        if trap is None or starts is None:
            trap, starts = state.water.trap.copy(), state.round_start.copy()
        i = level.station
        left = np.minimum(level.heel_kg, trap[i])
        trap[i] = np.where(emptied | dated, left, trap[i])
        starts[i] = np.where(emptied | dated, left, starts[i])
    if trap is None or starts is None:
        return state
    return replace(state, water=replace(state.water, trap=trap), round_start=starts)


def due(now_us: int, end_us: int, seconds: Array, date_us: int) -> Due:
    """By volume or by date, whichever comes first, in each member."""
    date_s = np.inf if date_us == NO_DATE else max((date_us - now_us) / 1e6, 0.0)
    beyond_s = (end_us - now_us) / 1e6 + 1.0
    if date_us != NO_DATE:  # what the horizon does not show is due at its date
        beyond_s = max(beyond_s, date_s + 1.0)
    by_volume = np.minimum(seconds, beyond_s)
    first = np.minimum(by_volume, date_s)
    p05, p50, p95 = (
        None if value >= beyond_s - 0.5 else now_us + round(float(value) * 1e6)
        for value in np.percentile(first, PERCENTILES)
    )
    because: Because | None = None
    if p50 is not None:
        because = "volume" if 2 * np.count_nonzero(by_volume < date_s) >= first.size else "calendar"
    elif p05 is not None:
        because = "volume"
    return Due(p05, p50, p95, because)
