"""The live shell around `advance`: samples, advances, commits, tells the outside.

One thread ticks. Whatever comes from outside (API, MQTT, a shell command) is committed to the
journal at once by the thread that brings it, and taken in by the next tick.
"""

from __future__ import annotations

import logging
import threading
from collections.abc import Callable, Collection, Mapping, Sequence
from dataclasses import replace
from typing import Protocol

from daemon import accept, undoing
from daemon.advance import Core, Estimate
from daemon.alarms import Alarm, AlarmRecord, Transition, correction
from daemon.buttons import Buttons
from daemon.clock import HOUR_US, MINUTE_US, Clock, format_rfc3339
from daemon.counted import COUNTED_KEY, marked, notice_of
from daemon.dew_points import dew_point_views
from daemon.errors import JournalError, StoreError, UndoError
from daemon.foresight import Score
from daemon.going_back import Back, GoingBack, is_reckoned_with
from daemon.hour_figures import NOTHING, Noted, joined
from daemon.hours_left import hours_left
from daemon.journal import Body, Drain, Entry, Undo
from daemon.keys import KeyRing
from daemon.line_views import LineViews
from daemon.moisture.forecast import Due
from daemon.mqtt import MqttLink
from daemon.outbox import (
    Message,
    Topics,
    alarm_message,
    event_message,
    outlet_message,
    reminder_message,
    trap_message,
)
from daemon.plant_figures import plant_view
from daemon.recovery import Recovery
from daemon.reminders import Reminder
from daemon.site.types import Site
from daemon.state import CoreState, Inputs
from daemon.store.store import Store
from daemon.taking import learned_words, look_words
from daemon.ticks import first_at_or_after, ticks
from daemon.unset_clock import PATIENCE_S, HeldSamples, is_set
from daemon.views import (
    ChannelHealth,
    DewPointView,
    Health,
    OutletView,
    PlantView,
    Recorded,
    SeriesOfReadings,
    StationView,
    StepsOfReadings,
    TrapView,
)
from daemon.weekly.compute import week_log
from daemon.weekly.records import WeekLog
from daemon.weekly.rows import read_rows
from daemon.weekly.weeks import Week
from sensors.quality import Verdict
from sensors.reading import Reading
from sensors.sampling import HungBus

log = logging.getLogger("dripleg")

GRID_KEY = "grid_us"  # the time of the first tick ever
LATE_AFTER_PERIODS = 3  # without a tick for so long, health says so
MOST_WAITING = 100_000  # readings kept in memory while the store cannot take them
SAMPLE_SHARE = 0.4  # of a period that sampling may take
GO_BACK_SHARE = 0.05  # of a period that advancing again for a late entry may take


class Sampling(Protocol):
    """Where a tick's readings come from."""

    def sample(self, now_us: int, deadline_s: float) -> list[Reading]: ...

    def hung_buses(self) -> tuple[HungBus, ...]: ...


