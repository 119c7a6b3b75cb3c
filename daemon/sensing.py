"""What the line's sensors say besides temperatures and pressures, taken into the state. Pure.

Float switches as they close, measured dew points once an hour, and salt checks when they are made.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

from daemon.journal import SaltCheck
from daemon.moisture import floats, observing, salt
from daemon.moisture.beliefs import bias_of
from daemon.moisture.model import Model, State
from daemon.state import CoreState, Sensed


class Sensing:
    """Takes in what one line's sensors say."""

    def __init__(self, model: Model) -> None:
        self.model = model

    def step(
        self,
        sensed: Sensed,
        before_us: int,
        model: State,
        heard: Mapping[str, Sequence[tuple[int, float, bool]]],
    ) -> tuple[State, Sensed]:
        """After a step of the model: what was heard in it."""
        model, seen = floats.observe(self.model, model, sensed.floats, heard)
        dt_s = (model.time_us - before_us) / 1e6
        observed = observing.gather(self.model.plan, sensed.observed, model, dt_s)
        return model, replace(sensed, floats=seen, observed=observed)

    def hour(self, state: CoreState) -> CoreState:
        """At a full hour: learn from the dew points that were measured in it."""
        if not state.sensed.observed:
            return state
        model, observed = observing.learn(self.model, state.model, state.sensed.observed)
        return replace(state, model=model, sensed=replace(state.sensed, observed=observed))

    def replaced(self, state: CoreState, sensor: str) -> CoreState:
        """After a sensor was replaced: the new one was never checked."""
        salted = {name: at_us for name, at_us in state.sensed.salted.items() if name != sensor}
        return replace(state, sensed=replace(state.sensed, salted=salted))

    def salt_check(self, state: CoreState, check: SaltCheck) -> CoreState:
        """What a humidity sensor read over a salt whose humidity is known."""
        model, channel = state.model, f"{check.sensor}.relative_humidity"
        width = next((s.give_or_take for s in salt.uses(self.model.plan, channel)), None)
        if width is not None and bias_of(channel) in model.beliefs:
            model = salt.learn(self.model, model, channel, width, check.reads - check.true)
        salted = {**state.sensed.salted, check.sensor: state.time_us}
        return replace(state, model=model, sensed=replace(state.sensed, salted=salted))
