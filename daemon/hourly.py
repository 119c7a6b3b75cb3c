"""Gathers what the weekly log needs of every hour, beside the water. Pure.

From tick to tick this costs a few microseconds. What costs is done every ten minutes while the
shop is open (the outlets are looked at, for the time since the last look) and at full hours.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace

import numpy as np

from daemon.clock import HOUR_US, SECOND_US
from daemon.foresight import Foresight
from daemon.hour_figures import (
    CANNOT_TELL,
    DRAWN,
    ON,
    ON_OPEN,
    USED,
    WATER_IN,
    DayMembers,
    Forecast,
    HourFigures,
    HourTally,
    Leak,
    Least,
    Noted,
    OutletHour,
    OutletTally,
    shed_of,
)
from daemon.moisture.contact import STALE_AFTER_PERIODS
from daemon.moisture.ensemble import Array, percentiles, spread
from daemon.moisture.model import Model, Moved, State
from daemon.outlet_alarms import LOOK_EVERY_US
from daemon.outlets import OutletNote, OutletViews
from daemon.plant_figures import YEAR_WEEKS, plant_view
from daemon.site import hours as opening
from daemon.site.types import Site
from daemon.state import ChannelRecord, CoreState
from daemon.views import Interval


class Hourly:
    """Gathers for one site."""

    def __init__(self, site: Site, model: Model, outlets: OutletViews) -> None:
        self.site, self.model, self.outlets = site, model, outlets
        self._traps = [(model.plan.stations[row].id, row) for row in model.plan.traps]
        self._stale_us = STALE_AFTER_PERIODS * model.period_us

    def begun(
        self, model: State, day: str = "", sums: Mapping[str, Array] | None = None
    ) -> HourTally:
        """An hour begins with this state of the model."""
        return HourTally(
            from_us=model.time_us,
            water_in_kg=model.ledger.water_in,
            shed_kg=model.ledger.shed,
            on_open_s=np.zeros(self.site.line.members),
            is_open=opening.is_open(self.site.hours, self.site.timezone, model.time_us),
            looked_us=model.time_us,
            day=day,
            day_sums=sums or {},
        )

    # ---- tick by tick ----

    def step(
        self, state: CoreState, until_us: int, moved: Moved, is_open: bool, heard: bool
    ) -> HourTally:
        """After the model's step to a time; `heard`: its tick had readings, good or bad.

        Nobody watched a tick in which no part of any kind said anything, nor a step longer than a
        channel may be silent for.
        """
        tally = state.hourly if state.hourly is not None else self.begun(state.model)
        dt_us = until_us - state.time_us
        if dt_us > self._stale_us or not heard:
            return tally if tally.is_open == is_open else replace(tally, is_open=is_open)
        faults = tally.faults_us
        for name, record in state.channels.items():
            if record.fault or self._silent(record, state, until_us):
                faults = {**faults, name: faults.get(name, 0) + dt_us}
        watched_us = tally.watched_us + dt_us
        if not tally.is_open:
            return replace(tally, is_open=is_open, watched_us=watched_us, faults_us=faults)
        return replace(
            tally,
            is_open=is_open,
            watched_us=watched_us,
            open_us=tally.open_us + dt_us,
            on_open_s=tally.on_open_s + moved.on_s,
            faults_us=faults,
        )

    def _silent(self, record: ChannelRecord, state: CoreState, until_us: int) -> bool:
        since_us = max(record.heard_us, state.begun_us)
        return until_us - since_us > self._stale_us and not record.only_edges

    # ---- every ten minutes ----

    def look(self, state: CoreState) -> CoreState:
        """Look at the outlets where it is time; it speaks for the open time since the last look."""
        tally = state.hourly
        if tally is None or state.time_us // LOOK_EVERY_US == tally.looked_us // LOOK_EVERY_US:
            return state
        pending_us = tally.open_us - tally.counted_us
        outlets = dict(tally.outlets)
        if pending_us > 0:
            for outlet, note in self.outlets.notes(state):
                before = outlets.get(outlet, OutletTally())
                outlets[outlet] = _told(before, note, pending_us, state.time_us)
        tally = replace(tally, looked_us=state.time_us, counted_us=tally.open_us, outlets=outlets)
        return replace(state, hourly=tally)

    # ---- journal entries ----

    def settled(self, state: CoreState) -> CoreState:
        """Before an entry that may change what is believed: book what was shed until now."""
        tally = state.hourly
        if tally is None:
            return state
        shed = state.model.ledger.shed
        booked = {**tally.settled, **self._shed(tally, state.model)}
        return replace(state, hourly=replace(tally, shed_kg=shed, settled=booked))

    def _shed(self, tally: HourTally, model: State) -> dict[str, Array]:
        """What each trap was given in the hour, as its round believes it, kg, (members,)."""
        found = {}
        for name, row in self._traps:
            given = model.ledger.shed[row] - tally.shed_kg[row]
            shed = given * model.parameters.round_factor[row]
            before = tally.settled.get(shed_of(name))
            found[shed_of(name)] = shed if before is None else shed + before
        return found

    # ---- full hours ----

    def close(self, state: CoreState) -> tuple[CoreState, HourFigures, DayMembers] | None:
        """At a full hour: its figures, the day's so far, and a new hour in the state."""
        tally = state.hourly
        if tally is None:
            return None
        hour_us = state.time_us - HOUR_US
        totals = self._totals(tally, state)
        day = opening.local_day(self.site.timezone, hour_us).isoformat()
        sums = totals
        if day == tally.day:
            sums = {n: _plus(tally.day_sums.get(n), values) for n, values in totals.items()}
            sums = {**tally.day_sums, **sums}
        rows = percentiles(np.stack(list(totals.values()))).T.tolist()
        figures = HourFigures(
            hour_us=hour_us,
            from_us=max(tally.from_us, hour_us),
            watched_s=tally.watched_us / SECOND_US,
            open_s=tally.open_us / SECOND_US,
            totals={name: tuple(row) for name, row in zip(totals, rows, strict=True)},
            outlets={name: _kept(each) for name, each in tally.outlets.items()},
            faults_s={name: us / SECOND_US for name, us in tally.faults_us.items()},
            leak=self._leak(state),
        )
        fresh = replace(state, hourly=self.begun(state.model, day, sums))
        return fresh, figures, DayMembers(day, sums)

    def _totals(self, tally: HourTally, state: CoreState) -> dict[str, Array]:
        moved = _moved(tally, state)
        totals = {name: _plus(tally.settled.get(name), each) for name, each in moved.items()}
        return {**totals, **self._shed(tally, state.model)}

    def _leak(self, state: CoreState) -> Leak | None:
        if state.followed.plant.leak_kg_per_s is None:
            return None
        view = plant_view(self.site, state)
        flow, energy, cost = view.leak_m3_per_s, view.leak_kwh_per_year, view.leak_cost_per_year
        if flow is None or energy is None or view.leak_at_us is None:
            return None
        return Leak(
            view.leak_at_us,
            flow.values,
            _a_week(energy),
            None if cost is None else _a_week(cost),
        )

    # ---- a changed description of the line ----

    def carried_over(self, fresh: CoreState, old: CoreState) -> HourTally:
        """What was gathered before goes on, where it was gathered in the same hour or day."""
        tally = self.begun(fresh.model)
        was = old.hourly
        if was is None:
            return tally
        members = self.site.line.members
        known = {WATER_IN, DRAWN, USED, ON, ON_OPEN, *(shed_of(name) for name, _ in self._traps)}
        tally = replace(tally, day=was.day, day_sums=_spread(was.day_sums, known, members))
        if old.time_us // HOUR_US != fresh.time_us // HOUR_US:
            return tally
        totals = _totals_before(old, was)
        return replace(
            tally,
            from_us=was.from_us,
            settled=_spread(totals, known, members),
            watched_us=was.watched_us,
            open_us=was.open_us,
            counted_us=was.counted_us,
            faults_us=was.faults_us,
            outlets=was.outlets,
        )


