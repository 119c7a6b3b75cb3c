"""Which alarms a site can raise, and what each one watches."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

import numpy as np

from daemon.alarms import AlarmDefinition, AlarmRecord, Condition, Transition, watch
from daemon.channel_faults import doubt_of, fault_of
from daemon.clock import DAY_US, MINUTE_US
from daemon.contradictions import Contradictions
from daemon.due import NO_DATE, condition, due_words
from daemon.fitting_alarms import FittingAlarms
from daemon.moisture import salt
from daemon.moisture.contact import STALE_AFTER_PERIODS
from daemon.moisture.ensemble import Array, percentiles
from daemon.moisture.model import Model
from daemon.outlet_air import OutletAir
from daemon.outlet_alarms import MarginAlarms
from daemon.plant_alarms import PlantAlarms
from daemon.site.types import Site
from daemon.state import CoreState
from daemon.unset_clock import is_set

DUE_ON_DELAY_US = 2 * MINUTE_US
SALT_CHECK_EVERY_US = 91 * DAY_US  # three months
CLOCK_NOT_SET = "clock-not-set"
FLOODED_RAISED_AT, FLOODED_RETURNS_BELOW = 0.5, 0.3

# An alarm's definition, what its condition says now, and the words for it.
Watched = tuple[AlarmDefinition, Condition, str]


class AlarmRules:
    """The alarms of one site. Pure: everything they look at is in the state."""

    def __init__(self, site: Site, model: Model) -> None:
        self.site, self.model = site, model
        self._names = site.traps
        self.trap_rows = list(model.plan.traps)
        self._traps = [t for s in model.plan.stations if (t := s.trap) is not None]
        self.drain_at_kg = np.array([trap.drain_at_kg for trap in self._traps])
        self._sensors: dict[str, list[str]] = {}
        for name, channel in site.channels.items():
            self._sensors.setdefault(channel.sensor, []).append(name)
        self._humid = [
            channel.sensor
            for name, channel in site.channels.items()
            if next(salt.uses(model.plan, name), None) is not None
        ]
        self.contradictions = Contradictions(site, model)
        self.margins = MarginAlarms(OutletAir(site, model))
        self.plant = PlantAlarms(site)
        self.fittings = FittingAlarms(site, model)
        self.definitions = {each.id: each for each in self._define()}

    def _define(self) -> Iterator[AlarmDefinition]:
        period_us = self.model.period_us
        for trap in self._names:
            yield AlarmDefinition(f"{trap}-drain-due", "drain-due", trap, "medium", DUE_ON_DELAY_US)
            yield AlarmDefinition(f"{trap}-flooded", "trap-flooded", trap, "high", DUE_ON_DELAY_US)
        for sensor in self._sensors:
            yield AlarmDefinition(
                f"{sensor}-sensor-fault",
                "sensor-fault",
                sensor,
                "medium",
                on_delay_us=period_us,
                off_delay_us=STALE_AFTER_PERIODS * period_us,
            )
        for sensor in self._humid:
            yield AlarmDefinition(f"{sensor}-salt-check-due", "salt-check-due", sensor, "low")
        yield AlarmDefinition(CLOCK_NOT_SET, CLOCK_NOT_SET, "clock", "high")
        yield from self.margins.define()
        yield from self.plant.define()
        yield from self.fittings.define()

    def watch(
        self, state: CoreState, drained: str = ""
    ) -> tuple[dict[str, AlarmRecord], list[Transition]]:
        """Every alarm advanced to the state's time. `drained`: a trap just emptied."""
        alarms, transitions = dict(state.alarms), []
        for definition, so, text in self._watched(state, drained):
            record, transition = watch(definition, alarms[definition.id], state.time_us, so, text)
            alarms[definition.id] = record
            if transition is not None:
                transitions.append(transition)
        return alarms, transitions

    def _watched(self, state: CoreState, drained: str) -> Iterator[Watched]:
        probability = self.probability_due(state)
        contents = state.model.water.trap[self.trap_rows]
        capacity = state.model.parameters.water.capacity_kg[self.trap_rows]
        full = np.count_nonzero(contents >= capacity, axis=1) / contents.shape[1]
        for number, name in enumerate(self._names):
            yield self._drain_due(state, number, float(probability[number]), name == drained)
            yield self._flooded(number, float(full[number]))
        against = self.contradictions.found(state)
        for sensor, channels in self._sensors.items():
            yield self._sensor_fault(state, sensor, channels, against.get(sensor, ""))
        for sensor in self._humid:
            yield self._salt_check(state, sensor)
        yield self._clock(state)
        yield from self.margins.watched(state, self.definitions)
        yield from self.plant.watched(state, self.definitions)
        yield from self.fittings.watched(state, self.definitions)

    def _clock(self, state: CoreState) -> Watched:
        definition = self.definitions[CLOCK_NOT_SET]
        if is_set(state.time_us):
            return definition, "not so", "The clock is set."
        return (
            definition,
            "so",
            "The clock is not set: dates, working hours and the calendar are wrong until it is. "
            "Connect the Pi to a time server, or set its clock.",
        )

    def probability_due(self, state: CoreState) -> Array:
        """The share of members at or above the drain-at level, (traps,)."""
        contents = self.model.contents(state.model)[self.trap_rows]
        at_or_above = contents >= self.drain_at_kg[:, None]
        probability: Array = np.count_nonzero(at_or_above, axis=1) / contents.shape[1]
        return probability

    # ---- drain due ----

    def _drain_due(
        self, state: CoreState, number: int, probability: float, drained_now: bool
    ) -> Watched:
        name = self._names[number]
        due_us = state.traps[name].calendar_due_us
        by_calendar = due_us != NO_DATE and state.time_us >= due_us
        so = condition(probability, by_calendar, drained_now)
        definition = self.definitions[f"{name}-drain-due"]
        record = state.alarms[definition.id]
        text = record.text
        if (so == "so") != record.raised:  # only then are the words needed
            text = self._due_text(state, number, so, by_calendar and probability < 0.5)
        if by_calendar:
            definition = replace(definition, on_delay_us=0)
        return definition, so, text

    def _due_text(self, state: CoreState, number: int, so: Condition, calendar: bool) -> str:
        name, trap = self._names[number], self._traps[number]
        if so != "so":
            return f"{name}: no longer due."
        kg = percentiles(self.model.contents(state.model)[self.trap_rows[number]])
        held = (float(kg[0]), float(kg[1]), float(kg[2]))
        return due_words(self.site, name, trap, held, "calendar" if calendar else "volume")

    # ---- the others ----

    def _flooded(self, number: int, full: float) -> Watched:
        name = self._names[number]
        definition = self.definitions[f"{name}-flooded"]
        if full >= FLOODED_RAISED_AT:
            text = f"{name} is full and water goes on down the line: drain it, then those after it."
            return definition, "so", text
        so: Condition = "not so" if full < FLOODED_RETURNS_BELOW else "between"
        return definition, so, f"{name}: no longer full."

    def _sensor_fault(
        self, state: CoreState, sensor: str, channels: Sequence[str], contradiction: str
    ) -> Watched:
        definition = self.definitions[f"{sensor}-sensor-fault"]
        fault = self._fault(state, channels) or contradiction
        if fault and self._nobody_spoke(state):
            return definition, "between", state.alarms[definition.id].text
        if fault:
            look = "" if fault == contradiction else ". Look at its wiring and run `dripleg check`."
            text = f"{sensor}: {fault}{look}"
            return definition, "so", text
        return definition, "not so", f"{sensor}: answers again."

    def _nobody_spoke(self, state: CoreState) -> bool:
        """Whether every part has been silent at once: dripleg did not run, and no part is to blame.

        While it runs, a part that fails says so. Nothing can be told of one part alone, nor of a
        record whose contacts tell changes only.
        """
        if len(self._sensors) < 2:
            return False
        since_us = state.time_us - STALE_AFTER_PERIODS * self.model.period_us
        return all(
            record.heard_us < since_us and not record.only_edges
            for record in state.channels.values()
        )

    def _salt_check(self, state: CoreState, sensor: str) -> Watched:
        """Once a humidity sensor was checked, it is checked again: elements drift."""
        definition = self.definitions[f"{sensor}-salt-check-due"]
        checked_us = state.sensed.salted.get(sensor)
        if checked_us is None or state.time_us - checked_us < SALT_CHECK_EVERY_US:
            return definition, "not so", f"{sensor}: checked."
        months = SALT_CHECK_EVERY_US // (30 * DAY_US)
        text = (
            f"{sensor} was checked over salt more than {months} months ago: run "
            f"`dripleg check --salt {sensor}` again."
        )
        return definition, "so", text

    def _fault(self, state: CoreState, channels: Sequence[str]) -> str:
        """Why a sensor cannot be believed, "" while it can."""
        period_us = self.model.period_us
        faults = [fault_of(state, name, period_us) for name in channels]
        doubts = [doubt_of(state, name) for name in channels]
        return next((found for found in (*faults, *doubts) if found), "")