class Shell:
    """The running daemon. Implements `daemon.views.Running`."""

    def __init__(
        self,
        site: Site,
        clock: Clock,
        sampler: Sampling,
        store: Store,
        topics: Topics | None = None,
    ) -> None:
        self._site, self._clock, self._sampler, self._store = site, clock, sampler, store
        self._topics = topics
        self.core = Core(site)
        self._buttons = Buttons(site)
        self._keys = KeyRing(store, clock)
        self._line_views = LineViews(site, self.core.model)
        self.late_after_us = LATE_AFTER_PERIODS * self.core.model.period_us
        self.link: MqttLink | None = None
        self.signal_problem: Callable[[], str] = lambda: ""  # of the lamp or buzzer
        self.on_entry: Callable[[Entry], None] | None = None  # told of what was committed
        self._recovery = Recovery(self.core, store)
        self._lock = threading.RLock()
        self._state: CoreState | None = None
        self._grid_us = 0
        self._shown: tuple[TrapView, ...] = ()
        self._counted_from_us: int | None = None  # nothing could be read of what was before
        self._estimate: Estimate | None = None  # what was shown last, for whoever asks more
        self._outlets_told_us = -1
        self._pending: list[Entry] = []  # committed, not yet taken in
        self._waiting: list[Reading] = []  # sampled while no tick was due
        self._started_us = clock.now_us()
        self._going: GoingBack | None = None  # for late entries that are not reckoned with yet
        self._going_for: set[int] = set()  # their numbers
        self._undone_us: int | None = None  # of the earliest drain that the state should not know
        self._went_back = False  # since the last commit: checkpoints after it are wrong
        self._noted_back: list[Noted] = []  # for the weekly log, gathered anew and not committed
        self._renewed_us: int | None = None  # what was noted after that time is replaced
        self._announced: dict[str, AlarmRecord] = {}  # alarms as told before we went back
        self._alarms_told: dict[str, Alarm] = {}  # as the link keeps them for a new connection
        self._ticks = 0
        self._problems: dict[str, str] = {}
        self._ticked_us = -1

    # ---- life ----

    def recover(self) -> None:
        """Come back from the last checkpoint and the inputs after it, to the same bits."""
        # the clock may have been set back meanwhile: what is stored has happened all the same
        self._ticked_us = self._store.last_tick_us or -1
        grid = self._store.get_meta(GRID_KEY)
        if grid is None:
            return
        self._look_up_counted()
        self._grid_us = int(grid)
        started = self._recovery.start(self._grid_us, self._ticked_us)
        back = started.back
        if back is None:
            return
        self._take_back(back)
        self._pending += started.late
        self._undone_us = started.undone_us
        if back.rewritten:
            self._announced = self._as_announced(back.state)
        with self._lock:
            self._show(Estimate(self.core, back.state))
            self._tell_counted()
        log.info("came back to %s", format_rfc3339(back.state.time_us))

    def _look_up_counted(self) -> None:
        """Since when contents are counted, where that is not since the record began."""
        found = self._store.get_meta(COUNTED_KEY)
        self._counted_from_us = None if found is None else int(found)

    def _tell_counted(self) -> None:
        if told := notice_of(self._site, self._shown):
            log.warning("%s", told)

    def run(self, stop: threading.Event) -> None:
        """Tick until told to stop; then leave a checkpoint.

        Waiting is on the monotonic clock and never longer than a period, so that a wall clock
        that is set back does not stop the sampling.
        """
        period_s = self.core.model.period_us / 1e6
        self._wait_for_the_clock(stop)
        while not stop.is_set():
            due_us = self._next_due_us()
            wait_s = (due_us - self._clock.now_us()) / 1e6
            if self._clock.wait(min(max(wait_s, 0.0), period_s), stop):
                break
            self.tick(due_us)
        self.checkpoint()

    def _wait_for_the_clock(self, stop: threading.Event) -> None:
        """Sample, but make no tick, while the clock cannot be right; for ten minutes at most."""
        period_us = self.core.model.period_us
        held, begun_s = HeldSamples(period_us), self._clock.monotonic()
        while not is_set(self._clock.now_us()):
            now_us, now_s = self._clock.now_us(), self._clock.monotonic()
            self._problems["clock"] = (
                f"the clock is not set: it says {format_rfc3339(now_us)}. Readings wait until a "
                "time server has answered, or somebody sets the clock"
            )
            if now_s - begun_s > PATIENCE_S or stop.is_set():
                break
            if not held.samples:
                log.warning("%s", self._problems["clock"])
            stamp_us = held.stamp_us(now_us)
            readings = self._sampler.sample(stamp_us, SAMPLE_SHARE * period_us / 1e6)
            held.add(now_s, stamp_us, readings)
            if self._clock.wait(period_us / 1e6, stop):
                break
        if is_set(self._clock.now_us()):
            self._problems.pop("clock", None)
        for at_us, readings in held.told(self._clock.monotonic(), self._clock.now_us()):
            if at_us > self._ticked_us:
                self._tick_with(at_us, readings)

    def _next_due_us(self) -> int:
        """The next point of the grid: after the last tick, and not more than a period ago."""
        now_us = self._clock.now_us()
        period_us = self.core.model.period_us
        if self._state is None:  # the grid begins on a whole period, and so meets full hours
            return first_at_or_after(0, period_us, max(now_us, self._ticked_us + 1))
        last_us = max(self._state.time_us, self._ticked_us)
        due_us = first_at_or_after(self._grid_us, period_us, max(last_us + 1, now_us - period_us))
        behind = due_us - now_us > 2 * period_us
        if behind and "clock" not in self._problems:
            log.warning("the clock went back to %s", format_rfc3339(now_us))
            self._problems["clock"] = (
                f"the clock was set back to {format_rfc3339(now_us)}; readings go on counting from "
                f"{format_rfc3339(last_us)} until it has caught up"
            )
        elif not behind:
            self._problems.pop("clock", None)
        return due_us

    def checkpoint(self) -> None:
        """Keep the state as it is now, if it knows of all that was recorded before it: a start
        takes that for granted."""
        with self._lock:
            state = self._state
            if state is None or not self._knows_all:
                return
            if not any(entry.at_us <= state.time_us for entry in self._pending):
                self._store.save_checkpoint(state.time_us, self._recovery.blob(state))

    # ---- one tick ----

    def tick(self, now_us: int) -> None:
        """Sample, advance to `now_us`, commit, tell."""
        deadline_s = SAMPLE_SHARE * self._site.sample_every_us / 1e6
        self._tick_with(now_us, self._sampler.sample(now_us, deadline_s))

    def _tick_with(self, now_us: int, readings: Sequence[Reading]) -> None:
        with self._lock:
            self._ticked_us = now_us
            try:
                self._take_in(now_us, list(readings))
            except StoreError as error:
                if "store" not in self._problems:
                    log.error("tick %s was not committed: %s", format_rfc3339(now_us), error)
                self._problems["store"] = f"readings wait in memory: {error}"
            else:
                self._problems.pop("store", None)

    def _take_in(self, now_us: int, readings: list[Reading]) -> None:
        if self._state is not None and is_set(now_us) > is_set(self._state.time_us):
            # nothing of the decades between is true: begin again, with what is known
            log.warning("the clock was set: it says %s", format_rfc3339(now_us))
            self._problems.pop("clock", None)
            self.checkpoint()
            self._state = None
        if self._state is None:
            self._begin(now_us, readings)
            return
        after_us = self._state.time_us
        readings = [
            each if each.time_us > after_us else replace(each, time_us=after_us + 1)
            for each in self._waiting + readings
        ]
        readings = sorted(readings, key=lambda each: each.time_us)[-MOST_WAITING:]
        self._waiting = readings  # until they are committed
        self._record_presses(self._state, readings)
        self._go_back_for_late_entries()
        state = self._state
        transitions = self._corrections(state, now_us)
        entries = [e for e in self._pending if state.time_us < e.at_us <= now_us]
        entries.sort(key=lambda entry: (entry.at_us, entry.seq))
        estimate: Estimate | None = None
        judged: list[Reading] = []
        verdicts: list[Verdict] = []
        reminders: list[Reminder] = []
        noted = [*self._noted_back]
        for each in ticks(
            self._grid_us,
            self.core.model.period_us,
            state.time_us,
            self.core.heard_us(state),
            readings,
            entries,
            now_us,
        ):
            if each.now_us > now_us:
                return  # nothing good was heard for a day: the next tick stands at the full hour
            state, estimate, changed = self.core.advance(state, each.now_us, each.inputs)
            transitions += changed
            judged += estimate.readings
            verdicts += estimate.verdicts
            reminders += estimate.reminders
            noted += [estimate.noted] if estimate.noted else []
            for problem in estimate.problems:
                log.error("%s", problem)
                self._problems["balance"] = problem
        if estimate is None:
            return
        self._commit(
            state,
            judged,
            entries,
            transitions,
            reminders=reminders,
            checkpoint=self._went_back,
            noted=noted,
        )
        _log_verdicts(verdicts)
        self._waiting, self._announced, self._went_back = [], {}, False
        self._noted_back, self._renewed_us = [], None
        # an entry may be later than this tick, which took its time: it stays in sight
        self._show(self._with_pending(state, self._clock.now_us()) or estimate)

    def _record_presses(self, state: CoreState, readings: Sequence[Reading]) -> None:
        """Commit a drain for every press of a "drained" button, before the tick that takes it."""
        for press in self._buttons.presses(readings, state.channels):
            try:
                recorded = self.record(press.drain, press.at_us, press.key)
            except JournalError as error:
                log.warning("%s was pressed, but: %s", press.channel, error)
            else:
                if not recorded.repeated:
                    log.info("%s was pressed: %s was drained", press.channel, press.trap)

    def _begin(self, now_us: int, readings: list[Reading]) -> None:
        at_now = [each for each in readings if each.time_us == now_us]
        self._going = self._undone_us = None
        state, first, transitions = self._recovery.begin(now_us, at_now)
        self._look_up_counted()
        # what was recorded before the first tick: nothing of that time is known, so it counts now
        entries = [entry for entry in self._pending if entry.at_us <= now_us]
        state, estimate, changed = self.core.take(state, entries)
        self._grid_us = now_us
        self._store.set_meta(GRID_KEY, str(now_us))
        self._commit(
            state,
            first.readings,
            entries,
            transitions + changed,
            checkpoint=True,
            noted=[first.noted, estimate.noted],
        )
        self._show(estimate)
        self._tell_counted()

    def _commit(
        self,
        state: CoreState,
        readings: Sequence[Reading],
        entries: Sequence[Entry],
        transitions: Sequence[Transition],
        reminders: Sequence[Reminder] = (),
        checkpoint: bool = False,
        noted: Sequence[Noted] = (),
    ) -> None:
        before_us = self._state.time_us if self._state is not None else state.time_us
        drained = any(isinstance(entry.body, Drain) for entry in entries)
        full_hour = state.time_us // HOUR_US != before_us // HOUR_US
        blob = None
        if self._knows_all and (checkpoint or drained or full_hour):
            blob = self._recovery.blob(state)
        messages = self._messages(transitions, reminders)
        self._store.commit_tick(
            state.time_us,
            readings,
            transitions,
            messages,
            blob,
            joined(noted) if noted else NOTHING,
            self._renewed_us,
        )
        taken = {entry.seq for entry in entries}
        self._pending = [entry for entry in self._pending if entry.seq not in taken]
        self._state = state
        self._ticks += 1
        for each in transitions:
            log.info("%s: %s -> %s. %s", each.alarm, each.before, each.after, each.text)
        for reminder in reminders:
            log.info("%s: %s", reminder.turn, reminder.text)
        if messages and self.link is not None:
            self.link.wake()

    def _messages(
        self, transitions: Sequence[Transition], reminders: Sequence[Reminder]
    ) -> list[Message]:
        """What must not be lost. States are told apart: of them only the newest counts."""
        if self._topics is None:
            return []
        topics = self._topics
        return [
            *(event_message(topics, each) for each in transitions),
            *(reminder_message(topics, each) for each in reminders),
        ]

    def _show(self, estimate: Estimate) -> None:
        self._shown, self._estimate = marked(estimate.traps, self._counted_from_us), estimate
        if self.link is None or self._topics is None:
            return
        messages = [trap_message(self._topics, view) for view in self._shown]
        for alarm in self.core.alarms(estimate.state):
            if self._alarms_told.get(alarm.id) != alarm:
                self._alarms_told[alarm.id] = alarm
                messages.append(alarm_message(self._topics, alarm))
        if estimate.at_us // MINUTE_US != self._outlets_told_us // MINUTE_US:
            # margins cost more than traps to reckon, and change slowly
            self._outlets_told_us = estimate.at_us
            messages += [outlet_message(self._topics, view) for view in estimate.outlets]
        self.link.publish_states(messages)

    # ---- going back ----

    @property
    def _knows_all(self) -> bool:
        """Whether the state knows of every late entry, and of no drain that was undone."""
        return self._going is None and self._undone_us is None

    def _go_back_for_late_entries(self) -> None:
        """Entries dated before the last tick, or drains from before it that were undone: advance
        again from the checkpoint before them.

        As long as that takes, ticks go on as if they had not been recorded, or not undone.
        """
        state = self._state
        assert state is not None
        late = [entry for entry in self._pending if entry.at_us <= state.time_us]
        if not late and self._undone_us is None:
            self._going = None
            return
        usable = [entry for entry in late if is_reckoned_with(entry)]
        for entry in late:
            if entry not in usable:
                log.warning("entry %d is more than 7 days old: kept, not reckoned with", entry.seq)
        going = self._on_the_way(usable, state.time_us)
        back = None
        if going is not None:
            end_s = self._clock.monotonic() + GO_BACK_SHARE * self.core.model.period_us / 1e6
            back = going.go_on(state.time_us, lambda: self._clock.monotonic() < end_s)
        if back is None:
            waiting = usable if going is not None else []
            later = [entry for entry in self._pending if entry.at_us > state.time_us]
            self._pending = waiting + later
            if going is None:
                self._undone_us = None  # nothing can be done about it
            return
        self._undone_us = None
        self._take_back(back)
        self._announced = {**state.alarms, **self._announced}

    def _on_the_way(self, late: Sequence[Entry], time_us: int) -> GoingBack | None:
        """Back to before these entries, or on from where the tick before had come to."""
        times_us = [entry.at_us for entry in late]
        times_us += [] if self._undone_us is None else [self._undone_us]
        if not times_us:
            self._going = None
            return None
        new = [entry for entry in late if entry.seq not in self._going_for]
        going = self._going
        if going is None or any(entry.at_us <= going.reached_us for entry in new):
            earliest_us = min(times_us)
            going = self._recovery.going_back(self._grid_us, time_us, earliest_us)
            if going is None:
                log.warning("nothing to go back to before %s", format_rfc3339(earliest_us))
        self._going, self._going_for = going, {entry.seq for entry in late}
        return going

    def _corrections(self, state: CoreState, now_us: int) -> list[Transition]:
        """What was announced stays; where it no longer holds, a correction follows."""
        return [
            correction(self.core.definitions[name], was, state.alarms[name], now_us)
            for name, was in self._announced.items()
            if was.state != state.alarms[name].state
        ]

    def _take_back(self, back: Back) -> None:
        self._state, self._pending, self._going = back.state, back.pending, None
        self._went_back = self._went_back or back.rewritten
        self._noted_back.append(back.noted)
        renewed_us = back.from_us if self._renewed_us is None else self._renewed_us
        self._renewed_us = min(renewed_us, back.from_us)

    def _as_announced(self, state: CoreState) -> dict[str, AlarmRecord]:
        """Every alarm as the outside was told before a stop."""
        told = {each.alarm: each for each in self._store.transitions(0, state.time_us + 1)}
        return {
            name: AlarmRecord(told[name].after) if name in told else AlarmRecord()
            for name in state.alarms
        }

    # ---- what the outside asks (any thread) ----

    @property
    def site(self) -> Site:
        return self._site

    @property
    def clock(self) -> Clock:
        return self._clock

    @property
    def keys(self) -> KeyRing:
        return self._keys

    def traps(self) -> Sequence[TrapView]:
        with self._lock:
            return self._shown

    def outlets(self) -> Sequence[OutletView]:
        with self._lock:
            return () if self._estimate is None else self._estimate.outlets

    def dew_points(self) -> Sequence[DewPointView]:
        with self._lock:
            state = self._state
        if state is None:
            return ()
        return tuple(dew_point_views(self.core.model, self.core.rules.contradictions, state))

    def stations(self) -> Sequence[StationView]:
        with self._lock:
            state = self._state
        return () if state is None else self._line_views.all(state)

    def margin(self, outlet: str, surface_k: float) -> OutletView | None:
        with self._lock:
            return None if self._estimate is None else self._estimate.margin(outlet, surface_k)

    def reminders(self) -> Sequence[Reminder]:
        """The last few, oldest first."""
        with self._lock:
            return () if self._state is None else self._state.followed.reminders.recent

    def plant(self) -> PlantView | None:
        """What closed hours have told of the plant; None until the first tick."""
        with self._lock:
            return None if self._state is None else plant_view(self._site, self._state)

    def supplies(self) -> Mapping[str, Due]:
        """By station: when its desiccant or ice is expected to be used up."""
        with self._lock:
            if self._state is None:
                return {}
            return self.core.following.foreseen(self._state).supplies

    def hours_left(self) -> Mapping[str, Mapping[str, float | None]]:
        """By station: how long its desiccant or ice lasts as it is used now."""
        with self._lock:
            return {} if self._state is None else hours_left(self.core.model, self._state.model)

    def forecast_scores(self) -> Sequence[Score]:
        """What was reached of late, and what had been foreseen at least a day ahead."""
        with self._lock:
            return () if self._state is None else self._state.followed.foresight.scores

    def alarms(self) -> Sequence[Alarm]:
        with self._lock:
            return [] if self._estimate is None else self.core.alarms(self._estimate.state)

    def record(self, body: Body, at_us: int | None = None, key: str = "") -> Recorded:
        if isinstance(body, Undo):
            return self._undo(body)
        with self._lock:
            now_us = max(self._clock.now_us(), self._ticked_us)
            begun_us, when_us = self._grid_us, at_us
            if self._state is None:
                begun_us = now_us
            elif at_us is None:  # a tick may have gone on while we waited for it
                when_us = max(now_us, self._state.time_us + 1)
            when_us = now_us if when_us is None else when_us
            accept.check(self._site, body, when_us, now_us, begun_us)
            recorded = self._store.add_entry(body, when_us, now_us, key)
            if not recorded.repeated:
                self._pending.append(recorded.entry)
                said = [self._preview(recorded.entry, max(now_us, when_us))]
                said += [look_words(body)] if isinstance(body, Drain) else []
                recorded = replace(recorded, said=" ".join(filter(None, said)))
        if not recorded.repeated and self.on_entry is not None:
            self.on_entry(recorded.entry)
        return recorded

    def _undo(self, undo: Undo) -> Recorded:
        """Take back a drain: go back to before it, and advance again without it.

        At once where that is quick; what takes longer goes on beside the ticks.
        """
        with self._lock:
            state, now_us = self._state, max(self._clock.now_us(), self._ticked_us)
            accept.check(self._site, undo, now_us, now_us, now_us)
            done = self._store.undoings().get(undo.entry)
            if done is not None:
                undoing.check(undo, self._store.entry(undo.entry), done.written_us)
                return Recorded(done, repeated=True)
            drain = undoing.check(undo, self._store.entry(undo.entry), now_us)
            taken_in = state is not None and drain.at_us <= state.time_us
            if taken_in and not self._recovery.reaches(drain.at_us):
                raise UndoError(
                    "dripleg keeps nothing from before it (the record began with it, or the line's "
                    f"description was changed): drain {undo.trap} again and record what came"
                )
            at_us = now_us if state is None else max(now_us, state.time_us + 1)
            recorded = self._store.add_entry(undo, at_us, now_us)
            self._without(drain, now_us)
        if self.on_entry is not None:
            self.on_entry(recorded.entry)
        return recorded

    def _without(self, drain: Entry, now_us: int) -> None:
        """The state and what is shown of it, as if a drain had not been recorded."""
        waiting = [entry for entry in self._pending if entry.seq != drain.seq]
        state = self._state
        if len(waiting) < len(self._pending) or state is None:
            self._pending, self._going = waiting, None  # no tick had taken it in
        elif is_reckoned_with(drain):
            undone_us = drain.at_us if self._undone_us is None else self._undone_us
            self._undone_us = min(undone_us, drain.at_us)
            if self._going is not None and drain.at_us <= self._going.reached_us:
                self._going = None
            self._go_back_for_late_entries()
        if self._state is not None:
            shown = self._with_pending(self._state, now_us) or Estimate(self.core, self._state)
            self._outlets_told_us = -1
            self._show(shown)

    def _preview(self, entry: Entry, now_us: int) -> str:
        """Show at once what an entry will do, without keeping it: the next tick does that.

        Gives what will be learned from it, in words.
        """
        state = self._state
        if state is None or entry.at_us <= state.time_us:
            return ""
        estimate = self._with_pending(state, now_us)
        assert estimate is not None  # the entry itself is pending
        self._shown, self._estimate = marked(estimate.traps, self._counted_from_us), estimate
        self._outlets_told_us = -1  # what was told of them may have changed
        trap = entry.body.trap if isinstance(entry.body, Drain) else ""
        learned = [
            each for each in estimate.learned if (each.at_us, each.trap) == (entry.at_us, trap)
        ]
        last_us = state.traps[trap].last_drain_us if trap else -1
        return " ".join(learned_words(self._site, each, last_us) for each in learned)

    def _with_pending(self, state: CoreState, now_us: int) -> Estimate | None:
        """What the entries that no tick has taken in yet will do; None without any."""
        entries = [each for each in self._pending if state.time_us < each.at_us <= now_us]
        if not entries:
            return None
        _, estimate, _ = self.core.advance(state, now_us, Inputs((), entries))
        return estimate

    def drains(self, trap: str, from_us: int, to_us: int) -> Sequence[Entry]:
        return self._store.entries(from_us=from_us, to_us=to_us, trap=trap, every=True)

    def undoings(self) -> Mapping[int, Entry]:
        return self._store.undoings()

    def readings(self, channel: str, from_us: int, to_us: int) -> SeriesOfReadings:
        return self._store.readings(channel, from_us, to_us)

    def reading_steps(
        self, channel: str, from_us: int, to_us: int, step_us: int
    ) -> StepsOfReadings:
        return self._store.steps(channel, from_us, to_us, step_us)

    def week(self, week: Week) -> WeekLog:
        rows = read_rows(self._store, week, self._site, self._clock.now_us())
        return week_log(self._site, rows)

    def health(self) -> Health:
        now_us = self._clock.now_us()
        with self._lock:
            state = self._state
            problems = list(self._problems.values())
            channels = self._channel_health(state)
        limit_us = self.late_after_us
        last_us = None if state is None else state.time_us
        if last_us is None:
            if now_us - self._started_us > limit_us:
                problems.append("no tick has been made yet")
        elif now_us - last_us > limit_us:
            problems.append(f"the last tick was at {format_rfc3339(last_us)}")
        problems += [
            f"{bus.name} has not answered since {format_rfc3339(bus.since_us)}"
            for bus in self._sampler.hung_buses()
        ]
        problems += [f"{c.channel}: {c.fault}" for c in channels if c.fault]
        problems += [problem] if (problem := self.signal_problem()) else []
        problems += self._sensor_problems(state, {c.channel for c in channels if c.fault})
        return Health(
            ok=not problems,
            at_us=now_us,
            started_us=self._started_us,
            last_tick_us=last_us,
            ticks=self._ticks,
            channels=tuple(channels),
            mqtt="off" if self.link is None else self.link.status,
            outbox_waiting=self._store.outbox_waiting(),
            problems=tuple(problems),
        )

    def _sensor_problems(self, state: CoreState | None, faulty: Collection[str]) -> list[str]:
        """Sensors whose alarm stands though every channel answers: silent, or contradicting."""
        told = {name.rpartition(".")[0] for name in faulty}
        return [
            record.text
            for name, record in (state.alarms.items() if state is not None else ())
            if (one := self.core.definitions[name]).kind == "sensor-fault"
            and record.raised
            and one.source not in told
        ]

    def _channel_health(self, state: CoreState | None) -> list[ChannelHealth]:
        if state is None:
            return [ChannelHealth(name, None, None, "nothing yet") for name in self._site.channels]
        found = []
        for name, record in state.channels.items():
            known = record.time_us >= 0
            fault = record.fault or ("" if known else "nothing yet")
            found.append(
                ChannelHealth(
                    name,
                    record.time_us if known else None,
                    record.value if known else None,
                    fault,
                )
            )
        return found


def _log_verdicts(verdicts: Sequence[Verdict]) -> None:
    for each in verdicts:
        detail = f" ({each.detail})" if each.detail else ""
        if each.began:
            log.warning("%s: %s%s", each.channel, each.reason, detail)
        else:
            log.info("%s: is believed again, after: %s", each.channel, each.reason)
