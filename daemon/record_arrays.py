"""Recorded readings as arrays, channel by channel: what a year of them leaves room for."""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from daemon.moisture.along_course import Ints
from daemon.moisture.ensemble import Array
from sensors.reading import Reading

NEVER_US = 2**62


@dataclass(frozen=True, slots=True)
class Told:
    """One channel's good readings, in order of time."""

    times_us: Ints
    values: Array

    def between(self, after_us: int, until_us: int) -> tuple[Ints, Array]:
        """The readings of (after, until]."""
        first, last = np.searchsorted(self.times_us, (after_us, until_us), side="right")
        return self.times_us[first:last], self.values[first:last]


@dataclass(frozen=True, slots=True)
class Record:
    """All that was recorded, by channel; a channel that said nothing is not there."""

    channels: Mapping[str, Told]
    faults: Sequence[Reading] = ()  # bad readings, in order of time

    @property
    def first_us(self) -> int:
        """The first reading of all, good or bad."""
        firsts = [int(told.times_us[0]) for told in self.channels.values()]
        return min(firsts + [fault.time_us for fault in self.faults[:1]])

    @property
    def last_us(self) -> int:
        """The last reading of all, good or bad."""
        lasts = [int(told.times_us[-1]) for told in self.channels.values()]
        return max(lasts + [fault.time_us for fault in self.faults[-1:]])

    def next_fault_us(self, after_us: int) -> int:
        """The first bad reading after a time; beyond all times where there is none."""
        place = bisect_right(self.faults, after_us, key=lambda fault: fault.time_us)
        return self.faults[place].time_us if place < len(self.faults) else NEVER_US

    def next_us(self, after_us: int) -> int:
        """The first good reading after a time; beyond all times where there is none."""
        found = NEVER_US
        for told in self.channels.values():
            place = int(np.searchsorted(told.times_us, after_us, side="right"))
            if place < len(told.times_us):
                found = min(found, int(told.times_us[place]))
        return found

    def readings(self, after_us: int, until_us: int) -> list[Reading]:
        """The readings of (after, until] one by one, good and bad, in order of time."""
        found = [
            Reading(name, value, time_us)
            for name, told in self.channels.items()
            for time_us, value in zip(*_lists(told, after_us, until_us), strict=True)
        ]
        first, last = (
            bisect_right(self.faults, at_us, key=lambda fault: fault.time_us)
            for at_us in (after_us, until_us)
        )
        found += self.faults[first:last]
        found.sort(key=lambda each: each.time_us)
        return found


def _lists(told: Told, after_us: int, until_us: int) -> tuple[list[int], list[float]]:
    times, values = told.between(after_us, until_us)
    return times.tolist(), values.tolist()
