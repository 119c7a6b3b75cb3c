"""A replay that runs along time in blocks: the same files as tick by tick, to 1e-9.

Most of a record is like the tick before; that part is worked out for many ticks at once. The rest
is taken tick by tick with the same `advance` as ever: full hours, drains, a channel that falls
silent or is not believed, a tank that is let down.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np

from daemon.advance import Core
from daemon.advance_along import AdvanceAlong
from daemon.clock import HOUR_US
from daemon.errors import ReplayError
from daemon.journal import Entry
from daemon.moisture.along_course import Ints
from daemon.record_arrays import NEVER_US, Record
from daemon.replay import Result
from daemon.state import Inputs
from daemon.ticks import SILENCE_US, first_at_or_after, next_tick

MOST_ALONE = 32  # ticks that are taken one by one before it is tried again with several
LARGEST_PIECE = 31 << 20
Progress = Callable[[int], None]  # told of the time that was reached


@dataclass(slots=True)
class BlockResult(Result):
    """What a replay in blocks found, and how it went."""

    taken: Counter[str] = field(default_factory=Counter)  # ticks "together" and "alone"


@dataclass(slots=True)
class _Run:
    """One replay."""

    core: Core
    record: Record
    entries: Sequence[Entry]
    result: BlockResult
    heard_us: int
    end_us: int
    alone: int = 1  # how many ticks to take one by one after a failure
    next_entry: int = 0

    @property
    def now_us(self) -> int:
        return self.result.state.time_us

    def run(self, progress: Progress) -> None:
        along = AdvanceAlong(self.core)
        while self.now_us < self.end_us:
            times_us = self._within()
            taken = 0
            if len(times_us):
                found = along.advance(self.result.state, self.record, times_us)
                taken = found.ticks
                self.result.state = found.state
                self.result.transitions += found.transitions
                self.result.reminders += found.reminders
            if taken:
                self.result.ticks += taken
                self.result.taken["together"] += taken
                self.heard_us = max(self.heard_us, found.heard_us)
            self.alone = 1 if taken or not len(times_us) else min(2 * self.alone, MOST_ALONE)
            for _ in range(self.alone):
                if self.now_us < self.end_us:
                    self._tick()
            progress(self.now_us)

    def _within(self) -> Ints:
        """The ticks that follow within this hour, before its end, the next entry and silence."""
        period_us, now_us = self.core.model.period_us, self.now_us
        grid_us = self.result.begun_us
        nothing = np.empty(0, np.int64)
        if (now_us - grid_us) % period_us or now_us + HOUR_US - self.heard_us >= SILENCE_US:
            return nothing
        before_us = (now_us // HOUR_US + 1) * HOUR_US
        if self.next_entry < len(self.entries):
            before_us = min(before_us, self.entries[self.next_entry].at_us)
        before_us = min(before_us, self.record.next_fault_us(now_us))
        last_us = first_at_or_after(grid_us, period_us, self.end_us)
        return np.arange(now_us + period_us, min(before_us, last_us + 1), period_us)

    def _tick(self) -> None:
        """One tick, as `ticks` has it."""
        now_us = self.now_us
        following_us = NEVER_US
        if now_us - self.heard_us >= SILENCE_US:
            following_us = self.record.next_us(now_us)
        until_us = next_tick(
            self.result.begun_us, self.core.model.period_us, now_us, self.heard_us, following_us
        )
        readings = self.record.readings(now_us, until_us)
        first = last = self.next_entry
        while last < len(self.entries) and self.entries[last].at_us <= until_us:
            last += 1
        self.next_entry = last
        inputs = Inputs(readings, self.entries[first:last])
        self.result.add(self.core.advance(self.result.state, until_us, inputs))
        self.result.ticks += 1
        self.result.taken["alone"] += 1
        good_us = [reading.time_us for reading in readings if reading.good]
        self.heard_us = max([self.heard_us, *good_us])


def replay_in_blocks(
    core: Core,
    record: Record,
    entries: Sequence[Entry],
    progress: Progress = lambda reached_us: None,
) -> BlockResult:
    """Run a record through the core in blocks; entries in order of time.

    What it takes one by one is counted in the result's `taken`.
    """
    if not record.channels:
        raise ReplayError("no readings: nothing to replay")
    begun_us = record.first_us
    first = record.readings(begun_us - 1, begun_us)
    state, estimate, transitions = core.initial(begun_us, Inputs(first))
    result = BlockResult(state, list(estimate.marks), list(transitions), begun_us, ticks=1)
    at_once = [entry for entry in entries if entry.at_us == begun_us]
    result.add(core.take(state, at_once))
    end_us = max(record.last_us, entries[-1].at_us if entries else begun_us)
    # memory of this size once given back, the C library keeps smaller pieces at hand from then on:
    # pages that are taken and returned for each array cost as much as the arithmetic
    np.empty(LARGEST_PIECE, np.uint8)
    run = _Run(core, record, entries[len(at_once) :], result, begun_us, end_us)
    run.run(progress)
    result.finish(core)
    return result
