"""Where ticks stand and what each takes in, for the live daemon, recovery and a replay alike."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from daemon.clock import DAY_US, HOUR_US
from daemon.journal import Entry
from daemon.state import Inputs
from sensors.reading import Reading

SILENCE_US = DAY_US  # after so long without a good reading, ticks stand at full hours
_NEVER_US = 2**62


@dataclass(frozen=True, slots=True)
class Tick:
    """One tick: its time, and what arrived since the one before."""

    now_us: int
    inputs: Inputs


def first_at_or_after(grid_us: int, period_us: int, time_us: int) -> int:
    """The first multiple of the period from the grid's origin that is not before a time."""
    return grid_us + -((grid_us - time_us) // period_us) * period_us


def next_tick(
    grid_us: int, period_us: int, last_tick_us: int, heard_us: int, next_reading_us: int
) -> int:
    """The tick after `last_tick_us`: at multiples of the period from `grid_us`.

    When nothing good has been heard for a day (`heard_us`), there is nothing to follow closely:
    ticks then stand at full hours until the one that takes in the next reading.
    """
    due_us = first_at_or_after(grid_us, period_us, last_tick_us + 1)
    if last_tick_us - heard_us < SILENCE_US:
        return due_us
    resumes_us = first_at_or_after(grid_us, period_us, next_reading_us)
    hour_us = (last_tick_us // HOUR_US + 1) * HOUR_US
    return max(due_us, resumes_us) if resumes_us <= hour_us else hour_us


def ticks(
    grid_us: int,
    period_us: int,
    last_tick_us: int,
    heard_us: int,
    readings: Sequence[Reading],
    entries: Sequence[Entry],
    end_us: int,
) -> Iterator[Tick]:
    """The ticks after `last_tick_us`, up to the first at or after `end_us`.

    Readings and entries are in order of time, later than `last_tick_us`, and not after the end.
    """
    now_us = last_tick_us
    r = e = 0
    while now_us < end_us:
        good = r
        while good < len(readings) and not readings[good].good:
            good += 1
        following_us = readings[good].time_us if good < len(readings) else _NEVER_US
        now_us = next_tick(grid_us, period_us, now_us, heard_us, following_us)
        first_r, first_e = r, e
        while r < len(readings) and readings[r].time_us <= now_us:
            if readings[r].good:
                heard_us = max(heard_us, readings[r].time_us)
            r += 1
        while e < len(entries) and entries[e].at_us <= now_us:
            e += 1
        yield Tick(now_us, Inputs(readings[first_r:r], entries[first_e:e]))
