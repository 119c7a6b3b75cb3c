"""What a channel comes to step by step: counts, extremes, sums, and how long each value held.

The steps that are stored are the hours of UTC, by the readings' own times. Each consists of
*parts*, one for every run of ticks that gave it readings, which add up. Pure.

A value holds from its reading until the channel's next one, good or bad: that is how a contact is
read, whose edges come when they come. A channel that falls silent while it is being sampled is
known for `holds_us` more and not longer; a contact that tells of changes alone holds until the next
one. It is taken to be sampled when it repeats its value within `holds_us`, or was bad; whatever is
not a contact always is (as in `daemon.moisture.contact`).
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import numpy.typing as npt

from daemon.clock import HOUR_US
from daemon.store.columns import Column
from daemon.views import StepsOfReadings


@dataclass(frozen=True, slots=True)
class Part:
    """What one run of ticks gave to a step of one channel. SI; times in us since 1970."""

    start_us: int  # of the step
    good: int
    bad: int
    least: float | None  # None: no good reading
    greatest: float | None
    total: float  # of the good values
    begins_us: int  # own times of the first and the last reading, good or bad
    ends_us: int
    last_value: float | None  # None: the last one is bad
    held_us: int  # how long values held from the first reading to the last
    held_total: float  # the sum of value times how long it held, in s
    sampled: bool


def parts_of(
    column: Column, holds_us: int, step_us: int = HOUR_US, origin_us: int = 0
) -> Iterator[Part]:
    """The parts that a channel's readings give, step by step; readings in any order."""
    if np.any(np.diff(column.times_us) < 0):
        column = column.taken(np.argsort(column.times_us, kind="stable"))
    steps = (column.times_us - origin_us) // step_us
    ends = [0, *(np.flatnonzero(np.diff(steps)) + 1).tolist(), len(steps)]
    for first, after in pairwise(ends):
        if first < after:
            start_us = int(steps[first]) * step_us + origin_us
            yield _part(start_us, column.taken(np.arange(first, after)), holds_us)


def _part(start_us: int, column: Column, holds_us: int) -> Part:
    times = column.times_us
    good = np.isfinite(column.values) & np.array([not fault for fault in column.faults])
    believed = column.values[good]
    levels = np.where(good, column.values, 0.0)
    gaps = np.diff(times)
    repeats = (gaps > 0) & (gaps <= holds_us) & (np.diff(levels) == 0.0)
    contact = bool(np.all((levels == 0.0) | (levels == 1.0)))
    sampled = not contact or not good.all() or bool(repeats.any())
    held = np.where(good[:-1], np.minimum(gaps, holds_us) if sampled else gaps, 0)
    return Part(
        start_us=start_us,
        good=len(believed),
        bad=len(times) - len(believed),
        least=float(believed.min()) if len(believed) else None,
        greatest=float(believed.max()) if len(believed) else None,
        total=math.fsum(believed.tolist()),
        begins_us=int(times[0]),
        ends_us=int(times[-1]),
        last_value=float(levels[-1]) if good[-1] else None,
        held_us=int(held.sum()),
        held_total=math.fsum((levels[:-1] * held / 1e6).tolist()),
        sampled=sampled,
    )


def overlapping(parts: Sequence[Part]) -> bool:
    """Whether parts of one step lie within one another: they do not tell then for how long each
    value held."""
    if len(parts) < 2:
        return False
    ordered = sorted(parts, key=lambda part: part.begins_us)
    return any(one.ends_us > two.begins_us for one, two in pairwise(ordered))


def steps_of(
    channel: str,
    parts: Sequence[Part],
    starts_us: npt.NDArray[np.int64],
    step_us: int,
    holds_us: int,
    until_us: int,
) -> StepsOfReadings:
    """The steps with these starts, from all their parts, none of which lie in one another.

    A part of an earlier time may be among them: its last value holds on into the steps. Nothing
    holds beyond `until_us`, the last tick.
    """
    sums = _Sums(starts_us, step_us)
    ordered = sorted(parts, key=lambda part: part.begins_us)
    for part in ordered:
        sums.add(part)
    for one, two in pairwise(ordered):
        sums.hold(one, two.begins_us, holds_us, limited=one.sampled or two.sampled)
    if ordered:
        sums.hold(ordered[-1], until_us, holds_us, limited=ordered[-1].sampled)
    return sums.steps(channel)


class _Sums:
    """Sums by step, while parts are added. Lists: a year is many thousand small additions."""

    def __init__(self, starts_us: npt.NDArray[np.int64], step_us: int) -> None:
        number = len(starts_us)
        self._starts_us, self._step_us = starts_us, step_us
        self._begin_us = int(starts_us[0]) if number else 0
        self._number = number
        self._good, self._bad, self._held_us = [0] * number, [0] * number, [0] * number
        self._least, self._greatest = [math.inf] * number, [-math.inf] * number
        self._total, self._held_total = [0.0] * number, [0.0] * number

    def add(self, part: Part) -> None:
        """Add what stands in a part itself."""
        place = (part.start_us - self._begin_us) // self._step_us
        if not 0 <= place < self._number:
            return
        self._good[place] += part.good
        self._bad[place] += part.bad
        if part.least is not None and part.greatest is not None:
            self._least[place] = min(self._least[place], part.least)
            self._greatest[place] = max(self._greatest[place], part.greatest)
        self._total[place] += part.total
        self._held_us[place] += part.held_us
        self._held_total[place] += part.held_total

    def hold(self, part: Part, until_us: int, holds_us: int, *, limited: bool) -> None:
        """Let a part's last value hold on, over the steps that follow."""
        end_us = min(until_us, part.ends_us + holds_us) if limited else until_us
        if part.last_value is None:
            return
        from_us = max(part.ends_us, self._begin_us)
        place = (from_us - self._begin_us) // self._step_us
        while from_us < end_us and place < self._number:
            next_us = min(end_us, self._begin_us + (place + 1) * self._step_us)
            self._held_us[place] += next_us - from_us
            self._held_total[place] += (next_us - from_us) / 1e6 * part.last_value
            from_us = next_us
            place += 1

    def steps(self, channel: str) -> StepsOfReadings:
        """The sums as arrays; NaN where there is nothing to tell."""
        count = np.array(self._good, np.int64)
        none = count == 0
        return StepsOfReadings(
            channel=channel,
            step_us=self._step_us,
            start_us=self._starts_us,
            count=count,
            bad=np.array(self._bad, np.int64),
            least=np.where(none, math.nan, np.array(self._least, np.float64)),
            greatest=np.where(none, math.nan, np.array(self._greatest, np.float64)),
            total=np.where(none, math.nan, np.array(self._total, np.float64)),
            held_us=np.array(self._held_us, np.int64),
            held_total=np.array(self._held_total, np.float64),
        )
