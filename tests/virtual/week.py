"""A working week outside the model's reach: weather, the hand on the gun, the drain round.

All numbers are invented, of the size that a workshop knows. Each shop has its own generator, so
that a shop is the same whichever others are simulated beside it.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from tests.virtual.rigs import TRAPS

Array = npt.NDArray[np.float64]

BEGUN_US = 1_772_431_200_000_000  # 2026-03-02T06:00:00Z, a Monday
DAY_S = 86_400.0
BEGUN_S = 6 * 3600.0  # after midnight
SHIFTS = ((8.0, 12.0), (13.0, 17.5))  # local hours
SWITCHED_ON = (7.9, 17.5)  # the compressor's main switch
ROUND_S = {"bowl": 62_400.0, "riser": 62_460.0, "tank": 62_580.0}  # 17:20 and after, s of the day
ENDS_S = 18 * 3600.0  # the last day's end
STEP_OPEN_S, STEP_CLOSED_S = 10.0, 60.0
EVERY_DAYS, EVERY_ODDS = (1, 2, 3), (0.6, 0.25, 0.15)
MEASURED_ODDS = 0.75
DAY_LOG_SD = 0.25  # how much one day's load differs from another's


def step_times(days: int) -> Array:
    """The simulation's instants, s after its beginning: close together while the shop works."""
    found = []
    at = 0.0
    end = (days - 1) * DAY_S + ENDS_S - BEGUN_S
    while at < end:
        found.append(at)
        hour = (at + BEGUN_S) % DAY_S / 3600.0
        working = SWITCHED_ON[0] - 0.1 <= hour < SWITCHED_ON[1] + 0.1
        at += STEP_OPEN_S if working else STEP_CLOSED_S
    found.append(end)
    return np.array(found)


@dataclass(frozen=True, slots=True)
class Weather:
    """Air at the intake, (times,), SI; and its mean temperature."""

    temperature_k: Array
    relative_humidity: Array
    pressure_pa: Array
    mean_k: float


def weather(random: np.random.Generator, times: Array) -> Weather:
    """A daily cycle about the season's level, and days that differ as days do.

    From one day to the next 2.7 K and 27 % of the air's water, warmer days being moister: what a
    year of two places' weather shows (see `daemon.moisture.outlook`).
    """
    hours = (times + BEGUN_S) / 3600.0
    level, swing = random.uniform(12.0, 30.0), random.uniform(1.5, 6.0)
    warm, moist = _slow(random, times), _slow(random, times)
    temperature = level + swing * np.sin(2.0 * np.pi * (hours - 9.0) / 24.0) + 3.0 * warm
    humid = random.uniform(0.40, 0.85)
    water = np.exp(0.3 * (0.7 * warm + math.sqrt(1.0 - 0.7**2) * moist))
    vapor = humid * _magnus(np.full_like(times, level)) * water
    relative = np.clip(vapor / _magnus(temperature), 0.15, 0.96)
    altitude = random.uniform(0.0, 500.0)
    pressure = 101_325.0 * np.exp(-altitude / 8400.0) + 500.0 * _slow(random, times)
    return Weather(temperature + 273.15, relative, pressure, level + 273.15)


def _magnus(celsius: Array) -> Array:
    """Saturation vapor pressure, Pa; only the weather's shape hangs on it (Magnus form)."""
    return np.asarray(611.2 * np.exp(17.62 * celsius / (243.12 + celsius)), dtype=np.float64)


def _slow(random: np.random.Generator, times: Array) -> Array:
    """A smooth walk of variance 1 that remembers 0.6 of itself a day later, (times,)."""
    keeps = 0.6**0.25
    knots = np.arange(0.0, times[-1] + 12 * 3600.0, 6 * 3600.0)
    values = np.empty_like(knots)
    values[0] = random.normal()
    for k in range(1, knots.size):
        values[k] = keeps * values[k - 1] + math.sqrt(1.0 - keeps**2) * random.normal()
    return np.interp(times, knots, values)


def demand(random: np.random.Generator, times: Array, delivered_m3_per_s: float) -> Array:
    """Free air that the guns ask for during each step, m3/s, leak included, (times - 1,)."""
    hours = (times[:-1] + BEGUN_S) % DAY_S / 3600.0
    working = np.zeros(hours.size, dtype=bool)
    for begins, ends in SHIFTS:
        working |= (hours >= begins) & (hours < ends)
    busy_share = random.uniform(0.35, 0.9)
    job_s = random.uniform(600.0, 2400.0)
    busy = _switching(random, times, job_s * busy_share, job_s * (1.0 - busy_share))
    trigger = _switching(random, times, random.uniform(20.0, 90.0), random.uniform(20.0, 90.0))
    duty = random.uniform(0.15, 0.6)
    # what hangs on a hose was bought for the compressor: not far above what it delivers
    gun = min(float(duty / (0.5 * busy_share)), 1.5) * delivered_m3_per_s
    days = ((times[:-1] + BEGUN_S) // DAY_S).astype(np.intp)
    load = np.exp(DAY_LOG_SD * random.normal(size=int(days.max()) + 1))
    leak = random.uniform(0.005, 0.06) * delivered_m3_per_s
    return np.where(working & busy & trigger, gun * load[days] + leak, leak)


def _switching(
    random: np.random.Generator, times: Array, on_s: float, off_s: float
) -> npt.NDArray[np.bool_]:
    """On and off in turn, each for an exponential time, (times - 1,)."""
    count = int(2 * times[-1] / (on_s + off_s) * 1.5) + 20
    spans = random.exponential(1.0, count) * np.where(np.arange(count) % 2 == 0, off_s, on_s)
    edges = np.cumsum(spans)
    state: npt.NDArray[np.bool_] = np.searchsorted(edges, times[:-1], side="right") % 2 == 1
    return state


@dataclass(frozen=True, slots=True)
class Round:
    """One opening of one drain that is planned."""

    at_s: float  # after the beginning
    day: int
    trap: str
    measured: bool


def rounds(random: np.random.Generator, days: int, measured: float) -> Sequence[Round]:
    """Who opens which drain when: bowls first, the tank last, some only every few days."""
    found = []
    for trap in TRAPS:
        every = int(random.choice(EVERY_DAYS, p=EVERY_ODDS))
        for day in range(days):
            said = bool(random.random() < measured)
            if (day + 1) % every == 0 or day == days - 1:
                at_s = day * DAY_S + ROUND_S[trap] - BEGUN_S
                found.append(Round(at_s, day, trap, said))
    return sorted(found, key=lambda each: each.at_s)
