"""Alarms of drains that empty themselves, and the question whether a tank was drained. Pure."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace
from zoneinfo import ZoneInfo

from daemon.alarms import AlarmDefinition, Condition
from daemon.clock import HOUR_US, MINUTE_US, format_rfc3339, to_datetime
from daemon.drain_record import DrainRecord
from daemon.drain_watch import DrainWatching
from daemon.due import volume_words
from daemon.moisture.density import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.moisture.description import Measured
from daemon.moisture.drains import chance_stuck
from daemon.moisture.model import Model
from daemon.site.types import Site
from daemon.state import CoreState
from daemon.units import show_duration, show_flow, show_percent, show_pressure_difference

NOT_PASSING_US = 10 * MINUTE_US  # for so long a float switch is closed, or more comes than passes
LIMITED_AT = 0.5  # share of members in which a drain cannot pass all that comes
STUCK_LIMIT = 0.1  # from this chance on somebody should see it work
ASKED_FOR_US = 12 * HOUR_US  # so long a fallen pressure is asked about
DRAINED_AROUND_US = 10 * MINUTE_US  # a drain recorded so near the fall answers it

Watched = tuple[AlarmDefinition, Condition, str]


class DrainAlarms:
    """The drain alarms of one site."""

    def __init__(self, site: Site, model: Model) -> None:
        self.site, self.model = site, model
        self._watching = DrainWatching(model)
        self._traps = list(self._watching.traps)
        plan = model.plan
        self._tanks = [
            plan.stations[i].id
            for i in plan.receivers
            if isinstance(plan.stations[i].pressure, Measured) and plan.stations[i].trap is not None
        ]

    def define(self) -> Iterator[AlarmDefinition]:
        """For every drain that empties itself, and every tank whose pressure is measured."""
        for trap in self._traps:
            yield AlarmDefinition(f"{trap}-drain-not-passing", "drain-not-passing", trap, "high")
            yield AlarmDefinition(f"{trap}-drain-blowing", "drain-blowing", trap, "medium")
        for tank in self._tanks:
            yield AlarmDefinition(f"{tank}-pressure-fell", "pressure-fell", tank, "low")

    def watched(
        self, state: CoreState, definitions: Mapping[str, AlarmDefinition]
    ) -> Iterator[Watched]:
        """What each says now."""
        for row, trap in enumerate(self._traps):
            yield self._not_passing(state, row, trap, definitions)
            yield self._blowing(state, trap, definitions[f"{trap}-drain-blowing"])
        for tank in self._tanks:
            if tank in state.drains.falls:
                yield self._fell(state, tank, definitions[f"{tank}-pressure-fell"])

    # ---- not passing ----

    def _not_passing(
        self,
        state: CoreState,
        row: int,
        trap: str,
        definitions: Mapping[str, AlarmDefinition],
    ) -> Watched:
        definition = definitions[f"{trap}-drain-not-passing"]
        record = state.drains.drains[trap]
        now_us = state.time_us
        if record.found_us > record.seen_us:
            return definition, "so", self._found_words(trap, record)
        if self._stands_at_its_switch(state, trap):
            text = (
                f"The drain of {trap} does not pass: the water has stood at its float switch for "
                f"{show_duration(NOT_PASSING_US / 1e6)} and more. Work it by hand or clean it; "
                "drain by hand until then."
            )
            return definition, "so", text
        limited = state.model.fittings.limited
        if limited and limited[row] >= LIMITED_AT:
            held = replace(definition, on_delay_us=NOT_PASSING_US)
            text = f"More water comes to {trap} than its drain can pass: help it by hand."
            return held, "so", text
        chance = chance_stuck(record.seen_us, now_us)
        if chance >= STUCK_LIMIT:
            text = (
                f"The drain of {trap} was last seen working on "
                f"{format_rfc3339(record.seen_us)[:10]}: the chance that it is stuck is "
                f"{show_percent(round(chance, 2))}. See it work, and record that it does."
            )
            return replace(definition, priority="low"), "so", text
        return definition, "not so", f"The drain of {trap} passes."

    def _stands_at_its_switch(self, state: CoreState, trap: str) -> bool:
        for channel, of in self._watching.switches.items():
            seen = state.sensed.floats.get(channel)
            if of == trap and seen is not None and seen.closed:
                return state.time_us - seen.since_us >= NOT_PASSING_US
        return False

    def _found_words(self, trap: str, record: DrainRecord) -> str:
        found = volume_words(self.site, record.found_kg)
        return (
            f"The drain of {trap} does not pass: {found} stood in it, more than a working drain "
            "leaves. Clean it, and record when you have seen it work; drain by hand until then."
        )

    # ---- blowing ----

    def _blowing(self, state: CoreState, trap: str, definition: AlarmDefinition) -> Watched:
        leak = state.drains.leak
        if not leak.blows:
            return definition, "not so", f"The drain of {trap} holds again."
        record = state.alarms[definition.id]
        if record.raised:
            return definition, "so", record.text
        now, people = leak.last_kg_per_s / REFERENCE_DRY_AIR_KG_PER_M3, self.site.units
        was = ""
        if leak.before_kg_per_s >= 0.0:
            before = leak.before_kg_per_s / REFERENCE_DRY_AIR_KG_PER_M3
            was = f"; it was {show_flow(before, people)} before"
        others = [each for each in self._traps if each != trap]
        also = f" or of {', '.join(others)}" if others else ""
        text = (
            f"The line lost {show_flow(now, people)} of air while nobody worked{was}: the drain "
            f"of {trap}{also} may stand open and blow. Listen to it; clean or change it."
        )
        return definition, "so", text

    # ---- a pressure that fell ----

    def _fell(self, state: CoreState, tank: str, definition: AlarmDefinition) -> Watched:
        fall = state.drains.falls[tank]
        drained_us = state.traps[tank].last_drain_us
        answered = drained_us >= fall.at_us - DRAINED_AROUND_US
        if answered or state.time_us - fall.at_us >= ASKED_FOR_US:
            return definition, "not so", f"{tank}: the fall of its pressure is not asked about."
        drop = show_pressure_difference(fall.drop_pa, self.site.units)
        at = f"{to_datetime(fall.at_us).astimezone(ZoneInfo(self.site.timezone)):%H:%M}"
        text = (
            f"The pressure of {tank} fell fast at {at} ({drop} in {fall.seconds:.0f} s while the "
            "compressor rested): was it drained? If so, record the drain."
        )
        return definition, "so", text
