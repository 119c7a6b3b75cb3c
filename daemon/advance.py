"""The whole main job as one pure function: `advance(state, now, inputs)`.

Inputs are readings and journal entries since the last tick. The live daemon, the demo and a replay
all call it with the same things and get the same bits. It goes from the last tick to this one in
steps that end at every full hour and at every journal entry, so that both are dealt with at their
own time.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import Literal

import numpy as np

from daemon.alarm_rules import AlarmRules
from daemon.alarms import (
    Alarm,
    AlarmRecord,
    Transition,
    acknowledge,
    longest_shelved_us,
    shelve,
    shown,
    unshelve,
)
from daemon.clock import HOUR_US
from daemon.drain_watch import DrainWatching
from daemon.due import NO_DATE, calendar_due_us
from daemon.errors import BalanceError
from daemon.expected import expected_words, shelved_words
from daemon.fitting_entries import FittingEntries
from daemon.following import Following
from daemon.hour_figures import NOTHING, DrainCheck, Noted, joined
from daemon.hourly import Hourly, noted_ahead
from daemon.journal import (
    Acknowledge,
    Blotter,
    Confirm,
    Drain,
    Entry,
    Gauge,
    SaltCheck,
    Service,
    Shelve,
    Unshelve,
)
from daemon.judging import Judging
from daemon.moisture.contact import STALE_AFTER_PERIODS
from daemon.moisture.ensemble import Array, percentiles
from daemon.moisture.forecast import Due
from daemon.moisture.learning import Learned
from daemon.moisture.model import Heard, Model
from daemon.outlet_entries import OutletEntries
from daemon.outlet_record import OutletRecord
from daemon.outlets import OutletViews
from daemon.reminders import Reminder
from daemon.sensing import Sensing
from daemon.site import hours as opening
from daemon.site.types import Site
from daemon.state import ChannelRecord, CoreState, HourTotals, Inputs, Mark, Sensed, TrapRecord
from daemon.taking import Taking
from daemon.views import Because, OutletView, TrapView
from sensors.quality import Judged, QualityState, Verdict, forget
from sensors.reading import Reading


@dataclass(frozen=True)
class Estimate:
    """What the model now believes. The views are made when they are asked for."""

    core: Core
    state: CoreState
    marks: tuple[Mark, ...] = ()
    learned: tuple[Learned, ...] = ()
    problems: tuple[str, ...] = ()  # faults of the model itself, in words
    readings: tuple[Reading, ...] = ()  # the tick's, those that are not believed marked as bad
    verdicts: tuple[Verdict, ...] = ()  # what began or ended to be so of a channel
    reminders: tuple[Reminder, ...] = ()
    noted: Noted = NOTHING  # for the weekly log

    @property
    def at_us(self) -> int:
        return self.state.time_us

    @cached_property
    def traps(self) -> tuple[TrapView, ...]:
        return self.core.views(self.state)

    @cached_property
    def outlets(self) -> tuple[OutletView, ...]:
        return self.core.outlet_views.all(self.state)

    def margin(self, outlet: str, surface_k: float) -> OutletView | None:
        """An outlet's view for a surface of this temperature, K."""
        return self.core.outlet_views.of(self.state, outlet, surface_k)


@dataclass(slots=True)
class _Tick:
    """The working state of one advance."""

    state: CoreState
    transitions: list[Transition] = field(default_factory=list)
    marks: list[Mark] = field(default_factory=list)
    learned: list[Learned] = field(default_factory=list)
    problems: list[str] = field(default_factory=list)
    judged: Judged | None = None
    reminders: list[Reminder] = field(default_factory=list)
    noted: list[Noted] = field(default_factory=list)

    def result(self, core: Core) -> tuple[CoreState, Estimate, list[Transition]]:
        """What an advance gives."""
        estimate = Estimate(
            core,
            self.state,
            tuple(self.marks),
            tuple(self.learned),
            tuple(self.problems),
            () if self.judged is None else self.judged.readings,
            () if self.judged is None else self.judged.verdicts,
            tuple(self.reminders),
            joined(self.noted) if self.noted else NOTHING,
        )
        return self.state, estimate, self.transitions


