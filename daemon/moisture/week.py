"""The load of an ordinary week, learned: the compressor's duty by hour of the week.

What is believed of an hour's duty has three parts, each a factor about 1, lognormal:

    duty = mean[hour of week] x level x day x hour

`mean` comes from three nested pools, each weighed against the wider one, so that Tuesday's hours
know on the first Monday evening what a working hour is like, and a week later what they are
themselves like. With n the exponentially forgotten count of hours seen and s the sum of their
duties, over all hours, over one hour of the day, and over one hour of the week:

    m0 = (N0 d0 + S) / (N0 + N),  m1 = (N1 m0 + S1) / (N1 + n1),  m2 = (N2 m1 + s) / (N2 + n)

d0 is the flat prior. `level` is what is not known of all hours together: a normal prior of relative
width C0, and D days seen that each differ by c_day, give the variance 1 / (1 / C0^2 + D / c_day^2).
`day` and `hour` are how much days and hours differ, from the forecasts' own errors, forgotten
exponentially and begun with a prior; what was not yet known of the level is not held against
them. A day resembles the one before it (autoregressive, `DAY_TO_DAY`). Common practice, no source:
all priors here. Open hours and closed ones are two things and are learned apart.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from daemon.moisture.ensemble import Array, standard_normal

HOURS = 168  # of a week, from Monday's first
CLOSED, OPEN = 0, 1
OPEN_DUTY = 0.3  # the flat prior, as for a compressor that nobody watches
PRIOR_HOURS, HOUR_OF_DAY_PRIOR, HOUR_OF_WEEK_PRIOR = 4.0, 2.0, 1.0  # N0, N1, N2
LEVEL_SPREAD = 0.6  # C0
DAY_SPREAD, DAY_PRIOR = 0.3, 2.0  # how much days differ, and the days that this counts for
HOUR_SPREAD, HOUR_PRIOR = 0.5, 10.0
KEEPS_A_WEEK = 0.8  # of a bin's weight when its hour comes again: five weeks count
KEEPS_A_DAY = KEEPS_A_WEEK ** (1.0 / 5.0)
KEEPS_AN_HOUR = KEEPS_A_WEEK ** (1.0 / 40.0)
DAY_TO_DAY = 0.5
HOURS_A_DAY = 8.0  # at first
LEAST_SPREAD, WIDEST_SPREAD = 0.05, 1.5


@dataclass(frozen=True, slots=True)
class Errors:
    """How far from the foreseen things were: sums of squares, exponentially forgotten."""

    error: float = 0.0
    scale: float = 0.0

    def told(self, error: float, scale: float, keeps: float) -> Errors:
        """After one more."""
        return Errors(keeps * self.error + error, keeps * self.scale + scale)

    def spread(self, prior: float, weight: float) -> float:
        """The relative standard deviation, with a prior worth `weight` in squares foreseen."""
        square = (prior * prior * weight + self.error) / (weight + self.scale)
        return min(max(math.sqrt(square), LEAST_SPREAD), WIDEST_SPREAD)


@dataclass(frozen=True, slots=True)
class Week:
    """What was learned of the week. Arrays are (2, 168): closed and open hours apart."""

    count: Array  # hours seen, forgotten from week to week
    duty: Array  # the sum of their duties, likewise
    hours: Errors = Errors()
    days: Errors = Errors()
    days_seen: float = 0.0
    day: int = -1  # the local day whose hours are being summed, as an ordinal
    day_hours: int = 0
    day_duty: float = 0.0
    day_foreseen: float = 0.0


def new_week() -> Week:
    """Nothing is known yet."""
    return Week(np.zeros((2, HOURS)), np.zeros((2, HOURS)))


def mean(week: Week, kind: int, prior: float) -> Array:
    """The mean duty of each hour of the week, (168,), of open or closed hours."""
    count, duty = week.count[kind], week.duty[kind]
    level = (PRIOR_HOURS * prior + duty.sum()) / (PRIOR_HOURS + count.sum())
    by_day_count, by_day_duty = count.reshape(7, 24).sum(axis=0), duty.reshape(7, 24).sum(axis=0)
    by_day = (HOUR_OF_DAY_PRIOR * level + by_day_duty) / (HOUR_OF_DAY_PRIOR + by_day_count)
    pooled = np.tile(by_day, 7)
    means: Array = (HOUR_OF_WEEK_PRIOR * pooled + duty) / (HOUR_OF_WEEK_PRIOR + count)
    return means


def level_spread(week: Week) -> float:
    """What is not known of all open hours together, a relative standard deviation."""
    day = day_spread(week)
    seen = week.days_seen + min(week.day_hours / HOURS_A_DAY, 1.0)
    return math.sqrt(1.0 / (1.0 / LEVEL_SPREAD**2 + seen / (day * day)))


def day_spread(week: Week) -> float:
    """How much days differ, relative."""
    typical = 1.0 if week.days_seen <= 0.0 else week.days.scale / week.days_seen
    return week.days.spread(DAY_SPREAD, DAY_PRIOR * typical)


def common_spread(week: Week) -> float:
    """How much days differ beyond what their hours do by themselves, relative."""
    hours = HOURS_A_DAY
    if week.days_seen > 0.0:
        hours = max(float(week.count[OPEN].sum()) / week.days_seen, 1.0)
    own = hour_spread(week) ** 2 / hours
    return math.sqrt(max(day_spread(week) ** 2 - own, LEAST_SPREAD**2))


def hour_spread(week: Week) -> float:
    """How much the hours of one day differ beyond what the day has in common, relative."""
    seen = float(week.count[OPEN].sum())
    typical = OPEN_DUTY**2 if seen <= 0.0 else (float(week.duty[OPEN].sum()) / seen) ** 2
    return week.hours.spread(HOUR_SPREAD, HOUR_PRIOR * typical)


def learn(week: Week, hour: int, day: int, is_open: bool, duty: float, prior: float) -> Week:
    """After one whole hour whose duty is known.

    Parameters
    ----------
    hour : of the week, 0-167, local time.
    day : the local day as an ordinal.
    duty : 0-1.
    prior : the flat prior of that kind of hour.
    """
    kind = OPEN if is_open else CLOSED
    if is_open:
        week = _foreseen(_day_over(week, day), hour, duty, prior)
    count, duties = week.count.copy(), week.duty.copy()
    count[kind, hour] = KEEPS_A_WEEK * count[kind, hour] + 1.0
    duties[kind, hour] = KEEPS_A_WEEK * duties[kind, hour] + duty
    return replace(week, count=count, duty=duties)


def _foreseen(week: Week, hour: int, duty: float, prior: float) -> Week:
    """Hold what was expected of an open hour against it."""
    expected = float(mean(week, OPEN, prior)[hour])
    # what the day has in common is not this hour's own: compare with the day as it has gone
    gone = week.day_duty / week.day_foreseen if week.day_foreseen > 0.0 else 1.0
    like_the_day = expected * gone
    known = 1.0 / (1.0 + level_spread(week) ** 2 / hour_spread(week) ** 2)
    miss = (duty - like_the_day) ** 2 * known
    return replace(
        week,
        hours=week.hours.told(miss, like_the_day**2, KEEPS_AN_HOUR),
        day_hours=week.day_hours + 1,
        day_duty=week.day_duty + duty,
        day_foreseen=week.day_foreseen + expected,
    )


def _day_over(week: Week, day: int) -> Week:
    """When a new day begins, hold what was expected of the last one against it."""
    if day == week.day:
        return week
    after = replace(week, day=day, day_hours=0, day_duty=0.0, day_foreseen=0.0)
    if week.day < 0 or week.day_foreseen <= 0.0:
        return after
    miss = (week.day_duty - week.day_foreseen) ** 2
    known = 1.0 / (1.0 + level_spread(after) ** 2 / day_spread(week) ** 2)
    return replace(
        after,
        days=week.days.told(miss * known, week.day_foreseen**2, KEEPS_A_DAY),
        days_seen=KEEPS_A_DAY * week.days_seen + 1.0,
    )


@dataclass(frozen=True, slots=True)
class Ahead:
    """One hour that is still to come."""

    hour_us: int  # when it begins
    hour: int  # of the week
    day: int  # ordinal
    is_open: bool


def duties(
    week: Week, ahead: list[Ahead], open_prior: float, closed_prior: float, seed: int, members: int
) -> Array:
    """The duty of hours to come as each member believes it, (hours, members), 0-1.

    The draws are keyed by what they are about, so that a forecast made an hour later sees the
    same weather ahead, one hour shorter.
    """
    means = np.stack([mean(week, CLOSED, closed_prior), mean(week, OPEN, open_prior)])
    level = _factor(standard_normal(seed, "load: level", members), level_spread(week))
    day_width, hour_width = common_spread(week), hour_spread(week)
    of_days = wandering([each.day for each in ahead], DAY_TO_DAY, "load: day", seed, members)
    drawn = np.empty((len(ahead), members))
    for number, each in enumerate(ahead):
        expected = means[OPEN if each.is_open else CLOSED, each.hour]
        if expected <= 0.0:
            drawn[number] = 0.0
            continue
        seen = week.count[OPEN if each.is_open else CLOSED, each.hour]
        own = hour_width * math.sqrt(1.0 + 1.0 / (HOUR_OF_WEEK_PRIOR + seen))
        noise = standard_normal(seed, "load: hour", members, each.hour_us // 3_600_000_000)
        factor = level * _factor(noise, own)
        if each.is_open:
            factor = factor * _factor(of_days[each.day], day_width)
        drawn[number] = expected * factor
    return np.minimum(drawn, 1.0)


def _factor(normal: Array, spread: float) -> Array:
    """Lognormal about a mean of 1 with a relative standard deviation."""
    variance = math.log1p(spread * spread)
    factor: Array = np.exp(math.sqrt(variance) * normal - variance / 2.0)
    return factor


def wandering(
    days: list[int], keeps: float, name: str, seed: int, members: int, from_zero: bool = False
) -> dict[int, Array]:
    """A standard normal for each day that resembles the one before it (autoregressive).

    `from_zero`: the first day is known, and the spread grows from there; else it is the same
    on every day.
    """
    found: dict[int, Array] = {}
    stirs = math.sqrt(1.0 - keeps * keeps)
    for day in range(days[0], days[-1] + 1) if days else ():
        fresh = standard_normal(seed, name, members, day)
        if not found:
            found[day] = np.zeros(members) if from_zero else fresh
        else:
            found[day] = keeps * found[day - 1] + stirs * fresh
    return found
