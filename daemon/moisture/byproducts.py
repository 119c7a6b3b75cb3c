"""What closed hours tell of the plant: leakage, and what the compressor really delivers.

While nobody works, the stock of air in the receivers tells all: while the compressor rests it falls
by what leaks, and while it runs it rises by what is delivered less what leaks. The stock is that
of the model, P V / (Z R T) less the vapor per member, so that it is corrected for pressure and
temperature and carries the doubt about volume and sensors.

A leak is taken for choked: its flow is proportional to the absolute pressure, and the stock decays
exponentially with the constant k = ln(m1 / m2) / t. It is stated at the middle of the pressure
switch's span. Delivered air is (m2 - m1) / t + k (m1 + m2) / 2 over a pump-up.

Nearly free from tick to tick: arrays are worked on only where the compressor starts or stops, and
once an hour.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Literal

import numpy as np

from daemon.clock import HOUR_US
from daemon.moisture import air
from daemon.moisture.description import Measured
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array, positive, standard_normal
from daemon.moisture.flow import shortest_pump_up_s
from daemon.moisture.leaks import load_cycle_leak
from daemon.moisture.model import Model, State
from daemon.moisture.plant import Phase, Plant, Sample, decay, told

SETTLES_US = 2 * HOUR_US  # after a stop; until then the tank cools (practice)
SHORTEST_DECAY_US = HOUR_US
PERIODS_A_PUMP_UP = 4.0  # at least, where only the gauge tells its ends
LEAST_SWING = 0.03  # of the stock, between the ends of a let-down or pump-up
# Below about 2 bar absolute a leak is choked no more (ratio 1.89), and what is left says little.
FLOOR_GAUGE_PA = 1.0e5
# How far the tank's air may be from the temperature that is believed, between two samples, 95 %
# half-widths, K: practice, no source. Over a night, measured or by rule; within one turn of the
# switch, where compressed air warms ahead of any sensor; and in the two hours after a stop.
MEASURED_K, RULED_K, TURN_K, COOLING_K = 1.0, 3.0, 3.0, 8.0
_PER_K = HALF_WIDTH_TO_SD / 293.15
BUSY_HOURS = 4.0  # over which a high duty must last
WEAK_SHARE = 0.8  # of the rated air: below it a compressor is worn, leaking or choked (practice)

Why = Literal["turned", "ran out", "opened"]


@dataclass(frozen=True, slots=True)
class _Gauge:
    """The first receiver whose pressure is measured."""

    row: int
    channel: str
    temperature: bool  # whether that is measured too


class ByProducts:
    """Follows one line's plant. All of its methods are pure."""

    def __init__(self, model: Model, leak_limit: float) -> None:
        """`leak_limit` is a share of the delivered air."""
        self.model, self._leak_limit = model, leak_limit
        self._line = model.plan.line
        self.contact = self._line.compressor.running
        self.gauge = self._gauged()
        self._turns_are_seen = self.contact is not None or self._sampled_often()

    def _gauged(self) -> _Gauge | None:
        for row in self.model.plan.receivers:
            station = self.model.plan.stations[row]
            if isinstance(station.pressure, Measured):
                temperature = isinstance(station.temperature, Measured)
                return _Gauge(row, station.pressure.channel, temperature)
        return None

    def _sampled_often(self) -> bool:
        """Whether a pump-up takes long enough to be timed by readings of its pressure."""
        seconds = shortest_pump_up_s(self._line)
        return seconds * 1e6 >= PERIODS_A_PUMP_UP * self.model.period_us

    # ---- tick by tick ----

    def tick(self, plant: Plant, before: State, after: State, on_s: float, is_open: bool) -> Plant:
        """After a step of the model; `on_s` is how long the compressor ran in it."""
        if is_open:
            if plant.closed_us < 0:
                return plant
            return replace(self._opened(plant, before), closed_us=-1)
        if plant.closed_us < 0:
            plant = replace(plant, closed_us=after.time_us)
        if self.gauge is None:
            return self._by_contact_alone(plant, before, after, on_s)
        return self._by_gauge(plant, before, after, on_s)

    def _by_gauge(self, plant: Plant, before: State, after: State, on_s: float) -> Plant:
        phase = plant.phase
        if not self._known(after):
            return plant if phase is None else replace(plant, phase=None)
        running = self._running(after)
        if phase is None:
            return self._begun(plant, after, running)
        if running != phase.running:
            return self._turned(plant, before, after, running)
        if running:
            return plant
        if on_s > 0.0:  # it ran unnoticed between two readings
            return replace(plant, phase=None)
        return self._resting(plant, phase, before, after)

    def _opened(self, plant: Plant, before: State) -> Plant:
        if self.gauge is not None and plant.phase is not None:
            plant = self._ended(plant, _stock(before), before, "opened")
        return self.broken_off(plant)

    def broken_off(self, plant: Plant) -> Plant:
        """Air went where it is not known: what was being followed is of no use."""
        return replace(plant, phase=None, decay_per_s=None, turn_us=-1)

    def hour(self, plant: Plant, duty: float) -> Plant:
        """After a whole working hour whose duty is known."""
        share = 1.0 / min(plant.busy_h + 1.0, BUSY_HOURS)
        busy = plant.busy + share * (duty - plant.busy)
        return replace(plant, busy=busy, busy_h=min(plant.busy_h + 1.0, BUSY_HOURS))

    def serviced(self, plant: Plant) -> Plant:
        """The compressor was worked on: what it delivered before counts no more."""
        return replace(plant, delivered_kg_per_s=None, rated_kg_per_s=None, weak=0.0)

    # ---- its parts ----

    def _known(self, state: State) -> bool:
        assert self.gauge is not None
        contact = self.contact is None or state.contact_unknown_us < 0
        return contact and self.gauge.row in state.conditions.measured

    def _running(self, state: State) -> bool:
        return bool(state.contact.closed) if self.contact is not None else state.pump.pumping

    def _low(self, state: State) -> bool:
        assert self.gauge is not None
        return state.held[self.gauge.channel].value < FLOOR_GAUGE_PA

    def _begun(self, plant: Plant, state: State, running: bool) -> Plant:
        if not running and self._low(state):
            return plant
        return replace(plant, phase=Phase(running, _stock(state)))

    def _turned(self, plant: Plant, before: State, after: State, running: bool) -> Plant:
        """The compressor started or stopped within this tick."""
        last, first = _stock(before), _stock(after)
        if self.contact is None:
            last = self._turning_point(before, after)
            if not running:  # it stopped somewhere in the period before its highest reading
                first, last = last, Sample(last.time_us - self.model.period_us // 2, last.kg)
        ended = self._ended(plant, last, before, "turned")
        return replace(ended, phase=Phase(running, first))

    def _turning_point(self, before: State, after: State) -> Sample:
        """Where a gauge alone tells the turn: at the extreme, which is seen only afterwards."""
        assert self.gauge is not None
        now = after.conditions.pressure_pa[self.gauge.row]
        was = now + (before.pump.extreme_pa - after.held[self.gauge.channel].value)
        return Sample(before.pump.extreme_us, _stock(after).kg * (was / now))

    def _resting(self, plant: Plant, phase: Phase, before: State, after: State) -> Plant:
        """The compressor rests: note the settled tank, every hour, and when the air runs out."""
        if self._low(after):
            return replace(self._ended(plant, _stock(before), before, "ran out"), phase=None)
        if phase.settled is None:
            if after.time_us - phase.first.time_us < SETTLES_US:
                return plant
            stock = _stock(after)
            return replace(plant, phase=replace(phase, settled=stock, hour=stock))
        if after.time_us // HOUR_US == before.time_us // HOUR_US:
            return plant
        return replace(plant, phase=phase.noted(_stock(after)))

    def _ended(self, plant: Plant, last: Sample, state: State, why: Why) -> Plant:
        """A stretch is over; `last` lies within it, and `state` is of about then."""
        phase = plant.phase
        if phase is None or last.time_us <= phase.first.time_us:
            return plant
        if phase.running:
            return self._pumped_up(plant, phase, last, state) if why == "turned" else plant
        settled = phase.settled
        if settled is not None and last.time_us - settled.time_us >= SHORTEST_DECAY_US:
            return self._decayed(plant, settled, last, state) if phase.steady else plant
        swings = 1.0 - float((last.kg / phase.first.kg).mean()) >= LEAST_SWING
        return self._let_down(plant, phase, last, state, why) if swings else plant

    def _decayed(self, plant: Plant, settled: Sample, last: Sample, state: State) -> Plant:
        """A tank that had cooled lost its air for hours."""
        assert self.gauge is not None
        width_k = MEASURED_K if self.gauge.temperature else RULED_K
        return self._leaked(plant, decay(settled, self._doubted(last, width_k)), state)

    def _let_down(self, plant: Plant, phase: Phase, last: Sample, state: State, why: Why) -> Plant:
        """A let-down that was not followed for hours: it ran out, or was one turn of the switch."""
        if why == "opened":
            return plant
        if why == "ran out":
            return self._leaked(plant, decay(phase.first, self._doubted(last, COOLING_K)), state)
        constant = decay(phase.first, self._doubted(last, TURN_K))
        plant = replace(plant, decay_per_s=constant)
        settled = last.time_us - plant.closed_us >= SETTLES_US
        return self._leaked(plant, constant, state) if settled else plant

    def _pumped_up(self, plant: Plant, phase: Phase, last: Sample, state: State) -> Plant:
        if plant.decay_per_s is None or not self._turns_are_seen:
            return plant
        last = self._doubted(last, TURN_K)
        gained = last.kg - phase.first.kg
        if float((gained / last.kg).mean()) < LEAST_SWING:
            return plant
        seconds = (last.time_us - phase.first.time_us) / 1e6
        lost = plant.decay_per_s * (phase.first.kg + last.kg) / 2.0
        figure = told(plant.delivered_kg_per_s, gained / seconds + lost, state.time_us)
        rated = self._rated(state)
        weak = float(np.count_nonzero(figure.value < WEAK_SHARE * rated)) / rated.size
        return replace(plant, delivered_kg_per_s=figure, rated_kg_per_s=rated, weak=weak)

    def _rated(self, state: State) -> Array:
        """What the type plate promises, kg/s of the air at the intake now, (members,)."""
        described = self._line.compressor.delivered
        base = _always(self._line.seed, "rated air", self._line.members)
        rated: Array = positive(base, described.value, described.give_or_take) * _density(state)
        return rated

    def _leaked(self, plant: Plant, constant: Array, state: State) -> Plant:
        """A decay constant found: as a flow at the middle of the switch's span."""
        assert self.gauge is not None
        pressure = state.conditions.pressure_pa
        compressor = self._line.compressor
        middle = (compressor.cut_in.value + compressor.cut_out.value) / 2.0 + pressure[0]
        stock = _stock(state).kg * (middle / pressure[self.gauge.row])
        return self._leak_found(plant, np.maximum(constant * stock, 0.0), state)

    def _leak_found(self, plant: Plant, leak: Array, state: State) -> Plant:
        figure = told(plant.leak_kg_per_s, leak, state.time_us)
        delivered = state.parameters.delivered_m3_per_s * _density(state)
        high = np.count_nonzero(figure.value > self._leak_limit * delivered)
        return replace(plant, leak_kg_per_s=figure, leak_high=float(high) / leak.size)

    def _by_contact_alone(self, plant: Plant, before: State, after: State, on_s: float) -> Plant:
        """Without a gauge: the share of time that the compressor runs, from start to start."""
        if self.contact is None:
            return plant
        if after.contact_unknown_us >= 0:
            return plant if plant.turn_us < 0 else replace(plant, turn_us=-1)
        started = bool(after.contact.closed) and not before.contact.closed
        if plant.turn_us >= 0 and not started:
            return replace(plant, turn_on_s=plant.turn_on_s + on_s) if on_s > 0.0 else plant
        if not started:
            return plant
        if plant.turn_us >= 0 and plant.turn_us - plant.closed_us >= SETTLES_US:
            whole_s = (before.time_us - plant.turn_us) / 1e6
            delivered = after.parameters.delivered_m3_per_s * _density(after)
            leak = np.asarray(
                load_cycle_leak(delivered, plant.turn_on_s, whole_s - plant.turn_on_s)
            )
            plant = self._leak_found(plant, leak, after)
        return replace(plant, turn_us=before.time_us, turn_on_s=on_s)

    def _doubted(self, sample: Sample, width_k: float) -> Sample:
        """A sample as it may be if its air is warmer or colder than what is believed.

        Half of the variance is the same each time: an average over many turns keeps it.
        """
        line = self._line
        always = _always(line.seed, "air in the tank", line.members)
        now = standard_normal(line.seed, "air in the tank", line.members, sample.time_us)
        shift = (always + now) * (math.sqrt(0.5) * width_k * _PER_K)
        return Sample(sample.time_us, sample.kg * (1.0 + shift))


@lru_cache(maxsize=8)
def _always(seed: int, name: str, members: int) -> Array:
    """A draw that is the same at all times, and is asked for at many."""
    drawn = standard_normal(seed, name, members)
    drawn.flags.writeable = False
    return drawn


def _stock(state: State) -> Sample:
    return Sample(state.time_us, state.air.measured.sum(axis=0))


def _density(state: State) -> Array:
    """Dry air in a cubic metre of what is drawn in, kg/m3, (members,)."""
    now = state.conditions
    temperature, pressure = now.temperature_k[0], now.pressure_pa[0]
    ratio = air.humidity_ratio_unchecked(temperature, pressure, now.relative_humidity)
    density: Array = air.dry_air_density(temperature, pressure, ratio)
    return density
