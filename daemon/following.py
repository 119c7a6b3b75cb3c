"""Follows the plant, the week and the day's turns beside the water, tick by tick. Pure.

From tick to tick this costs next to nothing; what costs is done at full hours, at drains, and where
the compressor starts or stops while the shop is closed.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from daemon import reminders as turns
from daemon.clock import HOUR_US
from daemon.due import NO_DATE, interval_words
from daemon.expected import AGAINST_RUST, LITTLE
from daemon.followed import Followed
from daemon.foreseer import UNKNOWN_ABOVE_S, Dates, Foreseen, Foreseer, hour_ahead
from daemon.moisture.byproducts import ByProducts
from daemon.moisture.ensemble import percentiles
from daemon.moisture.model import Model, Moved, State
from daemon.moisture.plant import Plant
from daemon.reminders import Reminder, Scene
from daemon.site.types import Site
from daemon.state import CoreState, HourTotals

GUN_SHARE = 0.15  # of the delivered air: what goes beyond that is somebody working (practice)
LEAKS = 2.0  # times the measured leak, where that is more


class Following:
    """What one site follows."""

    def __init__(self, site: Site, model: Model) -> None:
        self.site, self.model = site, model
        self.foreseer = Foreseer(site, model)
        self.byproducts = ByProducts(model, site.limits.leak)
        self._stations = [s for s in model.plan.stations if s.trap is not None]
        # bowls and legs first, while there is pressure; the tank last (practice)
        self._walk = sorted(
            range(len(self._stations)), key=lambda n: self._stations[n].kind == "receiver"
        )

    def begun(self, model: State) -> Followed:
        """At the first tick."""
        return Followed(Plant(), self.foreseer.begun(model), turns.begun(self.site, model.time_us))

    def carried_over(self, model: State, old: Followed) -> Followed:
        """After a change of the line's description: the week is what it was."""
        fresh = self.begun(model)
        foresight = replace(
            fresh.foresight,
            week=old.foresight.week,
            scores=old.foresight.scores,
            scored=old.foresight.scored,
            hits=old.foresight.hits,
        )
        reminders = replace(fresh.reminders, recent=old.reminders.recent)
        return replace(fresh, foresight=foresight, reminders=reminders)

    # ---- tick by tick ----

    def step(self, state: CoreState, after: State, moved: Moved, is_open: bool) -> Followed:
        """After the model's step from a state."""
        followed, before = state.followed, state.model
        on_s = float(moved.on_s[0])
        plant = self.byproducts.tick(followed.plant, before, after, on_s, is_open)
        foresight = self.foreseer.tick(followed.foresight, before.time_us, after)
        if plant is followed.plant and foresight is followed.foresight:
            return followed
        return replace(followed, plant=plant, foresight=foresight)

    def remind(self, state: CoreState) -> tuple[Followed, Reminder | None]:
        """Whether it is time to remind of a round; after the alarms of the tick."""
        followed = state.followed
        turn = followed.reminders.turn
        if turn is None or state.time_us < turn.at_us - turns.WATCHED_US:
            return followed, None
        flooded = self._flooded(state)
        if not flooded and turns.is_watching(followed.reminders, state.time_us):
            return followed, None
        scene = Scene(state.time_us, self._used_kg(state), flooded)
        reminders, reminder = turns.tick(
            self.site,
            followed.reminders,
            scene,
            self._at_rest_kg_per_s(state),
            lambda before_us: self._round(state, before_us),
        )
        return replace(followed, reminders=reminders), reminder

    def hour(self, state: CoreState, hour: HourTotals) -> Followed:
        """At a full hour, with what moved since the last one."""
        followed, now_us = state.followed, state.time_us
        foresight = self.foreseer.hour(
            followed.foresight, state.model, self.dates(state), hour.from_us, hour.on_s
        )
        plant = followed.plant
        watched = float(hour.on_s.max() - hour.on_s.min()) <= UNKNOWN_ABOVE_S
        if now_us - hour.from_us == HOUR_US and watched:
            place = hour_ahead(self.site.hours, self.site.timezone, hour.from_us)
            if place.is_open:
                plant = self.byproducts.hour(plant, float(hour.on_s.mean()) / 3600.0)
        return Followed(plant, foresight, turns.hour(self.site, followed.reminders, now_us))

    # ---- journal entries ----

    def before_drain(self, state: CoreState) -> Followed:
        """Before a drain is booked."""
        followed = state.followed
        foresight = self.foreseer.looked(followed.foresight, state.model, self.dates(state))
        return replace(
            followed, plant=self.byproducts.broken_off(followed.plant), foresight=foresight
        )

    def after_drain(self, state: CoreState, trap: str) -> Followed:
        """After a drain was booked."""
        number = self.site.traps.index(trap)
        foresight = self.foreseer.drained(state.followed.foresight, state.model, number)
        return replace(state.followed, foresight=foresight)

    def serviced(self, followed: Followed, compressor: bool) -> Followed:
        """A part was changed, or the compressor was worked on."""
        foresight = followed.foresight
        followed = replace(followed, foresight=replace(foresight, services=foresight.services + 1))
        if not compressor:
            return followed
        return replace(followed, plant=self.byproducts.serviced(followed.plant))

    # ---- looking ahead ----

    def dates(self, state: CoreState) -> Dates:
        """When each trap was drained last, and when the calendar asks again."""
        records = [state.traps[name] for name in self.site.traps]
        since = tuple(max(each.last_drain_us, state.begun_us) for each in records)
        return Dates(since, tuple(each.calendar_due_us for each in records))

    def foreseen(self, state: CoreState) -> Foreseen:
        """When each trap is due and each supply is used up, as seen now."""
        return self.foreseer.now(state.followed.foresight, state.model, self.dates(state))

    # ---- reminders ----

    def _used_kg(self, state: CoreState) -> float:
        known = state.model.contact_unknown_us < 0 or state.model.conditions.measured
        return float(state.model.air.used.mean()) if known else math.nan

    def _flooded(self, state: CoreState) -> bool:
        return any(state.alarms[f"{name}-flooded"].raised for name in self.site.traps)

    def _at_rest_kg_per_s(self, state: CoreState) -> float:
        """What may leave the line without anybody using air."""
        density = 1.2  # kg/m3, near enough
        delivered = float(np.median(state.model.parameters.delivered_m3_per_s)) * density
        leak = state.followed.plant.leak_kg_per_s
        leaked = 0.0 if leak is None else float(np.median(leak.value))
        return max(GUN_SHARE * delivered, LEAKS * leaked)

    def _round(self, state: CoreState, before_us: int) -> tuple[Sequence[str], str]:
        """What is due, or will be before a time, in walking order, with words."""
        numbers = [n for n in self._walk if self._belongs(state, n, before_us)]
        names = [self._stations[n].id for n in numbers]
        if not names:
            return (), ""
        contents = self.model.contents(state.model)
        words = []
        for number, name in zip(numbers, names, strict=True):
            station = self._stations[number]
            assert station.trap is not None
            kg = percentiles(contents[self.model.plan.index[name]])
            little = float(kg[2]) < LITTLE * station.trap.drain_at_kg
            if station.kind == "receiver" and little:
                words.append(f"{name} ({AGAINST_RUST})")
            else:
                words.append(f"{name}: about {interval_words(self.site, *map(float, kg))}")
        return names, "Drain, in this order: " + "; ".join(words) + "."

    def _belongs(self, state: CoreState, number: int, before_us: int) -> bool:
        name = self._stations[number].id
        if state.alarms[f"{name}-drain-due"].raised:
            return True
        date_us = state.traps[name].calendar_due_us
        if date_us != NO_DATE and date_us <= before_us:
            return True
        kept = state.followed.foresight.kept
        if not kept or kept[-1].at_us < self.dates(state).since_us[number]:
            return False
        foreseen_us = kept[-1].due_us[number][1]
        return 0 <= foreseen_us <= before_us
