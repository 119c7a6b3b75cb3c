"""`Core.advance` over several ticks at once.

The model is worked out for all ticks together; alarms, reminders and what is followed beside the
water are looked at only in ticks in which they can change: an alarm whose condition stays as it
is, and whose delay does not run out, stays as it is. Whatever does not fit is left to `advance`.
"""

from __future__ import annotations

from bisect import bisect_left
from dataclasses import dataclass, field, replace

import numpy as np

from daemon.advance import Core
from daemon.alarms import Transition
from daemon.dew_points_along import gathered
from daemon.drain_alarms import STUCK_LIMIT
from daemon.falls_along import gauges_after, may_fall, without_pressure_as_before
from daemon.fittings_along import fitting_rows
from daemon.followed import Followed
from daemon.looks_along import Looks, changes
from daemon.moisture import floats
from daemon.moisture.along import Stretch, stretch
from daemon.moisture.along_course import Ints
from daemon.moisture.along_drains import let_down_from
from daemon.moisture.contact import ContactState
from daemon.moisture.drains import chance_stuck
from daemon.moisture.flow import PumpWatch
from daemon.moisture.model import Moved, State
from daemon.moisture.outlook import SAMPLED_EVERY_US
from daemon.moisture.plant import Plant
from daemon.moisture.power import Powered
from daemon.plant_along import PlantAlong
from daemon.record_arrays import NEVER_US, Record
from daemon.reminders import NEVER, WATCHED_US, Reminder
from daemon.state import CoreState, HourTotals
from daemon.ticks_along import Ticks, ticks_along
from daemon.unset_clock import SET_FROM_US

ELEMENTS = 23_552  # ticks times members that are worked on together: they stay near the processor
LEAST_TICKS = 6  # fewer are as quick one by one


@dataclass(slots=True)
class Along:
    """What several ticks gave."""

    state: CoreState
    ticks: int = 0  # so many were taken; the next one is to be taken by itself
    heard_us: int = -1  # the last reading in them; -1: none
    transitions: list[Transition] = field(default_factory=list)
    reminders: list[Reminder] = field(default_factory=list)


