"""Looks ahead for one site: learns its week, keeps forecasts, and holds them against what happened.

At each full hour the week is learned and every trap is looked at; every sixth hour, if anything has
changed, a forecast is kept, so that what is reached later can be held against what was
foreseen at least a day ahead. Everything here but `now` runs inside `advance` and is pure; `now`
remembers its last answer, which changes nothing but its cost.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from functools import lru_cache
from zoneinfo import ZoneInfo

import numpy as np

from daemon.clock import HOUR_US, MINUTE_US, to_datetime
from daemon.foresight import Foresight, keep, score
from daemon.moisture import outlook, week
from daemon.moisture.ahead import Ahead, stretches
from daemon.moisture.ensemble import Array
from daemon.moisture.forecast import HORIZON_US, NO_DATE, Due, Level, foresee
from daemon.moisture.model import Model, State
from daemon.moisture.supplies import Supplies
from daemon.site import hours as opening
from daemon.site.types import Hours, Site

KEPT_EVERY_US = 6 * HOUR_US
UNKNOWN_ABOVE_S = 180.0  # of an hour's running time, where members differ: nobody watched it
LEAK_DUTY = 0.08  # the flat prior of closed hours with the compressor left on (practice)


@dataclass(frozen=True, slots=True)
class Dates:
    """By trap, in the line's order, us: the last drain (the beginning, where there was none), and
    when the calendar asks next (-1: never)."""

    since_us: tuple[int, ...]
    next_us: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Foreseen:
    """A forecast."""

    traps: tuple[Due, ...]  # in the line's order
    supplies: Mapping[str, Due]  # by station: when its desiccant or ice is used up


@lru_cache(maxsize=2048)
def hour_ahead(hours: Hours, timezone: str, hour_us: int) -> week.Ahead:
    """An hour by its place in the local week, and whether the shop works in any part of it."""
    local = to_datetime(hour_us).astimezone(_zone(timezone))
    is_open = any(
        opening.is_open(hours, timezone, hour_us + minute * MINUTE_US)
        for minute in (2, 17, 32, 47, 58)
    )
    return week.Ahead(hour_us, local.weekday() * 24 + local.hour, local.toordinal(), is_open)


@lru_cache(maxsize=8)
def _zone(name: str) -> ZoneInfo:
    return ZoneInfo(name)


class Foreseer:
    """The forecasts of one site."""

    def __init__(self, site: Site, model: Model) -> None:
        self._site, self._model = site, model
        stations = model.plan.stations
        self._rows = list(model.plan.traps)
        self._names = [stations[row].id for row in self._rows]
        self._traps = [t for s in stations if (t := s.trap) is not None]
        self._drain_at = np.array([trap.drain_at_kg for trap in self._traps])
        off = model.plan.line.compressor.off_when_closed
        self._closed_prior = 0.0 if off else LEAK_DUTY
        self._supplies = Supplies(model)
        self._memo: tuple[tuple[object, ...], Foreseen] | None = None

    # ---- inside `advance` ----

    def begun(self, state: State) -> Foresight:
        """At the beginning nothing is known of the week."""
        medians = self._medians(state)
        crossed = tuple(bool(each) for each in medians >= self._drain_at)
        return Foresight(week.new_week(), outlook.new_pattern(), medians, state.time_us, crossed)

    def tick(self, foresight: Foresight, before_us: int, state: State) -> Foresight:
        """After a step of the model from `before_us`."""
        if not outlook.is_sampled(before_us, state.time_us):
            return foresight
        return self.sampled(foresight, [(before_us, outlook.sight(self._model.plan, state))])

    def sampled(self, foresight: Foresight, seen: Iterable[tuple[int, outlook.Sight]]) -> Foresight:
        """After steps of the model that are sampled: the time before each, and what is seen."""
        pattern = foresight.pattern
        for before_us, sight in seen:
            pattern = outlook.told(pattern, self._model.plan, before_us, sight)
        return replace(foresight, pattern=pattern)

    def hour(
        self, foresight: Foresight, state: State, dates: Dates, from_us: int, on_s: Array
    ) -> Foresight:
        """At a full hour; since `from_us` the compressor ran `on_s` seconds, (members,)."""
        foresight = self._learned(foresight, state.time_us, from_us, on_s)
        foresight = self.looked(foresight, state, dates)
        if state.time_us % KEPT_EVERY_US != 0:
            return foresight
        used = float(state.air.drawn.mean())
        if used == foresight.used_kg:  # nothing moved: the last one stands
            return foresight
        foreseen = self.forecast(foresight, state, dates)
        return keep(foresight, state.time_us, foreseen.traps, used)

    def looked(self, foresight: Foresight, state: State, dates: Dates) -> Foresight:
        """Whether a median has reached its level since the last look; also before each drain."""
        medians = self._medians(state)
        crossed = list(foresight.crossed)
        after = foresight
        for number, level in enumerate(self._drain_at):
            if crossed[number] or medians[number] < level:
                continue
            crossed[number] = True
            was_kg, was_us = float(foresight.medians_kg[number]), foresight.looked_us
            risen = max(float(medians[number]) - was_kg, 1e-12)
            part = min(max((float(level) - was_kg) / risen, 0.0), 1.0)
            when_us = was_us + round(part * (state.time_us - was_us))
            date_us = dates.next_us[number]
            if date_us == NO_DATE or when_us <= date_us:  # else it was due before, by date
                since_us = dates.since_us[number]
                after = score(after, number, self._names[number], since_us, when_us)
        return replace(after, medians_kg=medians, looked_us=state.time_us, crossed=tuple(crossed))

    def drained(self, foresight: Foresight, state: State, number: int) -> Foresight:
        """After a trap was drained: a new round begins, and the last forecast is of no use."""
        medians = self._medians(state)
        crossed = list(foresight.crossed)
        crossed[number] = bool(medians[number] >= self._drain_at[number])
        return replace(
            foresight,
            medians_kg=medians,
            looked_us=state.time_us,
            crossed=tuple(crossed),
            used_kg=-1.0,
        )

    def _learned(self, foresight: Foresight, now_us: int, from_us: int, on_s: Array) -> Foresight:
        unwatched = float(on_s.max() - on_s.min()) > UNKNOWN_ABOVE_S
        if now_us - from_us != HOUR_US or unwatched:
            return foresight
        hour = hour_ahead(self._site.hours, self._site.timezone, from_us)
        duty = min(float(on_s.mean()) / 3600.0, 1.0)
        prior = week.OPEN_DUTY if hour.is_open else self._closed_prior
        learned = week.learn(foresight.week, hour.hour, hour.day, hour.is_open, duty, prior)
        return replace(foresight, week=learned)

    def _medians(self, state: State) -> Array:
        medians: Array = np.median(self._model.contents(state)[self._rows], axis=1)
        return medians

    # ---- looking ahead ----

    def now(self, foresight: Foresight, state: State, dates: Dates) -> Foreseen:
        """The forecast, worked out once an hour and after each drain and service."""
        key = (state.time_us // HOUR_US, dates, foresight.services)
        if self._memo is None or self._memo[0] != key:
            self._memo = (key, self.forecast(foresight, state, dates))
        return self._memo[1]

    def forecast(self, foresight: Foresight, state: State, dates: Dates) -> Foreseen:
        """When each trap is due and each supply is used up, as seen from this state."""
        line = self._model.plan.line
        hours = self._hours(state.time_us)
        duty = week.duties(
            foresight.week, hours, week.OPEN_DUTY, self._closed_prior, line.seed, line.members
        )
        if line.compressor.off_when_closed:
            duty[[not hour.is_open for hour in hours]] = 0.0
        spans = [(max(hour.hour_us, state.time_us), hour.hour_us + HOUR_US) for hour in hours]
        through = stretches(spans, [hour.is_open for hour in hours], duty)
        air_ahead = outlook.Outlook(
            self._model.plan, foresight.pattern, state, through[-1].until_us
        )
        levels = [*self._levels(state, dates), *self._supplies.levels()]
        dues = foresee(Ahead(self._model, air_ahead), state, through, levels, self._values)
        count = len(self._names)
        return Foreseen(dues[:count], dict(zip(self._supplies.names, dues[count:], strict=True)))

    def _hours(self, now_us: int) -> list[week.Ahead]:
        first_us = now_us // HOUR_US * HOUR_US
        return [
            hour_ahead(self._site.hours, self._site.timezone, at_us)
            for at_us in range(first_us, now_us + HORIZON_US, HOUR_US)
        ]

    def _levels(self, state: State, dates: Dates) -> list[Level]:
        capacity = state.parameters.water.capacity_kg
        return [
            Level(
                name=self._names[number],
                limit=np.minimum(self._drain_at[number], capacity[row]),
                date_us=dates.next_us[number],
                station=row,
                heel_kg=self._traps[number].heel_kg,
            )
            for number, row in enumerate(self._rows)
        ]

    def _values(self, state: State) -> Array:
        contents: Array = self._model.contents(state)[self._rows]
        if not self._supplies.names:
            return contents
        return np.concatenate([contents, self._supplies.used(state)])
