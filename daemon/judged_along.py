"""Judges the readings of several ticks at once, as `sensors.quality.judge` does one by one.

Only readings that nothing speaks against are taken in here: what is found is how many ticks from
the first have no others, and what is remembered after those. The rest is judged one by one.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
import numpy.typing as npt

from daemon.judging import Judging
from daemon.moisture.along_course import Bools, Ints
from daemon.moisture.ensemble import Array
from daemon.state import ChannelRecord
from sensors.quality import DISAGREES, ChannelState, QualityState
from sensors.quality_rules import (
    DRY_AGAIN,
    LIVELY_MOVES,
    LONGEST_GAP_US,
    OFF_LONG_S,
    QUICK_STEPS,
    REPEATED,
    SATURATED,
    SLOW_COSTS,
    Agreement,
    Part,
    Rule,
)


@dataclass(frozen=True, slots=True)
class Readings:
    """What one channel said in several ticks. Arrays are (readings,)."""

    times_us: Ints
    values: Array
    tick: Ints  # the row of the tick that takes in each
    regular: bool  # one at each tick, at its own time

    def count(self, ticks: int) -> int:
        """How many of them the first ticks take in."""
        return ticks if self.regular else int(np.searchsorted(self.tick, ticks))


def first(found: npt.NDArray[np.bool_], otherwise: int) -> int:
    """The first row that is so."""
    return int(found.argmax()) if found.any() else otherwise


@dataclass(slots=True)
class _Channel:
    """One channel's readings held against its rule and against what is remembered of it."""

    rule: Rule
    before: ChannelState
    said: Readings
    ran_us: Ints  # by tick
    last_change: Ints = field(init=False)  # the reading that last changed; -1: before all
    repeated: Ints = field(init=False)

    def __post_init__(self) -> None:
        values = self.said.values
        order = np.arange(len(values))
        same = values == np.concatenate(([self.before.value], values[:-1]))
        if not same.any():  # as nearly always
            self.last_change, self.repeated = order, np.zeros_like(order)
            return
        self.last_change = np.maximum.accumulate(np.where(same, -1, order))
        self.repeated = np.where(
            self.last_change >= 0, order - self.last_change, self.before.repeated + order + 1
        )

    def _is_plain(self) -> bool:
        """Whether no reading can be bad, at a glance."""
        rule, values = self.rule, self.said.values
        if rule.saturates or (rule.frozen_running_s is not None and self.may_stand()):
            return False
        if not (values.min() >= rule.lowest and values.max() <= rule.highest):
            return False
        if rule.fastest_per_s is None:
            return True
        steps = np.abs(np.diff(values, prepend=self.before.value))
        return bool(steps.max() <= rule.jump)

    def first_bad(self) -> int:
        """The first reading that is not simply good."""
        if self._is_plain():
            return len(self.said.values)
        rule, before, values, times = self.rule, self.before, self.said.values, self.said.times_us
        bad = (values < rule.lowest) | (values > rule.highest)
        if rule.fastest_per_s is not None:
            change = np.abs(np.diff(values, prepend=before.value))
            seconds = np.diff(times, prepend=before.time_us) / 1e6
            bad |= change > rule.jump + rule.fastest_per_s * seconds
        if rule.saturates:
            bad |= values >= SATURATED
            if (before.wet or before.wet_since_us is not None) and values[0] >= DRY_AGAIN:
                bad[0] = True
        if rule.frozen_running_s is not None and self.may_stand():
            bad |= (self.repeated >= REPEATED) & (self._ran() >= rule.frozen_running_s * 1e6)
        return first(bad, len(values))

    def may_stand(self) -> bool:
        """Whether it is known to move, and did not for long."""
        still = bool((self.repeated >= REPEATED).any())
        return still and self._moves(len(self.repeated)) >= LIVELY_MOVES

    def since_us(self) -> Ints:
        """Since when each reading's value has been that."""
        times = self.said.times_us
        return np.where(self.last_change >= 0, times[self.last_change], self.before.same_since_us)

    def _ran(self) -> Ints:
        """How long the compressor ran since each reading's value last changed."""
        ran = np.cumsum(self.ran_us[self.said.tick])
        changed = self.last_change
        return np.where(changed >= 0, ran - ran[changed], self.before.ran_us + ran)

    def _moves(self, count: int) -> int:
        moves, before = self.before.moves, self.before
        if moves >= LIVELY_MOVES:
            return moves
        times, since_us = self.said.times_us, before.same_since_us
        known = not math.isnan(before.value)
        for at in np.flatnonzero(self.last_change[:count] == np.arange(count)).tolist():
            step_us = int(times[at] - (times[at - 1] if at else before.time_us))
            quick = (known or at > 0) and int(times[at]) - since_us <= QUICK_STEPS * step_us
            moves = moves + 1 if quick else max(moves - SLOW_COSTS, 0)
            since_us = int(times[at])
            if moves >= LIVELY_MOVES:
                break
        return moves

    def after(self, count: int) -> ChannelState:
        """What is remembered after so many readings, all of them good."""
        if count == 0:
            return self.before
        at, said, before = count - 1, self.said, self.before
        changed = int(self.last_change[at])  # -1: what was remembered goes on
        ran_us = int(self.ran_us[said.tick[changed + 1 : count]].sum())
        if self.rule.saturates:
            before = replace(before, wet_since_us=None, wet=False)
        return replace(
            before,
            value=float(said.values[at]),
            time_us=int(said.times_us[at]),
            same_since_us=before.same_since_us if changed < 0 else int(said.times_us[changed]),
            repeated=int(self.repeated[at]),
            ran_us=before.ran_us + ran_us if changed < 0 else ran_us,
            moves=self._moves(count),
            jumped=0,
            jump_value=math.nan,
        )