class AdvanceAlong:
    """Advances one site over several ticks."""

    def __init__(self, core: Core) -> None:
        self.core = core
        plan = core.model.plan
        self.fits = core.hourly is None
        self.most = max(ELEMENTS // plan.line.members, 2 * LEAST_TICKS)

    def advance(self, state: CoreState, record: Record, times_us: Ints) -> Along:
        """As many of the ticks at these times as can be taken together.

        They are one period apart, the first one period after the state, within one hour and
        without journal entries.
        """
        done = Along(state)
        if not self.fits or len(times_us) < LEAST_TICKS:
            return done
        if state.time_us < SET_FROM_US <= times_us[-1]:
            return done
        ticks = ticks_along(self.core, state, record, times_us)
        good = self._usual(ticks)
        while done.ticks < good:
            count = self._count(times_us[done.ticks : good])
            if count < LEAST_TICKS and done.ticks:
                count = good - done.ticks
            taken = self._stretch(done, ticks, done.ticks, done.ticks + count)
            if taken < count:
                break
        if done.ticks > 0:
            done.state = self._remembered(done.state, ticks, done.ticks)
            done.heard_us = ticks.heard_us(done.ticks)
        return done

    def _usual(self, ticks: Ticks) -> int:
        """How many of the ticks are as usual, as far as readings tell."""
        good = min(
            ticks.good,
            let_down_from(ticks.before.model.fittings, ticks.times_us),
            without_pressure_as_before(self.core.model, ticks),
        )
        for record in ticks.before.drains.drains.values():
            stuck = [chance_stuck(record.seen_us, at_us) >= STUCK_LIMIT for at_us in ticks.ends_us]
            good = 0 if stuck[0] != stuck[1] else good  # perhaps once in a year
        return min(good, may_fall(self.core.drains, ticks))

    def _count(self, times_us: Ints) -> int:
        """How many ticks to work out together: up to a look at the margins, if there is one."""
        most = min(self.most, len(times_us))
        looks = np.flatnonzero(np.diff(times_us[:most] // (2 * SAMPLED_EVERY_US)) > 0)
        if most < len(times_us) and len(looks) and looks[-1] + 2 > most // 2:
            return int(looks[-1]) + 2
        return most

    def _stretch(self, done: Along, ticks: Ticks, begin: int, end: int) -> int:
        """Take the ticks from `begin` on, before `end`; how many could be taken."""
        model = done.state.model
        found = stretch(self.core.model, model, ticks.course.rows(begin, end), _From(ticks, begin))
        if found is None or found.good == 0:
            return 0
        count = min(found.good, end - begin)
        _Watch(self.core, done, ticks, found, begin, count).run()
        done.ticks += count
        return count

    def _remembered(self, state: CoreState, ticks: Ticks, count: int) -> CoreState:
        """With what is remembered of the channels after so many ticks."""
        drains = state.drains
        if (gauges := gauges_after(self.core.drains, ticks, count)) is not None:
            drains = replace(drains, gauges=gauges)
        return replace(
            state,
            channels=ticks.channels(count),
            quality=ticks.judged.after(count),
            drains=drains,
        )


@dataclass(frozen=True, slots=True)
class _From:
    """The switches of the ticks from one on."""

    ticks: Ticks
    first: int

    def contact(self, row: int) -> ContactState:
        return self.ticks.contact(self.first + row)

    def pump(self, row: int) -> PumpWatch:
        return self.ticks.pump(self.first + row)

    def contact_unknown_us(self, row: int) -> int:
        return self.ticks.contact_unknown_us(self.first + row)

    def power(self, row: int) -> tuple[Powered, ...]:
        return self.ticks.power(self.first + row)


class _Watch:
    """Alarms, reminders and what is followed, over the ticks of one stretch."""

    def __init__(
        self, core: Core, done: Along, ticks: Ticks, found: Stretch, first_row: int, count: int
    ) -> None:
        self.core, self.done, self.found, self.count = core, done, found, count
        # all that is said of channels in these ticks is as usual: later or earlier, no matter
        self.state = replace(done.state, channels=ticks.channels(first_row + count))
        self.times_us: list[int] = found.course.times_us[:count].tolist()
        self.plant = PlantAlong(core.following.byproducts, ticks, found, first_row, count)
        before_us = done.state.time_us // SAMPLED_EVERY_US
        samples = found.course.times_us[:count] // SAMPLED_EVERY_US
        self.switches = any(floats.switches(core.model.plan))
        self.samples = list(changes(before_us, samples))
        self.next_sample = 0
        self.end = found.state(count - 1)
        looks = Looks(core, self.state, found, count)
        rows = {*looks.rows(), *fitting_rows(core, found, count)}
        if first_row == 0:  # full hours and entries change what alarms look at after they looked
            rows.add(0)
        self.looks, self.margins = sorted(rows), looks.margins()

    def run(self) -> None:
        """Go through the ticks in which something may happen."""
        row = 0
        while row < self.count:
            happens = self.plant.next(self.state.followed.plant, row)
            full = min(_next(self.looks, row, self.count), self._runs_out(row))
            margins = _next(self.margins, row, self.count)
            row = min(full, happens, margins, self._reminds(row))
            if row == self.count:
                break
            if row == happens:
                self._sample_before(row)
                full = min(full, self._happened(row))
            else:
                self._sample_before(row + 1)
            if row == margins:
                full = min(full, self._margins(row))
            if row == full:
                self._look(row)
            else:
                self._glance(row)
            row += 1
        self._sample_before(self.count)
        sensed = self.state.sensed
        observed = gathered(self.core.model.plan, sensed.observed, self.found, self.count)
        self.state = replace(self.state, model=self.end, sensed=replace(sensed, observed=observed))
        on_s, drawn_kg, used_kg = self.found.moved(0, self.count)
        hour = self.state.hour
        hour = HourTotals(
            hour.from_us, hour.on_s + on_s, hour.drawn_kg + drawn_kg, hour.used_kg + used_kg
        )
        self.done.state = replace(self.state, hour=hour)

    # ---- when ----

    def _runs_out(self, row: int) -> int:
        """The tick in which the delay of an alarm runs out."""
        until_us = NEVER_US
        for name, record in self.state.alarms.items():
            if record.holding_since_us >= 0:
                definition = self.core.definitions[name]
                delay_us = definition.off_delay_us if record.raised else definition.on_delay_us
                until_us = min(until_us, record.holding_since_us + delay_us)
        return max(row, bisect_left(self.times_us, until_us))

    def _reminds(self, row: int) -> int:
        """The tick in which a reminder is thought about."""
        reminders = self.state.followed.reminders
        turn = reminders.turn
        if turn is None:
            return self.count
        from_us = turn.at_us - WATCHED_US
        flooded = any(self.state.alarms[f"{name}-flooded"].raised for name in self.core.trap_names)
        if reminders.watched_us != NEVER and not flooded:
            from_us = max(from_us, min(reminders.watched_us + WATCHED_US, turn.until_us))
        return max(row, bisect_left(self.times_us, from_us))

    # ---- what ----

    def _after(self, row: int) -> State:
        return self.end if row == self.count - 1 else self.found.state(row)

    def _look(self, row: int) -> None:
        """All that a tick looks at."""
        state = replace(self.state, model=self._after(row))
        self.state, transitions, reminders = self.core.watched(state)
        self.done.transitions += transitions
        self.done.reminders += reminders

    def _happened(self, row: int) -> int:
        """What is followed beside the water; this tick, if an alarm hangs on it, else the end."""
        before, after = self.state, self.found.dry_state(row)
        followed, drains = self._followed(row, after), before.drains  # a sample is taken with it
        self.next_sample = bisect_left(self.samples, row + 1, self.next_sample)
        if self.core.drains.traps:
            drains = self.core.drains.leaked(drains, followed.plant)
        self.state = replace(before, followed=followed, drains=drains)
        alike = _alarming(followed.plant) == _alarming(before.followed.plant)
        return self.count if alike and drains.leak.blows == before.drains.leak.blows else row

    def _sample_before(self, row: int) -> None:
        """Take the samples of the days ahead that stand in rows before this one."""
        first = self.next_sample
        self.next_sample = bisect_left(self.samples, row, first)
        if self.next_sample == first:
            return
        followed, foreseer = self.state.followed, self.core.following.foreseer
        seen = [
            (self.times_us[at - 1] if at else self.found.before.time_us, self.found.sight(at))
            for at in self.samples[first : self.next_sample]
        ]
        foresight = foreseer.sampled(followed.foresight, seen)
        self.state = replace(self.state, followed=replace(followed, foresight=foresight))

    def _margins(self, row: int) -> int:
        """Look at the margins; this tick, if they are not as they were, else the end."""
        before, look = self.state.outlets, self.core.rules.margins
        after = self.end
        if row < self.count - 1:
            after = replace(self.found.before, time_us=self.times_us[row])
            if look.asks(self.state, self.plant.is_open[row]):
                # what is in traps says whether a float switch is to be believed
                after = self._after(row) if self.switches else self.found.leaving_state(row)
        self.state = look.look(replace(self.state, model=after))
        same = all(
            (each.line, each.surface) == (before[name].line, before[name].surface)
            for name, each in self.state.outlets.items()
        )
        return self.count if same else row

    def _glance(self, row: int) -> None:
        """A tick in which no alarm can change: is it time for a reminder?"""
        if self._reminds(row) != row:
            return
        after = self.found.dry_state(row)
        waited_for = self.state.followed.reminders.turn
        followed, reminder = self.core.following.remind(replace(self.state, model=after))
        if followed.reminders.turn is not waited_for:  # it is made, or there is nothing to do
            after = self._after(row)
            followed, reminder = self.core.following.remind(replace(self.state, model=after))
        self.state = replace(self.state, followed=followed)
        self.done.reminders += [reminder] if reminder is not None else []

    def _followed(self, row: int, after: State) -> Followed:
        before = self.found.dry_state(row - 1) if row else self.found.before
        on_s = np.array([self.plant.on_s[row]])
        return self.core.following.step(
            replace(self.state, model=before),
            after,
            Moved(on_s, on_s, on_s),
            self.plant.is_open[row],
        )


def _alarming(plant: Plant) -> tuple[object, ...]:
    """What the plant's alarms look at."""
    turns = None if plant.delivered_kg_per_s is None else plant.delivered_kg_per_s.count
    leaks = plant.leak_kg_per_s is None
    return leaks, plant.leak_high, plant.weak, plant.busy, plant.busy_h, turns


def _next(rows: list[int], row: int, end: int) -> int:
    """The first of these rows from one on."""
    place = bisect_left(rows, row)
    return rows[place] if place < len(rows) else end
