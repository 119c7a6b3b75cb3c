"""What each station's temperature and pressure are, per member, from sensors, literals and rules.

A channel that is silent or bad for three sampling periods is stale. A station that it fed then
relaxes from its last good value to its kind's rule, and its spread grows to that rule's: what is
not measured any more is known less and less. When the channel speaks again, that ends.
"""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from daemon.moisture.contact import STALE_AFTER_PERIODS
from daemon.moisture.description import Fixed, Like, Measured, RiseByDuty, Source
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array, standard_normal
from daemon.moisture.plan import Plan

COLDEST_K, HOTTEST_K = 203.15, 373.15  # where the saturation formulas hold
LOWEST_PA, HIGHEST_PA = 50_000.0, 2_000_000.0
FORGETS_AFTER_S = {"temperature": 6 * 3600.0, "pressure": 3600.0, "relative_humidity": 6 * 3600.0}
HUMIDITY_RULE = Fixed(0.5, 0.3)  # an intake's relative humidity that nobody measures


@dataclass(frozen=True, slots=True)
class Held:
    """The last good value of one channel."""

    value: float = math.nan
    time_us: int = -1  # -1: none yet

    def stale(self, now_us: int, period_us: int) -> bool:
        """Whether it is older than three sampling periods."""
        return self.time_us < 0 or now_us - self.time_us > STALE_AFTER_PERIODS * period_us


@dataclass(frozen=True, slots=True)
class HeldAlong(Held):
    """What a channel held at each of several ticks: values are a column, (ticks, 1).

    It was silent at all of these ticks, or at none.
    """

    silent: bool = False

    def stale(self, now_us: int, period_us: int) -> bool:
        return self.silent


@dataclass(frozen=True, slots=True)
class Lapse:
    """How a station's value stood to its rule when its channel went stale."""

    since_us: int  # of the last good reading, -1 for never
    deviation: Array  # value less rule at that time, shape (members,)
    unknown: Array  # standard normal, the member's place in what is not known


@dataclass(frozen=True, slots=True)
class Conditions:
    """Every station's state at one time. Arrays are (stations, members), or at several ticks
    (stations, ticks, members)."""

    temperature_k: Array
    pressure_pa: Array
    relative_humidity: Array  # (members,), the intake's, over liquid water
    measured: frozenset[int]  # stations whose pressure follows a fresh gauge, theirs or another's


@dataclass(frozen=True, slots=True)
class Offsets:
    """Each member's standing place in the width of every source, standard normal."""

    channels: Mapping[str, Array]
    temperature: Array  # (stations, members)
    pressure: Array
    relative_humidity: Array  # (members,)


