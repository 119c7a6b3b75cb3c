"""The moisture model of one line: an ensemble of believable shops, advanced step by step.

Each member lives with its own draw of what is not known (sensor biases, delivered air, separations,
...), so that systematic errors stay correlated in time: a week of averaging does not make a biased
sensor right, and the interval shows it. Pure: no clock, no I/O; a step gives a new state.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from daemon.clock import HOUR_US
from daemon.moisture import air, flow, learning, line
from daemon.moisture.beliefs import (
    ROUND_LOG_SD,
    Beliefs,
    Parameters,
    bias_of,
    draw,
    names,
    round_of,
)
from daemon.moisture.beliefs import offsets as make_offsets
from daemon.moisture.beliefs import parameters as make_parameters
from daemon.moisture.carried import nothing_yet
from daemon.moisture.conditions import Conditions, Evaluation, Held, Lapse, Offsets
from daemon.moisture.contact import ContactState, ContactTime, integrate
from daemon.moisture.description import Line, Measured, RiseByDuty
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array, standard_normal
from daemon.moisture.fitting_state import FittingState, Moment
from daemon.moisture.fittings import Fittings
from daemon.moisture.learning import CupError, Learned, Suspect
from daemon.moisture.plan import Plan, plan_line

BIAS_DRIFT_S = 30 * 86400.0  # time constant of a sensor's slow drift; practice, no source
# The duty of a compressor that nothing watches: logit-normal about what it was while watched, at
# first 0.3. The memory of it is a day. Common practice, no source.
DUTY_UNKNOWN, DUTY_LOGIT_SD, DUTY_MEMORY_S = 0.3, 0.8, 86400.0


@dataclass(frozen=True, slots=True)
class State:
    """Everything that is carried from one step to the next."""

    time_us: int
    beliefs: Beliefs
    offsets: Offsets  # made of the beliefs, as are the parameters
    parameters: Parameters
    held: Mapping[str, Held]
    lapses: Mapping[str, Lapse]
    contact: ContactState
    pump: flow.PumpWatch
    contact_unknown_us: int  # since when the contact has not been known; -1 while it is
    duty_known: float  # what the duty was while it was known
    duty: Array  # (stations, members), filtered, where a rise follows it
    air: flow.AirState
    water: line.WaterState
    ledger: line.Ledger
    round_start: Array  # (stations, members): what each trap held when its round began, kg
    conditions: Conditions
    saturated: Array  # (stations, members), humidity ratio
    fittings: FittingState


@dataclass(frozen=True, slots=True)
class Moved:
    """What one step moved, for the records. Arrays are (members,)."""

    on_s: Array
    drawn_kg: Array
    used_kg: Array


@dataclass(frozen=True, slots=True)
class Heard:
    """What was heard in one step: readings in order of time, as (time_us, value, good)."""

    channels: Mapping[str, Sequence[tuple[int, float, bool]]] = field(default_factory=dict)
    is_open: bool = True  # whether the shop works


class Model:
    """A line's model. All of its methods are pure."""

    def __init__(self, description: Line) -> None:
        self.plan: Plan = plan_line(description)
        self.fittings = Fittings(self.plan)
        self.period_us = round(description.period_s * 1e6)
        self.gauge = self._watched_receiver()
        self.sees_pump_ups = flow.shows_pump_ups(description)
        # a station's own rule, or what holds while its sensor is silent: one lag, never both
        lagging = [
            s.temperature if isinstance(s.temperature, RiseByDuty) else rule
            for s, rule in zip(self.plan.stations, self.plan.temperature_rules, strict=True)
        ]
        self.lagging = [  # (station, time constant in s) of what follows the duty
            (i, source.time_constant_s)
            for i, source in enumerate(lagging)
            if isinstance(source, RiseByDuty)
        ]

    def _watched_receiver(self) -> tuple[str, float] | None:
        """The channel of the first receiver's pressure, and the pressure switch's span."""
        compressor = self.plan.line.compressor
        for receiver in self.plan.receivers:
            source = self.plan.stations[receiver].pressure
            if isinstance(source, Measured):
                return source.channel, compressor.cut_out.value - compressor.cut_in.value
        return None

    # ---- beginning ----

    def initial(
        self, time_us: int, heard: Heard, known: Mapping[str, Array] | None = None
    ) -> State:
        """The state at the first tick: traps hold what they are said to, air is as drawn in.

        `known` are beliefs of the same parts that were learned before.
        """
        plan = self.plan
        beliefs = {**draw(plan, names(plan)), **(known or {})}
        offsets, parameters = make_offsets(plan, beliefs), make_parameters(plan, beliefs)
        held = self._hold({}, heard)
        contact, _ = self._contact(ContactState(), heard, time_us, time_us)
        duty = np.zeros((len(plan.stations), plan.line.members))
        evaluation = Evaluation(plan, held, offsets, duty, time_us)
        now = evaluation.conditions()
        saturated = air.saturated_humidity_ratio_unchecked(now.temperature_k, now.pressure_pa)
        intake = self._intake_ratio(now)
        ratio = self._passed(saturated, intake)
        stored = self._stored(parameters, now, ratio[list(plan.receivers)])
        water = line.WaterState(
            trap=np.array([self._at_start(i) for i in range(len(plan.stations))]),
            waiting=np.zeros_like(saturated),
            spilled=np.zeros_like(saturated),
            vapor=stored * ratio[list(plan.receivers)],
            leaving_ratio=ratio,
            carried=nothing_yet(plan),
        )
        state = State(
            time_us=time_us,
            beliefs=beliefs,
            offsets=offsets,
            parameters=parameters,
            held=held,
            lapses=evaluation.lapses,
            contact=contact,
            pump=flow.PumpWatch(),
            contact_unknown_us=time_us,
            duty_known=DUTY_UNKNOWN,
            duty=duty,
            air=flow.start(plan, stored, ratio[list(plan.receivers)]),
            water=water,
            ledger=line.new_ledger(plan, water),
            round_start=water.trap,
            conditions=now,
            saturated=saturated,
            fittings=self.fittings.drying.switched(
                self.fittings.begin(time_us, parameters.fittings),
                heard.channels,
                heard.is_open,
                time_us,
            ),
        )
        seen = tuple(receiver in now.measured for receiver in plan.receivers)
        pump = self._watch(state, heard)[0]
        return replace(state, air=replace(state.air, seen=seen), pump=pump)

    def _passed(self, saturated: Array, intake: Array) -> Array:
        """Humidity ratios of air that has come down the line as it is now, (stations, members)."""
        ratio = np.minimum(saturated, intake)
        for i, above in enumerate(self.plan.parent):
            if above >= 0:
                np.minimum(ratio[i], ratio[above], out=ratio[i])
        return ratio

    def _at_start(self, i: int) -> Array:
        trap = self.plan.stations[i].trap
        held = trap.holds_at_start_kg if trap is not None else 0.0
        return np.full(self.plan.line.members, held)

    # ---- one step ----

    def step(self, state: State, to_us: int, heard: Heard) -> tuple[State, Moved]:
        """Advance to `to_us` with what was heard since; a step is at most an hour.

        Values hold from their reading on, so the step is made with those last heard by its end.
        """
        plan = self.plan
        dt_s = (to_us - state.time_us) / 1e6
        beliefs, offsets = self._drifted(state, to_us)
        held = self._hold(state.held, heard)
        contact, times = self._contact(state.contact, heard, state.time_us, to_us)
        pump, booked_us = self._watch(state, heard)
        on_s = self._on_time(state, held, to_us, times, booked_us, heard.is_open)
        duty, duty_known = self._follow(state, on_s, times, dt_s, heard.is_open)
        evaluation = Evaluation(plan, held, offsets, duty, to_us, dict(state.lapses))
        fitted = self.fittings.drying.switched(state.fittings, heard.channels, heard.is_open, to_us)
        now = self.fittings.warmed(fitted, state.parameters.fittings, evaluation.conditions())
        saturated = self._saturated(state, now)
        intake_ratio = np.minimum(self._intake_ratio(now), saturated[0])
        drawn = on_s * self.delivered(state.parameters, now, intake_ratio)
        if (meter := plan.line.compressor.flow_meter) is not None:
            drawn = self.metered(meter, held, offsets, to_us, dt_s, drawn)
        before, water, ledger = self._sighted(state, now)
        if offsets is not state.offsets:
            as_before = replace(evaluation, offsets=state.offsets, lapses=dict(state.lapses))
            before = self._drift_is_no_flow(before, state, now, as_before.conditions())
            before = replace(before, ratio=water.vapor / before.stored)
        measured = self.measured(before, state.parameters, now)
        purging = self.fittings.drying.purged_share(fitted, state.parameters.fittings)
        after, moved = flow.move(plan, before, drawn, measured, purging)
        fitted = self.fittings.without_pressure(fitted, now, held, to_us)
        moment = Moment(now, saturated, moved, held, offsets, state.time_us, to_us)
        lying = replace(state, water=water, ledger=ledger, fittings=fitted)
        water, ledger, fitted = self.water_moved(lying, before.stored, intake_ratio, moment)
        unknown_us = state.contact_unknown_us
        if times.unknown_us == 0:
            unknown_us = -1
        elif unknown_us < 0:
            unknown_us = to_us - times.unknown_us
        stepped = State(
            time_us=to_us,
            beliefs=beliefs,
            offsets=offsets,
            parameters=state.parameters,
            held=held,
            lapses=evaluation.lapses,
            contact=contact,
            pump=pump,
            contact_unknown_us=unknown_us,
            duty_known=duty_known,
            duty=duty,
            air=after,
            water=water,
            ledger=ledger,
            round_start=state.round_start,
            conditions=now,
            saturated=saturated,
            fittings=fitted,
        )
        return stepped, Moved(on_s, drawn, moved.used)

    def water_moved(
        self, state: State, stored: Array, intake_ratio: Array, moment: Moment
    ) -> tuple[line.WaterState, line.Ledger, FittingState]:
        """The water, the ledger and the fittings of a state after the moment's air has moved.

        `stored` is the dry air in the receivers before, kg, (receivers, members).
        """
        fitted, drawn_of = state.fittings, state.parameters.fittings
        what, water_of = None, state.parameters.water
        if self.fittings.acts(fitted, moment.to_us):
            what = self.fittings.prepare(fitted, drawn_of, water_of.separation, moment)
            water_of = replace(water_of, separation=what.separation)
        water, ledger = line.step(
            self.plan,
            water_of,
            state.water,
            state.ledger,
            moment.moved,
            stored,
            intake_ratio,
            moment.saturated if what is None else what.saturated,
            moment.dt_s,
            None if what is None else what.fitted,
        )
        if what is not None:
            fitted = self.fittings.after(fitted, drawn_of, what, water.leaving_ratio)
        return water, ledger, fitted

    # ---- traps ----

    def contents(self, state: State) -> Array:
        """What each trap holds, kg, (stations, members), with each round's own error."""
        grown = (state.water.trap - state.round_start) * state.parameters.round_factor
        held = np.maximum(state.round_start + grown, 0.0)
        contents: Array = np.minimum(held, state.parameters.water.capacity_kg)
        return contents

    def drain(self, state: State, trap: str) -> State:
        """A drain was opened and let run dry: the trap holds its heel, a new round begins."""
        station = self.plan.index[trap]
        described = self.plan.stations[station].trap
        heel = described.heel_kg if described is not None else 0.0
        state = self._settled(state, station)
        water, ledger = line.empty(self.plan, state.water, state.ledger, station, heel)
        return self._new_round(replace(state, water=water, ledger=ledger), station)

    def drain_partly(self, state: State, trap: str, volume_kg: float | None) -> State:
        """Some was let out: this volume at least was there; an unknown part where none is said."""
        station = self.plan.index[trap]
        state = self._settled(state, station)
        held = state.water.trap[station]
        if volume_kg is None:
            line_of = self.plan.line
            name = f"left in {trap}"
            place = standard_normal(line_of.seed, name, line_of.members, state.time_us)
            left = held / (1.0 + np.exp(-place))  # anything from nothing to all of it
            there = held
        else:
            there = np.maximum(held, volume_kg)
            left = there - volume_kg
        water, ledger = line.hold(state.water, state.ledger, station, there)
        water, ledger = line.let_out(water, ledger, station, left)
        return self._new_round(replace(state, water=water, ledger=ledger), station)

    def measure(
        self, state: State, trap: str, volume_kg: float, cup: CupError, widen: bool = False
    ) -> tuple[State, Learned, Suspect]:
        """Learn from what came out of a trap, before it is booked as emptied.

        A volume beyond five sigmas is not learned from unless `widen` says that it is believed.
        """
        station = self.plan.index[trap]
        contents = self.contents(state)[station]
        shown = learning.expectation(contents, state.beliefs, cup)
        seen, sigmas = learning.compare(contents, state.beliefs, cup, volume_kg)
        flagged = sigmas > learning.SUSPECT_SIGMAS and not widen
        record = learning.told(state.time_us, trap, volume_kg, shown, sigmas, flagged, cup)
        if flagged:
            return state, record, seen
        learned, factor = self.learn(state, trap, seen, cup, widen)
        local = learning.local_names(self.plan, station)
        ratio = learning.narrowed(seen.expected, local, state.beliefs, learned.beliefs)
        return learned, learning.with_outcome(record, factor, ratio), seen

    def learn(
        self, state: State, trap: str, seen: Suspect, cup: CupError, widen: bool
    ) -> tuple[State, float]:
        """The update of beliefs and contents; the factor that spreads were widened by."""
        plan, station = self.plan, self.plan.index[trap]
        seed, when_us = plan.line.seed, state.time_us
        update, factor = learning.prepare(seen, seed, trap, when_us, widen)
        local = learning.local_names(plan, station)
        beliefs = learning.update_beliefs(state.beliefs, local, update, factor, seed, when_us)
        contents = self.contents(state)
        water, ledger = state.water, state.ledger
        for other in plan.traps:
            most = state.parameters.water.capacity_kg[other]
            held = learning.update_contents(contents[other], update, cup.k_kg, most)
            water, ledger = line.hold(water, ledger, other, held)
        started = water.trap.copy()  # contents are as updated: rounds go on from here
        state = replace(state, water=water, ledger=ledger, round_start=started)
        return self.believing(state, beliefs), factor

    def believing(self, state: State, beliefs: Beliefs) -> State:
        """The state with other beliefs. What that changes in stored air is not air that moved."""
        offsets = make_offsets(self.plan, beliefs)
        parameters = make_parameters(self.plan, beliefs)
        lapses = dict(state.lapses)
        evaluation = Evaluation(self.plan, state.held, offsets, state.duty, state.time_us, lapses)
        now = evaluation.conditions()
        measured = self.measured(state.air, parameters, now)
        return replace(
            state,
            beliefs=beliefs,
            offsets=offsets,
            parameters=parameters,
            air=flow.bias_changed(state.air, measured - state.air.measured),
        )

    def redrawn(self, state: State, which: Sequence[str]) -> State:
        """Forget what was learned of these figures: a part was changed."""
        fresh = draw(self.plan, which, state.time_us)
        return self.believing(state, {**state.beliefs, **fresh})

    def _settled(self, state: State, station: int) -> State:
        """Book a round's own error of a trap as what it held."""
        held = self.contents(state)[station]
        water, ledger = line.hold(state.water, state.ledger, station, held)
        return replace(state, water=water, ledger=ledger)

    def _new_round(self, state: State, station: int) -> State:
        """A round begins with what the trap holds now, and an error of its own."""
        starts = state.round_start.copy()
        starts[station] = state.water.trap[station]
        name = round_of(self.plan.stations[station].id)
        beliefs = {**state.beliefs, **draw(self.plan, [name], state.time_us)}
        factor = state.parameters.round_factor.copy()
        factor[station] = np.exp(ROUND_LOG_SD * beliefs[name])
        parameters = replace(state.parameters, round_factor=factor)
        return replace(state, beliefs=beliefs, parameters=parameters, round_start=starts)

    # ---- its parts ----

    def _hold(self, held: Mapping[str, Held], heard: Heard) -> dict[str, Held]:
        after = dict(held)
        for channel in self.plan.channels:
            for time_us, value, good in heard.channels.get(channel, ()):
                if good and time_us >= after.get(channel, Held()).time_us:
                    after[channel] = Held(value, time_us)
        return after

    def _contact(
        self, contact: ContactState, heard: Heard, from_us: int, to_us: int
    ) -> tuple[ContactState, ContactTime]:
        channel = self.plan.line.compressor.running
        if channel is None:
            return contact, ContactTime(0, to_us - from_us)
        told = heard.channels.get(channel, ())
        return integrate(contact, told, from_us, to_us, self.period_us)

    def _watch(self, state: State, heard: Heard) -> tuple[flow.PumpWatch, int]:
        """The pump watch after what was heard, and the time it now books as run, microseconds.

        Where the contact was known, the contact counts.
        """
        pump, booked_us = state.pump, 0
        if self.gauge is None:
            return pump, booked_us
        channel, span_pa = self.gauge
        for time_us, value, good in heard.channels.get(channel, ()):
            if good:
                pump, from_us, until_us = pump.told(value, time_us, span_pa)
                if state.contact_unknown_us >= 0:
                    booked_us += max(0, until_us - max(from_us, state.contact_unknown_us))
        return pump, booked_us

    def _on_time(
        self,
        state: State,
        held: Mapping[str, Held],
        to_us: int,
        times: ContactTime,
        booked_us: int,
        is_open: bool,
    ) -> Array:
        """Seconds that the compressor made air, (members,)."""
        known = np.full(self.plan.line.members, times.on_us / 1e6)
        if times.unknown_us == 0:
            return known
        if self.gauge is not None and self.sees_pump_ups:
            gauge = held.get(self.gauge[0])
            if gauge is not None and not gauge.stale(to_us, self.period_us):
                return known + booked_us / 1e6
        if not self.may_run(is_open):
            return known
        middle = min(max(state.duty_known, 0.02), 0.98)
        logit = math.log(middle / (1.0 - middle)) + DUTY_LOGIT_SD * state.parameters.duty
        return known + times.unknown_us / 1e6 / (1.0 + np.exp(-logit))

    def may_run(self, is_open: bool) -> bool:
        """Whether the compressor is not switched off for the night."""
        return is_open or not self.plan.line.compressor.off_when_closed

    def _follow(
        self, state: State, on_s: Array, times: ContactTime, dt_s: float, is_open: bool
    ) -> tuple[Array, float]:
        """The filtered duty behind every temperature that follows it, and the duty remembered:
        of the hours in which it may run at all."""
        if dt_s <= 0.0:
            return state.duty, state.duty_known
        now = np.minimum(on_s / dt_s, 1.0)
        duty = state.duty.copy()
        for i, constant_s in self.lagging:
            duty[i] += (now - duty[i]) * -math.expm1(-dt_s / constant_s)
        known = state.duty_known
        if times.unknown_us == 0 and self.may_run(is_open):
            known += (times.on_us / 1e6 / dt_s - known) * -math.expm1(-dt_s / DUTY_MEMORY_S)
        return duty, known

    def _saturated(self, state: State, now: Conditions) -> Array:
        same = state.conditions
        if np.array_equal(now.temperature_k, same.temperature_k) and np.array_equal(
            now.pressure_pa, same.pressure_pa
        ):
            return state.saturated
        ratio: Array = air.saturated_humidity_ratio_unchecked(now.temperature_k, now.pressure_pa)
        return ratio

    def _intake_ratio(self, now: Conditions) -> Array:
        ratio: Array = air.humidity_ratio_unchecked(
            now.temperature_k[0], now.pressure_pa[0], now.relative_humidity
        )
        return ratio

    def delivered(self, parameters: Parameters, now: Conditions, ratio: Array) -> Array:
        """Dry air drawn in per second of running, kg/s: free air is at intake conditions."""
        density: Array = air.dry_air_density_unchecked(
            now.temperature_k[0], now.pressure_pa[0], ratio
        )
        return parameters.delivered_m3_per_s * density

    def metered(
        self,
        meter: Measured,
        held: Mapping[str, Held],
        offsets: Offsets,
        to_us: int,
        dt_s: float,
        otherwise: Array,
    ) -> Array:
        """Dry air drawn in, kg, by the flow meter while it speaks."""
        last = held.get(meter.channel, Held())
        if last.stale(to_us, self.period_us):
            return otherwise
        off = offsets.channels[meter.channel] * (meter.give_or_take * HALF_WIDTH_TO_SD)
        flow_m3_s = np.maximum(last.value + off * (last.value > 0.0), 0.0)
        metered: Array = flow_m3_s * (air.REFERENCE_DRY_AIR_KG_PER_M3 * dt_s)
        return metered

    def _stored(self, parameters: Parameters, now: Conditions, ratio: Array) -> Array:
        """Dry air in every receiver, kg, (receivers, members), as `ratio` is."""
        rows = list(self.plan.receivers)
        density: Array = air.dry_air_density_unchecked(
            now.temperature_k[rows], now.pressure_pa[rows], ratio
        )
        return parameters.volume_m3 * density

    def measured(self, before: flow.AirState, parameters: Parameters, now: Conditions) -> Array:
        """Dry air by gauge where a fresh one speaks; elsewhere taken as unchanged."""
        rows = [n for n, r in enumerate(self.plan.receivers) if r in now.measured]
        if not rows:
            return before.measured
        stored = self._stored(parameters, now, before.ratio)
        if len(rows) == len(self.plan.receivers):
            return stored
        measured = before.measured.copy()
        measured[rows] = stored[rows]
        return measured

    def _drift_is_no_flow(
        self, before: flow.AirState, state: State, now: Conditions, as_before: Conditions
    ) -> flow.AirState:
        """The same readings with the old biases and with the new ones: the difference."""
        with_new = self.measured(before, state.parameters, now)
        with_old = self.measured(before, state.parameters, as_before)
        return flow.bias_changed(before, with_new - with_old)

    def _sighted(
        self, state: State, now: Conditions
    ) -> tuple[flow.AirState, line.WaterState, line.Ledger]:
        """Take in the first measurement of a receiver's pressure."""
        air_state, water, ledger = state.air, state.water, state.ledger
        for row, receiver in enumerate(self.plan.receivers):
            if receiver in now.measured and not air_state.seen[row]:
                stored = self.measured(air_state, state.parameters, now)[row]
                air_state, ratio = flow.first_sight(air_state, row, stored)
                vapor = water.vapor.copy()
                vapor[row] *= ratio
                added = vapor[row] - water.vapor[row]
                water = replace(water, vapor=vapor)
                ledger = replace(ledger, at_start=ledger.at_start + added)
        return air_state, water, ledger

    def _drifted(self, state: State, to_us: int) -> tuple[Beliefs, Offsets]:
        """A bias wanders slowly: once an hour, keeping its spread."""
        if to_us // HOUR_US == state.time_us // HOUR_US:
            return state.beliefs, state.offsets
        described = self.plan.line
        keeps = math.exp(-HOUR_US / 1e6 / BIAS_DRIFT_S)
        stirs = math.sqrt(1.0 - keeps * keeps)
        hour = to_us // HOUR_US
        beliefs = dict(state.beliefs)
        for channel in self.plan.channels:
            name = bias_of(channel)
            stir = standard_normal(described.seed, f"drift of {name}", described.members, hour)
            beliefs[name] = keeps * beliefs[name] + stirs * stir
        return beliefs, make_offsets(self.plan, beliefs)
