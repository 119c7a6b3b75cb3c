"""How entries about dryers and drains that empty themselves change the state. Pure."""

from __future__ import annotations

from dataclasses import replace

from daemon.drain_watch import DrainWatching
from daemon.journal import Drain, Service
from daemon.moisture.model import Model
from daemon.state import CoreState


class FittingEntries:
    """Takes in entries for one site."""

    def __init__(self, model: Model, watching: DrainWatching) -> None:
        self.model, self.watching = model, watching

    def service(self, state: CoreState, service: Service) -> CoreState:
        """A drain was seen working, or an element, a cartridge or a bath's ice is new."""
        if service.what == "drain seen working":
            seen = self.watching.seen(state.drains, state.model, service.of)
            return replace(state, drains=seen)
        if service.what == "element changed" and service.of in self.model.plan.index:
            fittings = self.model.fittings.renewed(state.model.fittings, service.of)
            return replace(state, model=replace(state.model, fittings=fittings))
        return state

    def drained(self, state: CoreState, drain: Drain) -> CoreState:
        """Somebody opened a drain: what that says of one that empties itself. Before the
        emptying is booked."""
        volume_kg = 0.0 if drain.outcome == "empty" else drain.volume_kg
        watched = self.watching.drained(state.drains, state.model, drain.trap, volume_kg)
        return state if watched is state.drains else replace(state, drains=watched)