@dataclass(slots=True)
class Evaluation:
    """One evaluation of all sources at one time; `lapses` is carried from one to the next."""

    plan: Plan
    held: Mapping[str, Held]
    offsets: Offsets
    duty: Array  # filtered, (stations, members)
    now_us: int
    lapses: dict[str, Lapse] = field(default_factory=dict)
    # at several ticks, whose values `held` then has: their times as a column, (ticks, 1)
    along_us: npt.NDArray[np.int64] | None = None

    def conditions(self) -> Conditions:
        """Temperatures, pressures and the intake's humidity now."""
        plan = self.plan
        ticks = () if self.along_us is None else (len(self.along_us),)
        shape = (len(plan.stations), *ticks, plan.line.members)
        temperature, pressure = np.empty(shape), np.empty(shape)
        measured: set[int] = set()
        for i in plan.temperature_order:
            source = plan.stations[i].temperature
            rule = plan.temperature_rules[i]
            temperature[i] = self._value("temperature", i, source, rule, temperature, None)
        np.clip(temperature, COLDEST_K, HOTTEST_K, out=temperature)
        for i in plan.pressure_order:
            source = plan.stations[i].pressure
            barometer = pressure[0] if i else None
            rule = plan.pressure_rules[i]
            pressure[i] = self._value("pressure", i, source, rule, pressure, barometer)
            if self._follows_gauge(i, source, measured):
                measured.add(i)
        for i, station in enumerate(plan.stations):
            if station.kind == "regulator":  # it can only lower a pressure
                np.minimum(pressure[i], pressure[plan.parent[i]], out=pressure[i])
        np.clip(pressure, LOWEST_PA, HIGHEST_PA, out=pressure)
        return Conditions(temperature, pressure, self.humidity(), frozenset(measured))

    def _follows_gauge(self, i: int, source: Source, measured: Collection[int]) -> bool:
        """Whether a fresh gauge tells of a station's pressure: its own, or that of its like."""
        if isinstance(source, Measured):
            return not self._stale(source.channel)
        regulated = self.plan.stations[i].kind == "regulator"
        like = isinstance(source, Like) and self.plan.index[source.station] in measured
        return like and not regulated

    def _stale(self, channel: str) -> bool:
        held = self.held.get(channel)
        return held is None or held.stale(self.now_us, round(self.plan.line.period_s * 1e6))

    def humidity(self) -> Array:
        """The intake's relative humidity over liquid water."""
        source = self.plan.stations[0].relative_humidity or HUMIDITY_RULE
        empty = np.empty((0, 0))
        value = self._value("relative_humidity", 0, source, HUMIDITY_RULE, empty, None)
        return np.clip(value, 0.0, 1.0)

    def _value(
        self,
        what: str,
        i: int,
        source: Source,
        rule: Source,
        values: Array,
        barometer: Array | None,
    ) -> Array:
        if not isinstance(source, Measured):
            return self._by_rule(what, i, source, values, barometer)
        name = f"{what} of {self.plan.stations[i].id}"
        if not self._stale(source.channel):
            self.lapses.pop(name, None)
            return self._by_channel(what, i, source, barometer)
        return self._lapsed(name, what, i, source, rule, values, barometer)

    def _by_channel(self, what: str, i: int, source: Measured, barometer: Array | None) -> Array:
        spread = self.offsets.channels[source.channel] * (source.give_or_take * HALF_WIDTH_TO_SD)
        spread = spread + (self.held[source.channel].value + source.plus)
        if source.plus_give_or_take > 0.0:
            spread += self._offset(what, i) * (source.plus_give_or_take * HALF_WIDTH_TO_SD)
        if source.gauge and barometer is not None:
            spread += barometer
        return spread

    def _offset(self, what: str, i: int) -> Array:
        if what == "relative_humidity":
            return self.offsets.relative_humidity
        rows = self.offsets.temperature if what == "temperature" else self.offsets.pressure
        offset: Array = rows[i]
        return offset

    def _by_rule(
        self, what: str, i: int, source: Source, values: Array, barometer: Array | None
    ) -> Array:
        value = self._offset(what, i) * (source.give_or_take * HALF_WIDTH_TO_SD)
        return value + self._middle(i, source, values, barometer)

    def _middle(
        self, i: int, source: Source, values: Array, barometer: Array | None
    ) -> Array | float:
        """A rule's value without its own width."""
        match source:
            case Fixed(value=value, gauge=gauge):
                return value + barometer if gauge and barometer is not None else value
            case Like(station=station, plus=plus):
                other: Array = values[self.plan.index[station]]
                return other + plus
            case RiseByDuty(station=station, rise=rise):
                base: Array = values[self.plan.index[station]]
                risen: Array = base + rise * self.duty[i]
                return risen
            case Measured():
                raise AssertionError("a channel is not a rule")

    def _lapsed(
        self,
        name: str,
        what: str,
        i: int,
        source: Measured,
        rule: Source,
        values: Array,
        barometer: Array | None,
    ) -> Array:
        middle = self._middle(i, rule, values, barometer)
        lapse = self.lapses.get(name)
        if lapse is None:
            lapse = self._begin_lapse(name, what, i, source, middle, barometer)
            self.lapses[name] = lapse
        sd = rule.give_or_take * HALF_WIDTH_TO_SD
        if lapse.since_us < 0:
            return middle + lapse.unknown * sd
        now_us = self.now_us if self.along_us is None else self.along_us
        age_s = (now_us - lapse.since_us) / 1e6
        remains = np.exp(-age_s / FORGETS_AFTER_S[what])
        grown = sd * np.sqrt(1.0 - remains * remains)
        return middle + lapse.deviation * remains + lapse.unknown * grown

    def _begin_lapse(
        self,
        name: str,
        what: str,
        i: int,
        source: Measured,
        middle: Array | float,
        barometer: Array | None,
    ) -> Lapse:
        line = self.plan.line
        since_us = self.held[source.channel].time_us if source.channel in self.held else -1
        unknown = standard_normal(line.seed, f"lapse of {name}", line.members, max(since_us, 0))
        if since_us < 0:
            return Lapse(-1, np.zeros(line.members), unknown)
        return Lapse(since_us, self._by_channel(what, i, source, barometer) - middle, unknown)