@dataclass(slots=True)
class JudgedAlong:
    """The judgement of several ticks."""

    good: int  # so many ticks from the first have readings that are simply good
    _before: QualityState
    _channels: Mapping[str, _Channel]
    _at_us: list[int]
    _off_since_us: list[int | None]

    def after(self, ticks: int) -> QualityState:
        """What is remembered after so many ticks, at least one and at most the good ones."""
        channels = dict(self._before.channels)
        for name, one in self._channels.items():
            count = one.said.count(ticks)
            if count:
                channels[name] = one.after(count)
        return QualityState(channels, self._off_since_us[ticks - 1], self._at_us[ticks - 1])


def judge_along(
    judging: Judging,
    before: QualityState,
    records: Mapping[str, ChannelRecord],
    said: Mapping[str, Readings],
    times_us: Ints,
) -> JudgedAlong:
    """Judge the readings of ticks at these times."""
    at_us = _heard_us(said, before.last_us or 0, times_us)
    ran = _ran(judging, records, said, times_us)
    off_since = _off_since(before.off_since_us, ran, at_us.tolist())
    passed_us = np.minimum(np.diff(at_us, prepend=before.last_us or at_us[0]), LONGEST_GAP_US)
    ran_us = np.where(ran == 1, passed_us, 0)
    rules = judging.rules
    channels = {
        name: _Channel(rule, before.channels.get(name, ChannelState()), said[name], ran_us)
        for name, rule in rules.channels.items()
        if len(said[name].values)
    }
    doubted = _doubted(before)
    good = 0 if doubted is None else len(times_us)
    for one in channels.values():
        bad = one.first_bad()
        if bad < len(one.said.values):
            good = min(good, int(one.said.tick[bad]))
    for part in rules.parts:
        good = min(good, _first_frozen(part, channels, at_us))
    settled = np.array([since is not None for since in off_since])
    settled &= at_us - np.array([since or 0 for since in off_since]) >= OFF_LONG_S * 1e6
    good = min(good, _first_doubted_else(rules.agreements, said, settled, doubted or set()))
    return JudgedAlong(good, before, channels, at_us.tolist(), off_since)


def _heard_us(said: Mapping[str, Readings], last_us: int, times_us: Ints) -> Ints:
    """The time of the last reading of each tick; of an earlier one where there is none."""
    if any(each.regular for each in said.values()):
        return times_us
    found = np.full(len(times_us), last_us)
    for each in said.values():
        np.maximum.at(found, each.tick, each.times_us)
    return np.maximum.accumulate(found)


