"""Reads every sensor once a tick: one thread a bus, a deadline, and no reading without its reason.

A driver call cannot be aborted from outside (it would leave the bus locked), so a bus that does not
answer is left alone until it does: its sensors have bad readings meanwhile, and what it says late
is dropped. Deadlines are in real seconds, also where the shop's clock runs faster.
"""

from __future__ import annotations

import logging
import math
import queue
import threading
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

from sensors import reasons
from sensors.guard import faults
from sensors.reading import Reading, Sensor, SensorFault
from sensors.registry import DRIVERS, Driver, Hardware, SensorConfig

REOPEN_AFTER = 3  # faults in a row
SLOW_LIMIT_S = 5.0  # a slow bus may take this, and as much again for every part as below
SLOW_PART_S = 2.0
CLOSE_WAIT_S = 2.0

log = logging.getLogger(__name__)


@dataclass(frozen=True, slots=True)
class HungBus:
    """A bus that has not answered."""

    name: str
    since_us: int  # the tick whose request it has not answered, wall clock
    since_s: float  # the same on the sampler's monotonic clock


class _Part:
    """One configured sensor: opened when first read, opened anew after faults."""

    def __init__(self, config: SensorConfig, driver: Driver, hardware: Hardware) -> None:
        self.config = config
        self._driver = driver
        self._hardware = hardware
        self._sensor: Sensor | None = None
        self._faults = 0
        self._last_fault = ""

    def read(self, now_us: int) -> list[Reading]:
        """Good readings, or one bad reading a channel."""
        try:
            with faults(self.config.id):
                if self._sensor is None:
                    self._sensor = self._driver.open(self.config, self._hardware)
                readings = list(self._sensor.read(now_us))
        except SensorFault as fault:
            return self._failed(now_us, fault.reason, str(fault))
        except Exception as error:  # a mistake in a driver must not stop the others
            log.exception("%s: the driver failed", self.config.id)
            return self._failed(now_us, reasons.DRIVER_FAILED, repr(error))
        if self._last_fault:
            log.info("%s: answers again, after: %s", self.config.id, self._last_fault)
        self._faults, self._last_fault = 0, ""
        return readings

    def bad(self, now_us: int, reason: str) -> list[Reading]:
        return [
            Reading(channel.name, math.nan, now_us, reason)
            for channel in self._driver.channels(self.config)
        ]

    def close(self) -> None:
        sensor, self._sensor = self._sensor, None
        if sensor is not None:
            try:
                sensor.close()
            except Exception:  # closing is all that is left to do
                log.exception("%s: closing failed", self.config.id)

    def _failed(self, now_us: int, reason: str, text: str) -> list[Reading]:
        if reason != self._last_fault:
            log.warning("%s", text)
        self._last_fault = reason
        self._faults += 1
        if self._faults >= REOPEN_AFTER:
            self._faults = 0
            self.close()
        return self.bad(now_us, reason)


@dataclass(eq=False)
class _Job:
    """One tick's work on one bus."""

    now_us: int
    since_s: float
    # by sensor, with when they were finished on the sampler's monotonic clock
    readings: dict[str, tuple[list[Reading], float]] = field(default_factory=dict)
    done: bool = False
    given_up: bool = False


class _Bus:
    """The thread that owns one bus, and the job it is at."""

    def __init__(
        self,
        name: str,
        slow: bool,
        changed: threading.Condition,
        monotonic: Callable[[], float],
    ) -> None:
        self.name = name
        self.slow = slow
        self._monotonic = monotonic
        self.parts: list[_Part] = []
        self.job: _Job | None = None
        self._changed = changed
        self._jobs: queue.SimpleQueue[_Job | None] = queue.SimpleQueue()
        self.thread = threading.Thread(target=self._run, name=f"bus {name}", daemon=True)

    def begin(self, job: _Job) -> None:
        self.job = job
        self._jobs.put(job)

    def end(self) -> None:
        self._jobs.put(None)

    def bad(self, now_us: int, reason: str) -> dict[str, list[Reading]]:
        return {part.config.id: part.bad(now_us, reason) for part in self.parts}

    @property
    def limit_s(self) -> float:
        """How long a slow bus may work on one request before it counts as hung."""
        return SLOW_LIMIT_S + SLOW_PART_S * len(self.parts)

    def _run(self) -> None:
        while (job := self._jobs.get()) is not None:
            for part in self.parts:
                job.readings[part.config.id] = (part.read(job.now_us), self._monotonic())
            self._finish(job)
        for part in self.parts:
            part.close()

    def _finish(self, job: _Job) -> None:
        with self._changed:
            job.done = True
            self._changed.notify_all()


