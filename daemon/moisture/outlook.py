"""What the coming days' air will be like: today's pattern, persisted, with a growing spread.

Of the intake, the last 24 hours are kept by hour of the day: temperature and humidity ratio. Of
every other sensor, how it stands while air flows: a temperature as a difference to the intake's, a
pressure as it is. Each is a mean weighed with the air drawn in, forgotten over some four
working days: what a tank's sensor says on a Sunday tells nothing of Monday's.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from daemon.clock import HOUR_US, MINUTE_US
from daemon.moisture import air
from daemon.moisture.conditions import Held
from daemon.moisture.description import Fixed, Measured
from daemon.moisture.ensemble import Array
from daemon.moisture.model import State
from daemon.moisture.plan import Plan
from daemon.moisture.week import wandering

SAMPLED_EVERY_US = 5 * MINUTE_US
KEEPS = 0.997  # of the weight of what was before, at each sample with flow
# How far tomorrow's air is from today's at the same hour, and the limit that this grows to: held
# against a year of two places' weather in the tests (TMY3, NSRDB). K, and on the logarithm of the
# humidity ratio; warmer days are moister.
TEMPERATURE_SD_K, RATIO_LOG_SD, DAY_TO_DAY, MOISTER_WHEN_WARM = 4.2, 0.42, 0.8, 0.7


@dataclass(frozen=True, slots=True)
class Typical:
    """How a sensor stands while air flows: a weighed sum, and the weight."""

    total: float = 0.0
    weight: float = 0.0


@dataclass(frozen=True, slots=True)
class Pattern:
    """The last day's air at the intake, and the line while it works."""

    temperature_k: Array  # (24,), hours of the day in UTC; NaN where nothing was heard yet
    ratio: Array  # (24,), kg/kg
    typical: Mapping[str, Typical] = field(default_factory=dict)  # by channel
    drawn_kg: float = 0.0  # by the last sample, of all time
    samples: int = 0  # of the hour that goes on
    sum_k: float = 0.0
    sum_ratio: float = 0.0


def new_pattern() -> Pattern:
    """Nothing was heard yet."""
    return Pattern(np.full(24, np.nan), np.full(24, np.nan))


@dataclass(frozen=True, slots=True)
class Sight:
    """What the pattern is told of one time. Arrays are (members,)."""

    time_us: int
    intake_k: Array
    intake_ratio: Array  # kg/kg, of what is drawn in
    drawn_kg: Array  # of all time
    said: Mapping[str, float]  # by every channel that speaks, its last good value


def is_sampled(before_us: int, now_us: int) -> bool:
    """Whether a step from one time to another is one that the pattern is told of."""
    return now_us // SAMPLED_EVERY_US != before_us // SAMPLED_EVERY_US


def sight(plan: Plan, state: State) -> Sight:
    """What is seen after a step of the model."""
    period_us = round(plan.line.period_s * 1e6)
    said = {
        name: held.value
        for name, held in state.held.items()
        if not held.stale(state.time_us, period_us)
    }
    intake_k = state.conditions.temperature_k[0]
    return Sight(state.time_us, intake_k, intake_ratio(state), state.air.drawn, said)


def told(pattern: Pattern, plan: Plan, before_us: int, sight: Sight) -> Pattern:
    """After a step of the model from `before_us`, one that `is_sampled`."""
    warm_k, drawn = float(sight.intake_k.mean()), float(sight.drawn_kg.mean())
    ratio = float(sight.intake_ratio.mean())
    typical = pattern.typical
    weight = drawn - pattern.drawn_kg
    if weight > 0.0:
        typical = {
            name: _weighed(typical.get(name, Typical()), value, weight)
            for name, value in _standing(plan, sight, warm_k)
        }
    pattern = replace(
        pattern,
        typical=typical,
        drawn_kg=drawn,
        samples=pattern.samples + 1,
        sum_k=pattern.sum_k + warm_k,
        sum_ratio=pattern.sum_ratio + ratio,
    )
    # a sample at the full hour closes the hour before it
    return _hour_over(pattern, before_us) if _new_hour(before_us, sight.time_us) else pattern


def _new_hour(before_us: int, now_us: int) -> bool:
    return now_us // HOUR_US != before_us // HOUR_US


def _hour_over(pattern: Pattern, in_it_us: int) -> Pattern:
    slot = in_it_us // HOUR_US % 24
    warm, ratio = pattern.temperature_k.copy(), pattern.ratio.copy()
    warm[slot] = pattern.sum_k / pattern.samples
    ratio[slot] = pattern.sum_ratio / pattern.samples
    return replace(pattern, temperature_k=warm, ratio=ratio, samples=0, sum_k=0.0, sum_ratio=0.0)


