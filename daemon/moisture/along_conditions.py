"""Conditions at several ticks, as `Evaluation` makes them one by one.

Nearly always every member goes the same way as the sensors that it follows, from where its own
biases put it: what (stations, ticks, members) would hold is then two small arrays. Where a source
follows the duty, where a sensor is silent, where a regulator is fed with too little or a limit is
reached, all of it is worked out.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, cast

import numpy as np

from daemon.moisture.along_course import Course
from daemon.moisture.conditions import (
    COLDEST_K,
    HIGHEST_PA,
    HOTTEST_K,
    LOWEST_PA,
    Conditions,
    Evaluation,
    HeldAlong,
)
from daemon.moisture.description import Fixed, Like, Measured, Source
from daemon.moisture.ensemble import Array
from daemon.moisture.model import Model, State
from daemon.moisture.plan import Plan


@dataclass(frozen=True, slots=True)
class Wandering:
    """Stands for an array (stations, ticks, members): start + way, worked out where it is asked
    for, `[station]`, `[[stations]]`, `[station, tick]` or `[:, tick]`."""

    start: Array  # (stations, members), at the first tick
    way: Array  # (stations, ticks), from the first tick on

    @property
    def shape(self) -> tuple[int, int, int]:
        return len(self.start), self.way.shape[1], self.start.shape[1]

    def __getitem__(self, at: Any) -> Array:
        if isinstance(at, list):
            return np.array([self[station] for station in at]).reshape(-1, *self.shape[1:])
        if not isinstance(at, tuple):
            station: Array = self.start[at] + self.way[at][:, None]
            return station
        stations, tick = at
        found: Array = self.start[stations] + self.way[stations, tick][..., None]
        return found

    @property
    def least(self) -> Array:
        """(stations,)."""
        least: Array = self.start.min(axis=1) + self.way.min(axis=1)
        return least

    @property
    def greatest(self) -> Array:
        """(stations,)."""
        greatest: Array = self.start.max(axis=1) + self.way.max(axis=1)
        return greatest

    def within(self, lowest: float, highest: float) -> bool:
        """Whether no value comes to either limit."""
        return bool((self.least > lowest).all() and (self.greatest < highest).all())


def least_of(values: Array | Wandering, station: int) -> float:
    """The least value of one station, of (stations, ticks, members)."""
    if isinstance(values, Wandering):
        return float(values.start[station].min() + values.way[station].min())
    return float(values[station].min())


def conditions(
    model: Model, state: State, course: Course, duty: Mapping[int, Array]
) -> tuple[Conditions, dict[str, HeldAlong]] | None:
    """Temperatures, pressures and humidity at every tick, where all of a kind that wander do so as
    `Wandering`; None where something begins anew."""
    held = {
        name: HeldAlong(cast(Any, values[:, None]), silent=course.silent[name])
        for name, values in course.values.items()
    }
    evaluation = Evaluation(
        model.plan,
        held,
        state.offsets,
        cast(Any, duty),
        int(course.times_us[0]),
        dict(state.lapses),
        course.times_us[:, None],
    )
    now = None
    if not model.fittings.baths:  # they warm a station in place
        now = _wandering(model.plan, state, course, evaluation)
    if now is None:
        now = evaluation.conditions()
    return (now, held) if evaluation.lapses.keys() == state.lapses.keys() else None


def _wandering(
    plan: Plan, state: State, course: Course, evaluation: Evaluation
) -> Conditions | None:
    """The same, if every station's values wander from what they are at the first tick."""
    ways = _Ways(plan, course)
    temperature, pressure = ways.of_temperatures(), ways.of_pressures()
    if temperature is None or pressure is None:
        return None
    first = Evaluation(
        plan,
        {
            name: HeldAlong(float(values[0]), silent=course.silent[name])
            for name, values in course.values.items()
        },
        state.offsets,
        state.duty,
        int(course.times_us[0]),
        evaluation.lapses,
    ).conditions()
    kelvin = Wandering(first.temperature_k, temperature)
    pascal = Wandering(first.pressure_pa, pressure)
    if not kelvin.within(COLDEST_K, HOTTEST_K) or not pascal.within(LOWEST_PA, HIGHEST_PA):
        return None
    for i, station in enumerate(plan.stations):
        if station.kind == "regulator" and not _is_fed(pascal, i, plan.parent[i]):
            return None
    temperatures, pressures = cast(Any, kelvin), cast(Any, pascal)
    return Conditions(temperatures, pressures, evaluation.humidity(), first.measured)


def _is_fed(pressure: Wandering, regulator: int, above: int) -> bool:
    """Whether a regulator has more before it than it lets through, all along."""
    apart = (pressure.start[regulator] - pressure.start[above]).max()
    return bool(apart + (pressure.way[regulator] - pressure.way[above]).max() < 0.0)


class _Ways:
    """How far each station's values are from the first tick's, (ticks,); None: members differ."""

    def __init__(self, plan: Plan, course: Course) -> None:
        self._plan, self._course = plan, course

    def of_temperatures(self) -> Array | None:
        """(stations, ticks), or None."""
        ways = self._new()
        for i in self._plan.temperature_order:
            if not self._follows(ways, i, self._plan.stations[i].temperature):
                return None
        return ways

    def of_pressures(self) -> Array | None:
        """The same; a gauge's reading is above the intake's."""
        ways = self._new()
        for i in self._plan.pressure_order:
            source = self._plan.stations[i].pressure
            if not self._follows(ways, i, source):
                return None
            if i and isinstance(source, Fixed | Measured) and source.gauge:
                ways[i] += ways[0]
        return ways

    def _new(self) -> Array:
        return np.zeros((len(self._plan.stations), len(self._course.times_us)))

    def _follows(self, ways: Array, i: int, source: Source) -> bool:
        match source:
            case Measured(channel=channel):
                if self._course.silent.get(channel, True):
                    return False
                values = self._course.values[channel]
                ways[i] = values - values[0]
            case Like(station=station):
                ways[i] = ways[self._plan.index[station]]
            case Fixed():
                pass
            case _:
                return False
        return True
