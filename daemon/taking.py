"""How journal entries about drains and parts change the state. Pure."""

from __future__ import annotations

import math
from dataclasses import replace

from daemon.clock import MINUTE_US
from daemon.due import calendar_due_us, interval_words, volume_words
from daemon.journal import Confirm, Drain, Entry, Service
from daemon.moisture import beliefs as believed
from daemon.moisture.learning import CupError, Learned
from daemon.moisture.model import Model, State
from daemon.site.types import Site
from daemon.state import CoreState, TrapRecord

_LOOKED = {
    "rusty": "Rusty water: have the vessel looked at inside, by whoever inspects it.",
    "oily": "Oily water: look where the oil comes from, and at the coalescer's element.",
    "milky": "Milky water is oil and water mixed: only a separator or a waste carrier parts them.",
}
SAME_OPENING_US = 30 * MINUTE_US
TIGHTER = 0.95  # of the spread of what is to come: from here down a person may be told so


class Taking:
    """Takes in entries for one site."""

    def __init__(self, site: Site, model: Model) -> None:
        self.site, self.model = site, model
        cup = site.cup
        self.cup = CupError(cup.reads_low_by, cup.give_or_take, cup.each_time, cup.each_time_kg)
        self._traps = {s.id: s.trap for s in site.line.stations if s.trap is not None}

    # ---- drains ----

    def drain(
        self, state: CoreState, entry: Entry, drain: Drain
    ) -> tuple[CoreState, Learned | None]:
        """A drain was opened: learn from what was measured, then book the emptying."""
        record = state.traps[drain.trap]
        if drain.outcome == "partly":
            model = self.model.drain_partly(state.model, drain.trap, drain.volume_kg)
            return replace(state, model=model), None
        model, record, learned = self._measured(state.model, record, drain)
        model = self.model.drain(model, drain.trap)
        trap = self._traps[drain.trap]
        due_us = calendar_due_us(self.site, trap, entry.at_us, drained=True)
        record = replace(record, last_drain_us=entry.at_us, calendar_due_us=due_us)
        return replace(state, model=model, traps={**state.traps, drain.trap: record}), learned

    def _measured(
        self, model: State, record: TrapRecord, drain: Drain
    ) -> tuple[State, TrapRecord, Learned | None]:
        volume_kg = 0.0 if drain.outcome == "empty" else drain.volume_kg
        if volume_kg is None:
            return model, record, None
        after, learned, seen = self.model.measure(model, drain.trap, volume_kg, self.cup)
        if not learned.flagged:
            return after, replace(record, suspect=None), learned
        if record.suspect is not None and record.suspect.above == seen.above:
            # a second surprise on the same side is no slip of the pen
            after, learned, _ = self.model.measure(
                model, drain.trap, volume_kg, self.cup, widen=True
            )
            return after, replace(record, suspect=None), learned
        return model, replace(record, suspect=seen), learned

    def confirm(self, state: CoreState, confirm: Confirm) -> CoreState:
        """Somebody says that a surprising measurement was right: learn from it after all."""
        record = state.traps[confirm.trap]
        if record.suspect is None:
            return state
        model, _ = self.model.learn(state.model, confirm.trap, record.suspect, self.cup, widen=True)
        record = replace(record, suspect=None)
        return replace(state, model=model, traps={**state.traps, confirm.trap: record})

    def questioned_kg(self, record: TrapRecord) -> float | None:
        """The measured volume that waits to be confirmed."""
        if record.suspect is None:
            return None
        return max(math.exp(record.suspect.measured) - self.cup.k_kg, 0.0)

    # ---- parts ----

    def service(self, state: CoreState, service: Service) -> CoreState:
        """A part was changed: what was learned of the old one is forgotten."""
        names = self._forgotten(service)
        if not names:
            return state
        return replace(state, model=self.model.redrawn(state.model, names))

    def _forgotten(self, service: Service) -> list[str]:
        plan = self.model.plan
        if service.what == "compressor serviced":
            return [believed.DELIVERED, believed.DUTY]
        if service.what == "sensor replaced":
            mine = [c for c in plan.channels if c.rsplit(".", 1)[0] == service.of]
            return [believed.bias_of(channel) for channel in mine]
        if service.what == "element changed" and service.of in plan.index:
            station = plan.stations[plan.index[service.of]]
            own = believed.own_names(station)
            return [name for name in own if not name.startswith(("temperature", "pressure"))]
        return []


def _second_cup(learned: Learned, last_drain_us: int) -> str:
    """More than there can be, soon after a drain: a cup may have been too small for all of it."""
    passed_us = learned.at_us - last_drain_us
    if last_drain_us < 0 or passed_us > SAME_OPENING_US:
        return ""
    if learned.measured_kg <= learned.expected_kg[1]:
        return ""
    minutes = max(round(passed_us / MINUTE_US), 1)
    ago = "a minute" if minutes == 1 else f"{minutes} minutes"
    return (
        f" If it came out together with what was recorded {ago} before, take that one back and "
        "enter both as one drain."
    )


def look_words(drain: Drain) -> str:
    """What follows from how the water looked. Common practice, no source."""
    return _LOOKED.get(drain.look, "")


def learned_words(site: Site, learned: Learned, last_drain_us: int = -1) -> str:
    """What is said to whoever measured; `last_drain_us` is when the trap was drained before."""
    expected = interval_words(site, *learned.expected_kg)
    measured = volume_words(site, learned.measured_kg)
    found = f"you measured {measured}" if learned.measured_kg > 0.0 else "it was empty"
    if learned.flagged:
        return (
            f"{learned.trap}: {found}, but {expected} was expected. It is kept, "
            "and not learned from until you confirm it: look at the figure and its unit again."
            + _second_cup(learned, last_drain_us)
        )
    after = "is tighter" if learned.narrowed < TIGHTER else "has learned from it"
    return (
        f"{learned.trap}: {found}, expected {expected}; the next estimate of "
        f"{learned.trap} {after}."
    )
