"""Watches drains that empty themselves, and tanks whose pressure falls. Pure.

A drain is taken to work; what speaks against that, or for it, is gathered here: what somebody
found, a float switch, a leak that was not there before.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from daemon.drain_record import DrainRecord, DrainsWatched, Fall, Leak
from daemon.moisture.description import Measured
from daemon.moisture.drains import chance_stuck
from daemon.moisture.ensemble import percentiles
from daemon.moisture.floats import switches
from daemon.moisture.flow import SWING_OF_NOISE
from daemon.moisture.model import Model, State
from daemon.moisture.plant import TURNS_AVERAGED, Plant
from daemon.state import CoreState

# More than this beside what a working drain leaves is no error of a cup: common practice.
FOUND_TIMES, FOUND_KG = 2.0, 0.02
# A tank's pressure that falls by this much within half a minute, as if this many times the
# compressor's delivery went out of it, while the compressor rests: nobody uses air that fast, but
# an opened drain valve lets it out (a 4 mm valve at 8 bar some 15 L/s). Common practice, no source.
FALL_PA, FALL_WITHIN_US, FALL_TIMES = 0.3e5, 30_000_000, 3.0
# A leak so much above what it was before, and of so much of the delivered air, is a drain that
# stands open rather than one more worn coupling. Common practice, no source.
BLOWS_TIMES, BLOWS_OF_DELIVERED, FIRST_OF_DELIVERED = 3.0, 0.1, 0.5

Heard = Mapping[str, Sequence[tuple[int, float, bool]]]


class DrainWatching:
    """The drains and tanks of one site."""

    def __init__(self, model: Model) -> None:
        self.model = model
        plan = model.plan
        self.traps = {plan.stations[i].id: i for i in model.fittings.drains}
        self.switches = {
            channel: plan.stations[i].id
            for i, switch in switches(plan)
            if (channel := switch.channel) and plan.stations[i].id in self.traps
        }
        compressor = plan.line.compressor
        self.volumes: dict[str, tuple[str, float]] = {}
        for i in plan.receivers:
            station = plan.stations[i]
            if isinstance(station.pressure, Measured) and station.volume is not None:
                self.volumes[station.id] = (station.pressure.channel, station.volume.value)
        self.most_m3_per_s = FALL_TIMES * compressor.delivered.value
        self._delivered_kg_per_s = compressor.delivered.value * 1.2  # kg/m3, near enough here

    def begun(self, now_us: int) -> DrainsWatched:
        """At the first tick every drain is taken to have just been seen working."""
        return DrainsWatched(drains={name: DrainRecord(now_us) for name in self.traps})

    def carried_over(self, fresh: DrainsWatched, old: DrainsWatched) -> DrainsWatched:
        """After a change of the line's description: drains of the same name are as they were."""
        kept = {
            name: replace(old.drains.get(name, record), passed_kg=record.passed_kg)
            for name, record in fresh.drains.items()
        }
        return replace(fresh, drains=kept, leak=old.leak)

    # ---- tick by tick ----

    def step(self, before: CoreState, after: CoreState, heard: Heard) -> DrainsWatched:
        """After a step in which this was heard."""
        watched = before.drains
        if self.volumes:
            watched = self._pressures(watched, before.model, after.model, heard)
        if self.switches:
            watched = self._floats(watched, before, after)
        if self.traps:
            watched = self.leaked(watched, after.followed.plant)
        return watched

    def _pressures(
        self, watched: DrainsWatched, before: State, model: State, heard: Heard
    ) -> DrainsWatched:
        gauges, falls = watched.gauges, watched.falls
        rests = model.contact.closed is False or (
            model.contact.closed is None and not model.pump.pumping
        )
        # of the readings before: the fall itself looks like noise to the pump's watch
        noise_pa = SWING_OF_NOISE * float(np.sqrt(before.pump.noise_pa2))
        for tank, (channel, volume_m3) in self.volumes.items():
            told = [(at, value) for at, value, good in heard.get(channel, ()) if good]
            if not told:
                continue
            recent = (*gauges.get(tank, ()), *told)
            last_us, last_pa = told[-1]
            recent = tuple(each for each in recent if each[0] > last_us - FALL_WITHIN_US)
            if not rests:
                recent = recent[-1:]
            gauges = {**gauges, tank: recent}
            high_us, high_pa = max(recent, key=lambda each: each[1])
            drop_pa, seconds = high_pa - last_pa, (last_us - high_us) / 1e6
            if drop_pa < max(FALL_PA, noise_pa) or seconds <= 0.0:
                continue
            if volume_m3 * drop_pa / 1e5 / seconds > self.most_m3_per_s:
                falls = {**falls, tank: self._fallen(falls.get(tank), last_us, drop_pa, seconds)}
        return replace(watched, gauges=gauges, falls=falls)

    def _fallen(self, before: Fall | None, at_us: int, drop_pa: float, seconds: float) -> Fall:
        """One fall goes on over several readings: it keeps the time at which it was noticed."""
        if before is not None and at_us - before.at_us < 4 * FALL_WITHIN_US:
            return Fall(before.at_us, max(before.drop_pa, drop_pa), max(before.seconds, seconds))
        return Fall(at_us, drop_pa, seconds)

    def _floats(self, watched: DrainsWatched, before: CoreState, after: CoreState) -> DrainsWatched:
        """A float switch that opens again, while nobody drained, has seen its drain work."""
        for channel, trap in self.switches.items():
            was, now = before.sensed.floats.get(channel), after.sensed.floats.get(channel)
            if was is None or now is None or was is now or not was.closed or now.closed:
                continue
            if after.traps[trap].last_drain_us < was.since_us:
                watched = self.seen(watched, after.model, trap)
        return watched

    def leaked(self, watched: DrainsWatched, plant: Plant) -> DrainsWatched:
        """With the line's leak, where it was measured anew."""
        figure, leak = plant.leak_kg_per_s, watched.leak
        if figure is None or figure.at_us <= leak.measured_us:
            return watched
        now = float(np.median(figure.value))
        share = 1.0 / min(max(figure.count, 1.0), TURNS_AVERAGED)
        known = leak.measured_us >= 0
        last = leak.figure_kg_per_s + (now - leak.figure_kg_per_s) / share if known else now
        before = leak.figure_kg_per_s if known else -1.0
        if leak.blows:  # against what it was before that
            before = leak.before_kg_per_s
        if before >= 0.0:
            least = BLOWS_OF_DELIVERED * self._delivered_kg_per_s
            blows = last > BLOWS_TIMES * before and last - before > least
        else:
            blows = last > FIRST_OF_DELIVERED * self._delivered_kg_per_s
        return replace(watched, leak=Leak(figure.at_us, now, last, before, blows))

    # ---- what people say ----

    def seen(self, watched: DrainsWatched, model: State, trap: str) -> DrainsWatched:
        """A drain was seen working."""
        if trap not in self.traps:
            return watched
        record = DrainRecord(model.time_us, self._passed_kg(model, trap))
        leak = replace(watched.leak, blows=False)
        return replace(watched, drains={**watched.drains, trap: record}, leak=leak)

    def drained(
        self, watched: DrainsWatched, model: State, trap: str, volume_kg: float | None
    ) -> DrainsWatched:
        """Somebody opened a drain by hand that empties itself; `model` is as it was before that.

        More than a working drain leaves says that it does not work. Little says that it does,
        once more has come than its trap could hold.
        """
        if trap not in self.traps or volume_kg is None:
            return watched
        i = self.traps[trap]
        most = float(percentiles(self.model.contents(model)[i])[2])
        if volume_kg > FOUND_TIMES * most + FOUND_KG:
            record = replace(watched.drains[trap], found_us=model.time_us, found_kg=volume_kg)
            return replace(watched, drains={**watched.drains, trap: record})
        described = self.model.plan.stations[i].trap
        assert described is not None
        passed_kg = self._passed_kg(model, trap) - watched.drains[trap].passed_kg
        if passed_kg > described.capacity.value:
            return self.seen(watched, model, trap)
        return watched

    def chance_stuck(self, watched: DrainsWatched, trap: str, now_us: int) -> float | None:
        """The chance that a drain is stuck; None for one that is worked by hand."""
        record = watched.drains.get(trap)
        return None if record is None else chance_stuck(record.seen_us, now_us)

    def _passed_kg(self, model: State, trap: str) -> float:
        return float(np.median(model.ledger.passed[self.traps[trap]]))