class Sampler:
    """All sensors of a site. Used by one thread.

    `monotonic` is in real seconds: it says how late a slow bus's readings are, and since when a bus
    hangs.
    """

    def __init__(
        self,
        sensors: Sequence[SensorConfig],
        hardware: Hardware,
        monotonic: Callable[[], float],
    ) -> None:
        self._order = [config.id for config in sensors]
        self._monotonic = monotonic
        self._changed = threading.Condition()
        self._buses: dict[str, _Bus] = {}
        self._last_us: int | None = None
        self._closed = False
        for config in sensors:
            driver = DRIVERS[config.driver]
            name = driver.bus(config)
            bus = self._buses.get(name)
            if bus is None:
                bus = self._buses[name] = _Bus(name, driver.slow, self._changed, monotonic)
            bus.parts.append(_Part(config, driver, hardware))
        for bus in self._buses.values():
            bus.thread.start()

    def sample(self, now_us: int, deadline_s: float, *, patient: bool = False) -> list[Reading]:
        """Readings of every sensor at `now_us`, after at most `deadline_s` real seconds.

        In the sensors' order, each channel's times rising and within (last call, now]. A slow bus
        holds nothing up: it gives what it finished since the last call, at its own time, or nothing
        yet; with `patient` it is waited for like the others, as far as the deadline.
        """
        if self._closed:
            raise RuntimeError("the sampler is closed")
        buses = list(self._buses.values())
        hung = {bus.name for bus in buses if not self._ask(bus, now_us)}
        awaited = [bus for bus in buses if bus.name not in hung and (patient or not bus.slow)]
        with self._changed:
            self._changed.wait_for(lambda: all(_is_done(bus) for bus in awaited), deadline_s)
        found: dict[str, list[Reading]] = {}
        for bus in buses:
            found |= self._collect(bus, now_us)
        self._last_us = now_us
        return [reading for sensor in self._order for reading in found.get(sensor, ())]

    def hung_buses(self) -> tuple[HungBus, ...]:
        """The buses that did not answer by their deadline and still have not."""
        with self._changed:
            return tuple(
                HungBus(bus.name, bus.job.now_us, bus.job.since_s)
                for bus in self._buses.values()
                if bus.job is not None and bus.job.given_up and not bus.job.done
            )

    def close(self) -> tuple[str, ...]:
        """End the threads and let go of the parts; the names of buses whose thread still hangs.

        May be called twice.
        """
        if not self._closed:
            self._closed = True
            for bus in self._buses.values():
                bus.end()
        until_s = self._monotonic() + CLOSE_WAIT_S
        for bus in self._buses.values():
            bus.thread.join(max(0.0, min(CLOSE_WAIT_S, until_s - self._monotonic())))
        return tuple(bus.name for bus in self._buses.values() if bus.thread.is_alive())

    def _ask(self, bus: _Bus, now_us: int) -> bool:
        """Set the bus to work if it is free; whether it may still answer in time."""
        with self._changed:
            job = bus.job
            if job is not None and job.done and job.given_up:
                log.info("bus %s answers again; what it said late is dropped", bus.name)
                job = bus.job = None
            if job is None:
                bus.begin(_Job(now_us, self._monotonic()))
                return True
            return not job.given_up

    def _collect(self, bus: _Bus, now_us: int) -> dict[str, list[Reading]]:
        """What a bus has for this tick."""
        with self._changed:
            job = bus.job
            assert job is not None
            if job.done and not job.given_up:
                bus.job = None
                return {
                    sensor: self._in_time(readings, finished_s, now_us)
                    for sensor, (readings, finished_s) in job.readings.items()
                }
            late_s = self._monotonic() - job.since_s
            if bus.slow and not job.given_up and late_s < bus.limit_s:
                return {}
            if not job.given_up:
                log.error("bus %s does not answer", bus.name)
            job.given_up = True
        return bus.bad(now_us, reasons.BUS_HANGS)

    def _in_time(self, readings: list[Reading], finished_s: float, now_us: int) -> list[Reading]:
        """Readings asked for in an earlier tick get the time when they were finished."""
        last_us = self._last_us
        if last_us is None or all(reading.time_us > last_us for reading in readings):
            return readings
        age_us = round((self._monotonic() - finished_s) * 1e6)
        at_us = min(max(now_us - age_us, last_us + 1), now_us)
        return [replace(reading, time_us=at_us) for reading in readings]


def _is_done(bus: _Bus) -> bool:
    return bus.job is not None and bus.job.done