def _ran(
    judging: Judging,
    records: Mapping[str, ChannelRecord],
    said: Mapping[str, Readings],
    times_us: Ints,
) -> npt.NDArray[np.int8]:
    """Whether the compressor ran at any time of each tick: 1, 0, or -1 where nobody knows."""
    ticks = len(times_us)
    if judging.running is None:
        return np.full(ticks, -1, np.int8)
    record, one = records[judging.running], said[judging.running]
    high = np.bincount(one.tick, one.values > 0.5, ticks) > 0
    there = np.bincount(one.tick, minlength=ticks) > 0
    place = np.searchsorted(one.tick, np.arange(ticks)) - 1  # the last reading of earlier ticks
    known = place >= 0
    was_us = np.full(ticks, record.time_us)
    was_high = np.full(ticks, record.value > 0.5)
    was_us[known] = one.times_us[place[known]]
    was_high[known] = one.values[place[known]] > 0.5
    fresh = record.only_edges | (times_us - was_us <= judging.stale_us)
    counts = fresh & (was_us >= 0) & (known | (not record.fault))
    ran = np.where(high | (counts & was_high), 1, 0)
    return np.where(there | counts, ran, -1).astype(np.int8)


def _off_since(
    since_us: int | None, ran: npt.NDArray[np.int8], at_us: Sequence[int]
) -> list[int | None]:
    """Since when it has been off, after each tick; None while it is not known to be."""
    found: list[int | None] = []
    for state, now_us in zip(ran.tolist(), at_us, strict=True):
        if state != 0:
            since_us = None
        elif since_us is None:
            since_us = now_us
        found.append(since_us)
    return found


def _first_frozen(part: Part, channels: Mapping[str, _Channel], at_us: Ints) -> int:
    """The first tick in which a part may be taken to repeat an old conversion."""
    of_part = [channels.get(name) for name in part.channels]
    found = [one for one in of_part if one is not None]
    if len(found) < len(of_part) or any((one.repeated < REPEATED).all() for one in found):
        return len(at_us)
    if not any(one.may_stand() for one in found):
        return len(at_us)
    if not all(one.said.regular for one in found):
        return 0
    still = np.logical_and.reduce([one.repeated >= REPEATED for one in found])
    since_us = np.maximum.reduce([one.since_us() for one in found])
    return first(still & (at_us - since_us >= part.frozen_s * 1e6), len(at_us))


def _doubted(before: QualityState) -> set[str] | None:
    """The channels that are in doubt; None where more than that is said of one."""
    found = set()
    for name, one in before.channels.items():
        if any(each != (DISAGREES, "doubt") for each in one.said.items()):
            return None
        found |= {name} if one.said else set()
    return found


def _first_doubted_else(
    agreements: Sequence[Agreement],
    said: Mapping[str, Readings],
    settled: Bools,
    doubted: set[str],
) -> int:
    """The first tick in which other channels are in doubt than before, or one is odd."""
    ticks = len(settled)
    good, doubts = ticks, {name: np.zeros(ticks, bool) for name in said}
    for agreement in agreements:
        active = np.full(ticks, True) if agreement.always else settled
        names = agreement.channels
        for name in doubted.intersection(names):
            doubts[name] |= ~active
        if not active.any():
            continue
        odd = _odd(agreement, said, active)
        if odd is None:
            continue
        if len(names) > 2 and not agreement.doubt_only:
            good = min(good, first(np.logical_or.reduce(odd), ticks))
        for name, rows in zip(names, odd, strict=True):
            doubts[name] |= rows
    for name, rows in doubts.items():
        if rows.any() or name in doubted:
            told = said[name].tick
            changed = rows[told] != (name in doubted)
            good = min(good, int(told[changed.argmax()]) if changed.any() else ticks)
    return good


def _odd(agreement: Agreement, said: Mapping[str, Readings], active: Bools) -> Bools | None:
    """Which channels are odd in which ticks, of two both; None for none, (channels, ticks)."""
    rows = np.full((len(agreement.channels), len(active)), np.nan)
    for row, name in zip(rows, agreement.channels, strict=True):
        row[said[name].tick] = said[name].values  # the last one of each tick
    silent = np.isnan(rows)
    highest = np.where(silent, -np.inf, rows).max(axis=0)
    lowest = np.where(silent, np.inf, rows).min(axis=0)
    apart = active & (highest - lowest > agreement.within)  # else none is so far from the middle
    if not apart.any():
        return None
    odd = np.zeros(rows.shape, bool)
    far = np.abs(rows[:, apart] - np.nanmedian(rows[:, apart], axis=0)) > agreement.within
    both = (~silent[:, apart]).sum(axis=0) == 2
    odd[:, apart] = np.where(both, ~silent[:, apart], far)
    return odd