def _moved(tally: HourTally, state: CoreState) -> dict[str, Array]:
    """What has moved since the hour began, traps apart, by name."""
    hour = state.hour
    return {
        WATER_IN: state.model.ledger.water_in - tally.water_in_kg,
        DRAWN: hour.drawn_kg,
        USED: hour.used_kg,
        ON: hour.on_s,
        ON_OPEN: tally.on_open_s,
    }


def _totals_before(old: CoreState, was: HourTally) -> dict[str, Array]:
    """The unfinished hour of a state whose line was described otherwise, by name."""
    moved, ledger = _moved(was, old), old.model.ledger
    factor = old.model.parameters.round_factor
    for row, station in enumerate(old.stations):
        moved[shed_of(station)] = (ledger.shed[row] - was.shed_kg[row]) * factor[row]
    return {name: _plus(was.settled.get(name), each) for name, each in moved.items()}


def _spread(totals: Mapping[str, Array], known: set[str], members: int) -> dict[str, Array]:
    return {name: spread(each, members) for name, each in totals.items() if name in known}


def _plus(before: Array | None, values: Array) -> Array:
    return values if before is None else before + values


def _told(tally: OutletTally, note: OutletNote, us: int, at_us: int) -> OutletTally:
    found = note.humidity_class or CANNOT_TELL
    return OutletTally(
        {**tally.verdict_us, note.verdict: tally.verdict_us.get(note.verdict, 0) + us},
        {**tally.class_us, found: tally.class_us.get(found, 0) + us},
        _less(tally.line, note.line_margin_k, at_us, note.coldest),
        _less(tally.surface, note.surface_margin_k, at_us, ""),
    )


def _less(before: Least | None, now: Interval | None, at_us: int, place: str) -> Least | None:
    """The lesser of two by what verdicts go by, the 5 % end."""
    if now is None or (before is not None and before.p05_k <= now.p05):
        return before
    return Least(at_us, now.p05, now.p50, now.p95, place)


def _kept(tally: OutletTally) -> OutletHour:
    return OutletHour(
        {name: us / SECOND_US for name, us in tally.verdict_us.items()},
        {name: us / SECOND_US for name, us in tally.class_us.items()},
        tally.line,
        tally.surface,
    )


def noted_ahead(traps: Sequence[str], was: Foresight, now: Foresight) -> Iterator[Noted]:
    """Forecasts that were kept, and those that were scored, between two states."""
    last_us = was.kept[-1].at_us if was.kept else -1
    made = [kept for kept in now.kept if kept.at_us > last_us]
    if made:
        yield Noted(
            forecasts=tuple(
                Forecast(kept.at_us, trap, *due)
                for kept in made
                for trap, due in zip(traps, kept.due_us, strict=True)
            )
        )
    if (count := now.scored - was.scored) > 0:
        yield Noted(scores=tuple(now.scores[-count:]))


def _a_week(a_year: Interval) -> tuple[float, float, float]:
    low, middle, high = a_year.values
    return low / YEAR_WEEKS, middle / YEAR_WEEKS, high / YEAR_WEEKS