class Core:
    """`advance` for one site. Holds only what never changes.

    Without `hourly`, nothing is gathered for the weekly log.
    """

    def __init__(self, site: Site, hourly: bool = True) -> None:
        self.site = site
        self.model = Model(site.line)
        plan = self.model.plan
        self.trap_names = site.traps
        self._trap_rows = list(plan.traps)
        self._traps = [t for s in plan.stations if (t := s.trap) is not None]
        self.rules = AlarmRules(site, self.model)
        self.definitions = self.rules.definitions
        self.outlet_air = self.rules.margins.air
        self.outlet_entries = OutletEntries(self.outlet_air)
        self.outlet_views = OutletViews(self.outlet_air)
        self.taking = Taking(site, self.model)
        self.judging = Judging(site, self.model.period_us)
        self.sensing = Sensing(self.model)
        self.following = Following(site, self.model)
        self.drains = DrainWatching(self.model)
        self.fitting_entries = FittingEntries(self.model, self.drains)
        self.hourly = Hourly(site, self.model, self.outlet_views) if hourly else None

    # ---- beginning ----

    def initial(
        self, now_us: int, inputs: Inputs, known: Mapping[str, Array] | None = None
    ) -> tuple[CoreState, Estimate, list[Transition]]:
        """The state at the first tick, which is the time of the first reading.

        `known` are beliefs that were learned before, by name; the others are drawn.
        """
        unheard = {name: ChannelRecord() for name in self.site.channels}
        judged = self.judging.judge(QualityState(), unheard, inputs.readings, now_us)
        heard = self._heard(judged.readings, now_us, now_us)
        model = self.model.initial(now_us, heard, known)
        model, sensed = self.sensing.step(Sensed(), now_us, model, heard.channels)
        state = CoreState(
            model=model,
            begun_us=now_us,
            stations=tuple(self.model.plan.index),
            traps={
                name: TrapRecord(-1, calendar_due_us(self.site, trap, now_us, drained=False))
                for name, trap in zip(self.trap_names, self._traps, strict=True)
            },
            channels=self._told(unheard, judged.readings),
            alarms={name: AlarmRecord(since_us=now_us) for name in self.definitions},
            hour=self._no_hour(now_us),
            followed=self.following.begun(model),
            outlets={outlet.id: OutletRecord() for outlet in self.outlet_air.outlets},
            quality=judged.state,
            sensed=sensed,
            drains=self.drains.begun(now_us),
            hourly=self.hourly.begun(model) if self.hourly is not None else None,
        )
        tick = _Tick(state, judged=judged)
        if now_us % HOUR_US == 0:
            tick.marks.append(self._mark(state, "hour", None))
        self._watch(tick)
        return tick.result(self)

    def fitted(self, state: CoreState) -> CoreState:
        """A state of the same line, for a site file that was edited elsewhere.

        Alarms, channels and outlets that are new begin, those that are gone are dropped.
        """
        begun = AlarmRecord(since_us=state.time_us)
        return replace(
            state,
            channels={
                name: state.channels.get(name, ChannelRecord()) for name in self.site.channels
            },
            alarms={name: state.alarms.get(name, begun) for name in self.definitions},
            outlets={
                outlet.id: state.outlets.get(outlet.id, OutletRecord())
                for outlet in self.outlet_air.outlets
            },
        )

    def _no_hour(self, from_us: int) -> HourTotals:
        zero = np.zeros(self.site.line.members)
        return HourTotals(from_us, zero, zero, zero)

    # ---- the main job ----

    def advance(
        self, state: CoreState, now_us: int, inputs: Inputs
    ) -> tuple[CoreState, Estimate, list[Transition]]:
        """Advance to `now_us`. Entries must lie after the state's time and not after `now_us`.

        Pure: the same state and inputs give the same result to the bit, and nothing is kept.
        """
        judged = self.judging.judge(state.quality, state.channels, inputs.readings, now_us)
        told = self._told(state.channels, judged.readings)
        tick = _Tick(replace(state, channels=told, quality=judged.state), judged=judged)
        entries = sorted(inputs.entries, key=lambda entry: (entry.at_us, entry.seq))
        readings = judged.readings
        for until_us in self._stops(state.time_us, now_us, entries):
            self._step(tick, until_us, readings)
            here = [entry for entry in entries if entry.at_us == until_us]
            if until_us % HOUR_US == 0:
                self._full_hour(tick)
            for entry in here:
                self._take(tick, entry)
        self._foreseen(tick, state)
        return tick.result(self)

    def take(
        self, state: CoreState, entries: Sequence[Entry]
    ) -> tuple[CoreState, Estimate, list[Transition]]:
        """Take entries that are dated at the state's own time."""
        tick = _Tick(state)
        for entry in entries:
            self._take(tick, entry)
        self._foreseen(tick, state)
        return tick.result(self)

    def _foreseen(self, tick: _Tick, before: CoreState) -> None:
        """Note forecasts that were made or scored."""
        was, now = before.followed.foresight, tick.state.followed.foresight
        if self.hourly is not None and now is not was:
            tick.noted += noted_ahead(self.trap_names, was, now)

    def _stops(self, from_us: int, to_us: int, entries: Iterable[Entry]) -> list[int]:
        hours = range((from_us // HOUR_US + 1) * HOUR_US, to_us + 1, HOUR_US)
        stops = {to_us, *hours, *(entry.at_us for entry in entries)}
        return sorted(stop for stop in stops if from_us < stop <= to_us)

    def _step(self, tick: _Tick, until_us: int, readings: Sequence[Reading]) -> None:
        state = tick.state
        heard = self._heard(readings, state.time_us, until_us)
        model, moved = self.model.step(state.model, until_us, heard)
        model, sensed = self.sensing.step(state.sensed, state.time_us, model, heard.channels)
        hour = state.hour
        hour = HourTotals(
            hour.from_us,
            hour.on_s + moved.on_s,
            hour.drawn_kg + moved.drawn_kg,
            hour.used_kg + moved.used_kg,
        )
        followed = self.following.step(state, model, moved, heard.is_open)
        tally = state.hourly
        if self.hourly is not None:
            tally = self.hourly.step(state, until_us, moved, heard.is_open, bool(readings))
        after = replace(
            state, model=model, hour=hour, followed=followed, sensed=sensed, hourly=tally
        )
        tick.state = replace(after, drains=self.drains.step(state, after, heard.channels))
        self._watch(tick)
        if self.hourly is not None:
            tick.state = self.hourly.look(tick.state)
        self._remind(tick)

    def _remind(self, tick: _Tick) -> None:
        followed, reminder = self.following.remind(tick.state)
        if followed is not tick.state.followed:
            tick.state = replace(tick.state, followed=followed)
        tick.reminders += [reminder] if reminder is not None else []

    def _full_hour(self, tick: _Tick) -> None:
        self._note_hour(tick)
        state = self.sensing.hour(tick.state)
        try:
            state.model.ledger.check(state.model.water)
        except BalanceError as error:  # a daemon that stops over it would help nobody
            tick.problems.append(str(error))
        tick.marks.append(self._mark(state, "hour", state.hour))
        followed = self.following.hour(state, state.hour)
        state = replace(state, hour=self._no_hour(state.time_us), followed=followed)
        tick.state = self.outlet_entries.hour(state)

    def _note_hour(self, tick: _Tick) -> None:
        closed = self.hourly.close(tick.state) if self.hourly is not None else None
        if closed is not None:
            tick.state, figures, day = closed
            tick.noted.append(Noted(hours=(figures,), days=(day,)))

    def watched(self, state: CoreState) -> tuple[CoreState, list[Transition], list[Reminder]]:
        """A state that was worked out elsewhere, with its alarms and its reminders."""
        tick = _Tick(state)
        self._watch(tick)
        self._remind(tick)
        return tick.state, tick.transitions, tick.reminders

    # ---- what was heard ----

    def _heard(self, readings: Sequence[Reading], after_us: int, until_us: int) -> Heard:
        """Readings of (after_us, until_us] by channel; at the beginning, those of that time."""
        channels: dict[str, list[tuple[int, float, bool]]] = {}
        first = after_us == until_us
        for reading in readings:
            within = reading.time_us <= until_us and (first or reading.time_us > after_us)
            if within:
                told = (reading.time_us, reading.value, reading.good)
                channels.setdefault(reading.channel, []).append(told)
        for told_list in channels.values():
            told_list.sort(key=lambda told: told[0])
        is_open = opening.is_open(self.site.hours, self.site.timezone, until_us)
        return Heard(channels, is_open)

    def _told(
        self, channels: Mapping[str, ChannelRecord], readings: Sequence[Reading]
    ) -> dict[str, ChannelRecord]:
        after = dict(channels)
        for reading in sorted(readings, key=lambda reading: reading.time_us):
            record = after.get(reading.channel)
            if record is None:
                continue
            if not reading.good:
                after[reading.channel] = replace(
                    record, heard_us=reading.time_us, fault=reading.fault, only_edges=False
                )
                continue
            after[reading.channel] = ChannelRecord(
                reading.value,
                reading.time_us,
                reading.time_us,
                "",
                self._only_edges(record, reading),
            )
        return after

    def _only_edges(self, record: ChannelRecord, reading: Reading) -> bool:
        if self.site.channels[reading.channel].quantity != "contact":
            return False
        if record.time_us < 0:
            return True
        soon = reading.time_us - record.time_us <= STALE_AFTER_PERIODS * self.model.period_us
        repeats = reading.value == record.value and reading.time_us > record.time_us and soon
        return record.only_edges and not repeats

    # ---- journal entries ----

    def _take(self, tick: _Tick, entry: Entry) -> None:
        before = tick.state
        self._apply(tick, entry)
        if self.hourly is not None and tick.state.model is not before.model:
            # the weekly log books what was shed until now as it was believed until now
            tick.state = replace(tick.state, hourly=self.hourly.settled(before).hourly)

    def _apply(self, tick: _Tick, entry: Entry) -> None:
        match entry.body:
            case Drain() as drain:
                self._drain(tick, entry, drain)
            case Acknowledge(alarm=alarm, by=by):
                self._acknowledge(tick, alarm, by)
            case Shelve() as wanted:
                self._shelve(tick, entry, wanted)
            case Unshelve(alarm=alarm, by=by):
                self._unshelve(tick, alarm, by)
            case Confirm() as confirm:
                if confirm.trap in self.trap_names:
                    tick.state = self.taking.confirm(tick.state, confirm)
            case Service() as service:
                tick.state = self.taking.service(tick.state, service)
                tick.state = self.fitting_entries.service(tick.state, service)
                if service.what == "sensor replaced":
                    quality = forget(tick.state.quality, service.of)
                    tick.state = replace(tick.state, quality=quality)
                    tick.state = self.sensing.replaced(tick.state, service.of)
                compressor = service.what == "compressor serviced"
                followed = self.following.serviced(tick.state.followed, compressor)
                tick.state = replace(tick.state, followed=followed)
            case SaltCheck() as check:
                tick.state = self.sensing.salt_check(tick.state, check)
            case Gauge() as gauge:
                tick.state = self.outlet_entries.gauge(tick.state, gauge)
            case Blotter() as blotter:
                tick.state = self.outlet_entries.blotter(tick.state, blotter)

    def _drain(self, tick: _Tick, entry: Entry, drain: Drain) -> None:
        if drain.trap not in self.trap_names:
            return
        tick.marks.append(self._mark(tick.state, "drain", None, (drain.trap,)))
        tick.state = replace(tick.state, followed=self.following.before_drain(tick.state))
        tick.state = self.fitting_entries.drained(tick.state, drain)
        tick.state, learned = self.taking.drain(tick.state, entry, drain)
        followed = self.following.after_drain(tick.state, drain.trap)
        tick.state = replace(tick.state, followed=followed)
        if learned is not None:
            tick.learned.append(learned)
            tick.noted.append(Noted(drains=(DrainCheck.of(entry, learned),)))
        if drain.outcome == "partly":
            self._watch(tick)
            return
        # whoever opens the drain has seen that it was due, and need put it off no longer
        self._unshelve(tick, f"{drain.trap}-drain-due", drain.by)
        self._acknowledge(tick, f"{drain.trap}-drain-due", drain.by)
        self._watch(tick, drained=drain.trap)

    def _acknowledge(self, tick: _Tick, alarm: str, by: str) -> None:
        if alarm not in self.definitions:
            return
        record, transition = acknowledge(
            self.definitions[alarm], tick.state.alarms[alarm], tick.state.time_us, by
        )
        self._changed(tick, alarm, record, transition)

    def _shelve(self, tick: _Tick, entry: Entry, wanted: Shelve) -> None:
        definition = self.definitions.get(wanted.alarm)
        if definition is None:
            return
        longest_us = longest_shelved_us(definition)
        until_us = entry.at_us + min(round(wanted.for_s * 1e6), longest_us)
        text = shelved_words(self.site, until_us, entry.at_us, wanted.by)
        record, transition = shelve(
            definition, tick.state.alarms[wanted.alarm], entry.at_us, until_us, wanted.by, text
        )
        self._changed(tick, wanted.alarm, record, transition)

    def _unshelve(self, tick: _Tick, alarm: str, by: str) -> None:
        if alarm in self.definitions:
            standing = tick.state.alarms[alarm]
            self._changed(
                tick, alarm, *unshelve(self.definitions[alarm], standing, tick.state.time_us, by)
            )

    def _changed(
        self, tick: _Tick, alarm: str, record: AlarmRecord, transition: Transition | None
    ) -> None:
        tick.state = replace(tick.state, alarms={**tick.state.alarms, alarm: record})
        tick.transitions += [transition] if transition is not None else []

    def _watch(self, tick: _Tick, drained: str = "") -> None:
        tick.state = self.rules.margins.look(tick.state)
        alarms, transitions = self.rules.watch(tick.state, drained)
        tick.state = replace(tick.state, alarms=alarms)
        tick.transitions += transitions

    # ---- what is shown ----

    def _mark(
        self,
        state: CoreState,
        kind: Literal["hour", "drain"],
        hour: HourTotals | None,
        traps: Collection[str] | None = None,
    ) -> Mark:
        chosen = [n for n, name in enumerate(self.trap_names) if traps is None or name in traps]
        contents = self.model.contents(state.model)[self._trap_rows]
        return Mark(
            at_us=state.time_us,
            kind=kind,
            traps=tuple(self.trap_names[n] for n in chosen),
            kg=percentiles(contents[chosen]),
            probability_due=self.rules.probability_due(state)[chosen],
            hour=hour,
            outlets=self.outlet_views.marks(state) if kind == "hour" else (),
        )

    def final_mark(self, state: CoreState, leave_out: Collection[str]) -> Mark:
        """The traps and the unfinished hour as they stand now, for the end of a record."""
        shown_traps = [name for name in self.trap_names if name not in leave_out]
        return self._mark(state, "hour", state.hour, shown_traps)

    def heard_us(self, state: CoreState) -> int:
        """When a good reading was last heard, or the beginning."""
        return max(
            (c.time_us for c in state.channels.values() if c.time_us >= 0), default=(state.begun_us)
        )

    def views(self, state: CoreState) -> tuple[TrapView, ...]:
        """What is believed of every trap now."""
        contents = self.model.contents(state.model)[self._trap_rows]
        kg = percentiles(contents)
        probability = self.rules.probability_due(state)
        due = self.following.foreseen(state).traps
        return tuple(
            self._view(state, number, kg[:, number], float(probability[number]), due[number])
            for number in range(len(self.trap_names))
        )

    def _view(
        self, state: CoreState, number: int, kg: Array, probability: float, foreseen: Due
    ) -> TrapView:
        name, trap = self.trap_names[number], self._traps[number]
        station = self.model.plan.stations[self._trap_rows[number]]
        record = state.traps[name]
        by_calendar = record.calendar_due_us != NO_DATE
        calendar_now = by_calendar and state.time_us >= record.calendar_due_us
        due = state.alarms[f"{name}-drain-due"].raised
        because: Because | None = foreseen.because
        if calendar_now:
            because = "calendar"
        if due and probability >= 0.3 and not (calendar_now and probability < 0.5):
            because = "volume"
        return TrapView(
            trap=name,
            at_us=state.time_us,
            p05_kg=float(kg[0]),
            p50_kg=float(kg[1]),
            p95_kg=float(kg[2]),
            capacity_kg=trap.capacity.value,
            drain_at_kg=trap.drain_at_kg,
            probability_due=probability,
            due=due,
            because=because,
            due_at_us=record.calendar_due_us if by_calendar else None,
            since="start" if record.last_drain_us < 0 else "last drain",
            last_drain_us=None if record.last_drain_us < 0 else record.last_drain_us,
            due_p05_us=foreseen.p05_us,
            due_p50_us=foreseen.p50_us,
            due_p95_us=foreseen.p95_us,
            expected=expected_words(self.site, station, foreseen, float(kg[2]), state.time_us),
            chance_stuck=self.drains.chance_stuck(state.drains, name, state.time_us),
            questioned_kg=self.taking.questioned_kg(record),
        )

    def alarms(self, state: CoreState) -> list[Alarm]:
        """Every alarm as it stands."""
        return [shown(self.definitions[name], record) for name, record in state.alarms.items()]
