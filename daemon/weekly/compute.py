"""From a week's rows to its log. Pure."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator, Mapping, Sequence

import numpy as np

from daemon.clock import HOUR_US, SECOND_US
from daemon.hour_figures import (
    DRAWN,
    ON,
    ON_OPEN,
    WATER_IN,
    HourFigures,
    Least,
    shed_of,
)
from daemon.journal import Blotter
from daemon.moisture.ensemble import Array, percentiles, spread
from daemon.site import hours as opening
from daemon.site.types import Site
from daemon.views import Interval
from daemon.weekly import people
from daemon.weekly.records import (
    NOT_WATCHED,
    BlotterLine,
    DayWeek,
    Hits,
    OutletWeek,
    PlantWeek,
    TrapWeek,
    Watched,
    WeekLog,
)
from daemon.weekly.rows import WeekRows

LITTLE_MISSING_S = 120.0  # of an hour: a restart, not a gap


def week_log(site: Site, rows: WeekRows) -> WeekLog:
    """The log of a week."""
    begun_us = rows.begun_us
    watched = _watched(site, rows)
    sums = _summed([day.sums for day in rows.days])
    drains = people.drain_lines(site, rows)
    return WeekLog(
        week=str(rows.week),
        from_us=rows.from_us,
        to_us=rows.to_us,
        over=rows.now_us >= rows.to_us,
        until_us=max(rows.from_us, min(rows.to_us, rows.until_us)),
        begun_us=begun_us if begun_us is not None and rows.from_us < begun_us else None,
        watched=watched,
        water_in_kg=_interval(sums.get(WATER_IN)),
        traps=tuple(
            TrapWeek(
                trap=trap,
                shed_kg=_interval(sums.get(shed_of(trap))),
                **people.counted(site, rows, trap, drains),
            )
            for trap in site.traps
        ),
        drains=tuple(drains),
        outlets=tuple(_outlets(site, rows.hours, watched)),
        blotters=tuple(
            BlotterLine(entry.at_us, body.outlet, body.result, body.by)
            for entry in rows.entries
            if isinstance(body := entry.body, Blotter) and entry.at_us < rows.to_us
        ),
        alarms=tuple(people.alarm_lines(rows)),
        plant=PlantWeek(
            _interval(sums.get(ON)),
            _interval(sums.get(ON_OPEN)),
            _interval(sums.get(DRAWN)),
            next((hour.leak for hour in reversed(rows.hours) if hour.leak is not None), None),
        ),
        faults_s=_added(hour.faults_s for hour in rows.hours),
        forecasts=Hits(sum(each.hit for each in rows.scores), len(rows.scores)),
        intervals=Hits(sum(each.held for each in rows.checks), len(rows.checks)),
        days=tuple(_days(site, rows)),
        margins={place.id: tuple(_margins(rows.hours, place.id)) for place in site.outlets},
    )


# ---- what is known at all ----


def _watched(site: Site, rows: WeekRows) -> Watched:
    """Hours that have passed since the record began, and what of them is known."""
    by_hour = {hour.hour_us: hour for hour in rows.hours}
    from_us = max(rows.hours_from_us, rows.begun_us if rows.begun_us is not None else rows.to_us)
    until_us = max(from_us, rows.until_us)
    gaps: list[tuple[int, int]] = []
    missing: list[float] = []
    for hour_us in range(from_us // HOUR_US * HOUR_US, until_us, HOUR_US):
        wanted_s = (min(hour_us + HOUR_US, until_us) - max(hour_us, from_us)) / SECOND_US
        found = by_hour.get(hour_us)
        lacks_s = wanted_s - (found.watched_s if found is not None else 0.0)
        if lacks_s <= LITTLE_MISSING_S:
            continue
        if gaps and gaps[-1][1] == hour_us:
            gaps[-1] = gaps[-1][0], hour_us + HOUR_US
            missing[-1] += lacks_s
        else:
            gaps.append((hour_us, hour_us + HOUR_US))
            missing.append(lacks_s)
    open_us = opening.open_us(site.hours, site.timezone, from_us, until_us)
    return Watched(
        of_s=(until_us - from_us) / SECOND_US,
        watched_s=sum(hour.watched_s for hour in rows.hours),
        open_s=open_us / SECOND_US,
        open_watched_s=sum(hour.open_s for hour in rows.hours),
        gaps=tuple(gaps),
        gaps_s=tuple(missing),
    )


# ---- sums ----


def _summed(days: Sequence[Mapping[str, Array]]) -> dict[str, Array]:
    """Member by member over the days: what is wrong all week stays wrong in the sum."""
    members = max((values.size for day in days for values in day.values()), default=0)
    sums: dict[str, Array] = {}
    for day in days:
        for name, values in day.items():
            sums[name] = sums.get(name, np.zeros(members)) + spread(values, members)
    return sums


def _interval(values: Array | None) -> Interval | None:
    if values is None:
        return None
    low, middle, high = percentiles(values)
    return Interval(float(low), float(middle), float(high))


def _added(each: Iterable[Mapping[str, float]]) -> dict[str, float]:
    total: defaultdict[str, float] = defaultdict(float)
    for one in each:
        for name, value in one.items():
            total[name] += value
    return dict(total)


# ---- outlets ----


def _outlets(site: Site, hours: Sequence[HourFigures], watched: Watched) -> Iterator[OutletWeek]:
    for settings in site.outlets:
        found = [hour.outlets[settings.id] for hour in hours if settings.id in hour.outlets]
        verdict_s = _added(each.verdict_s for each in found)
        verdict_s[NOT_WATCHED] = max(watched.open_s - sum(verdict_s.values()), 0.0)
        yield OutletWeek(
            outlet=settings.id,
            work=settings.work,
            verdict_s=verdict_s,
            class_s=_added(each.class_s for each in found),
            line=_least(each.line for each in found),
            surface=_least(each.surface for each in found),
        )


def _least(found: Iterable[Least | None]) -> Least | None:
    known = [each for each in found if each is not None]
    return min(known, key=lambda each: each.p05_k, default=None)


def _margins(hours: Sequence[HourFigures], outlet: str) -> Iterator[Least]:
    for hour in hours:
        found = hour.outlets.get(outlet)
        if found is not None and found.line is not None:
            yield found.line


# ---- days ----


def _days(site: Site, rows: WeekRows) -> Iterator[DayWeek]:
    """Monday to Sunday, also days of which nothing is known."""
    sums = {day.day: day.sums for day in rows.days}
    of_day: defaultdict[str, list[HourFigures]] = defaultdict(list)
    for hour in rows.hours:
        of_day[opening.local_day(site.timezone, hour.hour_us).isoformat()].append(hour)
    for date in rows.week.days():
        day = date.isoformat()
        hours, known = of_day[day], sums.get(day, {})
        medians = {name: float(np.median(values)) for name, values in known.items()}
        verdict_s = {
            place.id: _added(
                hour.outlets[place.id].verdict_s for hour in hours if place.id in hour.outlets
            )
            for place in site.outlets
        }
        yield DayWeek(
            day=day,
            watched_s=sum(hour.watched_s for hour in hours),
            shed_kg={t: medians[shed_of(t)] for t in site.traps if shed_of(t) in medians},
            on_s=medians.get(ON, 0.0),
            verdict_s=verdict_s,
        )