def _weighed(before: Typical, value: float, weight: float) -> Typical:
    return Typical(KEEPS * before.total + weight * value, KEEPS * before.weight + weight)


def _standing(plan: Plan, sight: Sight, warm_k: float) -> list[tuple[str, float]]:
    """Every channel but the intake's that speaks: temperatures less the intake's, pressures."""
    found = []
    for station in plan.stations[1:]:
        for source, less in ((station.temperature, warm_k), (station.pressure, 0.0)):
            if isinstance(source, Measured) and source.channel in sight.said:
                found.append((source.channel, sight.said[source.channel] - less))
    return found


def intake_ratio(state: State) -> Array:
    """The humidity ratio of what is drawn in now, kg/kg, (members,)."""
    now = state.conditions
    ratio: Array = air.humidity_ratio_unchecked(
        now.temperature_k[0], now.pressure_pa[0], now.relative_humidity
    )
    possible: Array = np.minimum(ratio, state.saturated[0])
    return possible


class Outlook:
    """The air of the coming days as seen at one state."""

    def __init__(self, plan: Plan, pattern: Pattern, state: State, last_us: int) -> None:
        self._plan, self._pattern, self._state = plan, pattern, state
        ratio = intake_ratio(state)
        self._own_ratio = ratio / ratio.mean()  # a member's sensors stay as wrong as they are
        self._now_k = float(state.conditions.temperature_k[0].mean())
        self._now_ratio = float(ratio.mean())
        line = plan.line
        days = list(range(_day(state.time_us), _day(last_us) + 1))
        warm = wandering(days, DAY_TO_DAY, "air ahead: warmth", line.seed, line.members, True)
        other = wandering(days, DAY_TO_DAY, "air ahead: moisture", line.seed, line.members, True)
        own = math.sqrt(1.0 - MOISTER_WHEN_WARM**2)
        self._warmer = {day: TEMPERATURE_SD_K * warm[day] for day in days}
        self._moister = {
            day: np.exp(RATIO_LOG_SD * (MOISTER_WHEN_WARM * warm[day] + own * other[day]))
            for day in days
        }

    def warmer_k(self, at_us: int) -> Array:
        """How much warmer than today's pattern, K, (members,)."""
        return self._warmer[_day(at_us)]

    def temperature_k(self, at_us: int) -> float:
        """The intake's temperature at this hour of the pattern."""
        return _slot(self._pattern.temperature_k, at_us, self._now_k)

    def ratio(self, at_us: int) -> Array:
        """The intake's humidity ratio, kg/kg, (members,)."""
        middle = _slot(self._pattern.ratio, at_us, self._now_ratio)
        ratio: Array = middle * self._own_ratio * self._moister[_day(at_us)]
        return ratio

    def held(self, at_us: int) -> dict[str, Held]:
        """What every channel would say then."""
        warm = self.temperature_k(at_us)
        held = dict(self._state.held)
        silent = {name for name, each in held.items() if self._stale(each)}
        for name in held.keys() - silent:
            held[name] = Held(held[name].value, at_us)
        for number, station in enumerate(self._plan.stations):
            temperature, pressure = station.temperature, station.pressure
            if isinstance(temperature, Measured) and temperature.channel in held.keys() - silent:
                above = self._usual(temperature.channel, 0.0) if number else 0.0
                held[temperature.channel] = Held(warm + above, at_us)
            if (
                isinstance(pressure, Measured)
                and number
                and pressure.channel in held.keys() - silent
            ):
                rule = self._plan.pressure_rules[number]
                usual = held[pressure.channel].value
                if isinstance(rule, Fixed) and rule.gauge == pressure.gauge:
                    usual = rule.value  # the middle of the switch's span
                held[pressure.channel] = Held(self._usual(pressure.channel, usual), at_us)
        return held

    def _stale(self, held: Held) -> bool:
        return held.stale(self._state.time_us, round(self._plan.line.period_s * 1e6))

    def _usual(self, channel: str, otherwise: float) -> float:
        typical = self._pattern.typical.get(channel, Typical())
        return typical.total / typical.weight if typical.weight > 0.0 else otherwise


def _day(at_us: int) -> int:
    return at_us // (24 * HOUR_US)


def _slot(hours: Array, at_us: int, otherwise: float) -> float:
    """The value of an hour of the day, or of the nearest hour that is known."""
    wanted = at_us // HOUR_US % 24
    for away in range(13):
        for slot in ((wanted - away) % 24, (wanted + away) % 24):
            if not math.isnan(hours[slot]):
                return float(hours[slot])
    return otherwise
