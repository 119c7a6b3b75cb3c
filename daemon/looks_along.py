"""In which of several ticks an alarm's condition may change.

Each finds the ticks in which what an alarm watches is not as in the tick before; more than that
does no harm, less would. `AlarmRules` says what is so.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from daemon.advance import Core
from daemon.contradictions import RUNS_OUT_US
from daemon.drain_alarms import LIMITED_AT, NOT_PASSING_US
from daemon.due import NO_DATE, RAISED_AT, RETURNS_BELOW
from daemon.fitting_alarms import FREEZES_KG, FREEZES_ON_ITS_WAY_KG, FREEZING_K
from daemon.moisture import floats
from daemon.moisture.along import Stretch
from daemon.moisture.along_conditions import least_of
from daemon.moisture.ensemble import Array
from daemon.outlet_alarms import LOOK_EVERY_US
from daemon.state import CoreState

Levels = npt.NDArray[np.int64]


def level(share: npt.ArrayLike) -> Levels:
    """Of shares of members: 0 where an alarm returns, 2 where it is raised, 1 between.

    All alarms that watch shares of members have the same two limits.
    """
    shares = np.asarray(share)
    levels: Levels = (shares >= RETURNS_BELOW).astype(np.int64) + (shares >= RAISED_AT)
    return levels


def changes(before: int | bool, after: npt.NDArray[np.generic]) -> Iterator[int]:
    """The rows in which something is not as in the one before."""
    was = np.concatenate((np.array([before]), after[:-1]))
    yield from np.flatnonzero(after != was).tolist()


def told(before: bool, after: npt.NDArray[np.bool_]) -> Iterator[int]:
    """The same of what an alarm tells in words that change from tick to tick while it is so: also
    the last rows in which it is, since those words stay."""
    for row in changes(before, after):
        yield from (row, row - 1) if row else (row,)
    if after[-1]:
        yield len(after) - 1


def _share(of_members: npt.NDArray[np.bool_]) -> Array:
    shares: Array = np.count_nonzero(of_members, axis=-1) / of_members.shape[-1]
    return shares


class Looks:
    """When the alarms of one site have to be looked at."""

    def __init__(self, core: Core, before: CoreState, found: Stretch, ticks: int) -> None:
        self.core, self.before, self.found, self.ticks = core, before, found, ticks

    def rows(self) -> set[int]:
        """The ticks in which a condition may change, as far as the stretch tells."""
        rows = {*self._traps(), *self._frost(), *self._drains(), *self._switches()}
        return {row for row in rows if row < self.ticks}

    def margins(self) -> list[int]:
        """The ticks in which the margins are looked at."""
        window = self.found.course.times_us[: self.ticks] // LOOK_EVERY_US
        return list(changes(self.before.time_us // LOOK_EVERY_US, window))

    # ---- traps ----

    def _traps(self) -> Iterator[int]:
        """Due by the calendar or by volume, or full."""
        times_us, rows = self.found.course.times_us, self.core.rules.trap_rows
        if not rows:
            return
        water = self.found.water
        most = np.array([water.trap_between(i) for i in rows])
        lowest, highest = self._levels(rows, most).swapaxes(0, -1)
        for number, (i, name) in enumerate(zip(rows, self.core.trap_names, strict=True)):
            due_us = self.before.traps[name].calendar_due_us
            if due_us != NO_DATE and self.before.time_us < due_us <= times_us[self.ticks - 1]:
                yield int(np.searchsorted(times_us, due_us))
            # each member's place is the same at the least and the most that its trap can have held
            if (lowest[number] == highest[number]).all():
                continue
            start = self._levels([i], self.found.before.water.trap[i][None])
            between = self._levels([i], water.trap_rows(i)[None, : self.ticks])
            for before, after in zip(start[:, 0], between[:, 0], strict=True):
                yield from changes(int(before), after)

    def _levels(self, rows: list[int], trap: Array) -> Levels:
        """How traps stand to their drain-at levels and to their capacities, (2, traps, ...);
        `trap` is (traps, ..., members)."""
        numbers = [self.core.rules.trap_rows.index(i) for i in rows]
        contents, capacity = self._contents(rows, trap)
        limits = self.core.rules.drain_at_kg[numbers].reshape(len(rows), *(1,) * (trap.ndim - 1))
        return np.array([level(_share(contents >= limits)), level(_share(trap >= capacity))])

    def _drains(self) -> Iterator[int]:
        """A drain that cannot pass all that comes, or can again."""
        fittings, state = self.core.model.fittings, self.found.before
        for i, was in zip(fittings.drains, state.fittings.limited, strict=True):
            told = np.array(self.found.water.drains[i].limited[: self.ticks])
            last = np.maximum.accumulate(np.where(told >= 0.0, np.arange(len(told)), -1))
            limited = np.where(last >= 0, told[last], was)
            yield from changes(was >= LIMITED_AT, limited >= LIMITED_AT)

    def _contents(self, rows: list[int], trap: Array) -> tuple[Array, Array]:
        """`Model.contents` of traps that hold this much, (traps, ..., members), and capacities."""
        state, several = self.found.before, (len(rows), *(1,) * (trap.ndim - 2), -1)
        capacity, started, factor = (
            each[rows].reshape(several)
            for each in (
                state.parameters.water.capacity_kg,
                state.round_start,
                state.parameters.round_factor,
            )
        )
        held = started + (trap - started) * factor
        return np.minimum(np.maximum(held, 0.0), capacity), capacity

    # ---- float switches ----

    def _switches(self) -> Iterator[int]:
        """A switch that contradicts what is believed, or that water has stood at for long."""
        times_us = self.found.course.times_us[: self.ticks]
        all_us = np.concatenate(([self.before.time_us], times_us))
        for i, switch in floats.switches(self.core.model.plan):
            seen = self.before.sensed.floats.get(switch.channel)
            if seen is None or seen.closed is None:
                continue
            stands = all_us - seen.since_us >= NOT_PASSING_US
            yield from changes(bool(stands[0]), stands[1:])
            drained_us = self.before.traps[self.core.model.plan.stations[i].id].last_drain_us
            ready = all_us - max(drained_us, seen.since_us) >= RUNS_OUT_US
            if not ready.any():
                continue
            trap = np.concatenate(
                (self.found.water.state.trap[i][None], self.found.water.trap_rows(i))
            )
            contents = self._contents([i], trap[None, : self.ticks + 1])[0][0]
            level = switch.level
            if seen.closed:
                against = contents < level.value - level.give_or_take
            else:
                against = contents > level.value + level.give_or_take
            sure = np.count_nonzero(against, axis=1) >= floats.SURE * contents.shape[1]
            wrong = ready & sure
            yield from told(bool(wrong[0]), wrong[1 : self.ticks + 1])

    # ---- frost ----

    def _frost(self) -> Iterator[int]:
        """Liquid where it is freezing."""
        kelvin = self.found.conditions.temperature_k
        was = self.found.before.conditions.temperature_k
        water = self.found.water
        for i in range(1, len(was)):
            if least_of(kelvin, i) > FREEZING_K and was[i].min() > FREEZING_K:
                continue
            state, cold = water.state, kelvin[i][: self.ticks] <= FREEZING_K
            before = self._freezes(
                was[i] <= FREEZING_K, state.trap[i], state.waiting[i] + state.spilled[i]
            )
            trap = state.trap[i]
            if self.core.model.plan.stations[i].trap is not None:
                trap = water.trap_rows(i)[: self.ticks]
            after = self._freezes(cold, trap, water.on_its_way_rows(i)[: self.ticks])
            yield from changes(int(before), after)

    def _freezes(self, cold: npt.NDArray[np.bool_], trap: Array, on_its_way: Array) -> Levels:
        wet = (trap >= FREEZES_KG) | (on_its_way >= FREEZES_ON_ITS_WAY_KG)
        return level(_share(wet & cold))
