"""What was heard in several ticks, sorted out for the model and for what watches beside it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from daemon.advance import Core
from daemon.judged_along import JudgedAlong, Readings, first, judge_along
from daemon.moisture import floats
from daemon.moisture.along_course import Bools, Course, Ints
from daemon.moisture.contact import STALE_AFTER_PERIODS, ContactState, integrate
from daemon.moisture.ensemble import Array
from daemon.moisture.flow import PumpWatch, Watched, told_all
from daemon.moisture.model import State
from daemon.moisture.power import Powered
from daemon.powers_along import PowersAlong, powers_along
from daemon.record_arrays import Record
from daemon.site import hours as opening
from daemon.state import ChannelRecord, CoreState

Contact = tuple[bool | None, int, bool]  # a `ContactState`'s fields


@dataclass(slots=True)
class Ticks:
    """Several ticks after a state. Rows are ticks; only the first `good` of them are as usual."""

    core: Core
    before: CoreState
    times_us: Ints
    said: Mapping[str, Readings]  # by channel of the site
    judged: JudgedAlong
    course: Course
    good: int
    powers: PowersAlong
    _contacts: Sequence[Contact] = ()
    _pumps: Sequence[Watched] = ()
    _unknown_since_us: list[int] = field(default_factory=list)

    @property
    def ends_us(self) -> tuple[int, int]:
        """The time of the state before, and of the last tick."""
        return self.before.time_us, int(self.times_us[-1])

    # ---- what the model asks for ----

    def contact(self, row: int) -> ContactState:
        """The compressor's contact after a tick."""
        return ContactState(*self._contacts[row]) if self._contacts else self.before.model.contact

    def closed(self, first: int, last: int) -> list[bool]:
        """Whether that contact was closed after the ticks from `first` on, before `last`."""
        if not self._contacts:
            return [bool(self.before.model.contact.closed)] * (last - first)
        return [bool(closed) for closed, _, _ in self._contacts[first:last]]

    def unknown_us(self, first: int, last: int) -> list[int]:
        """`contact_unknown_us` of the ticks from `first` on, before `last`."""
        return self._unknown_since_us[first:last]

    def pumping(self, first: int, last: int) -> list[bool]:
        """Whether the pressure rose after the ticks from `first` on, before `last`."""
        if not self._pumps:
            return [self.before.model.pump.pumping] * (last - first)
        return [pumping for pumping, *_ in self._pumps[first:last]]

    def pump(self, row: int) -> PumpWatch:
        """The watch of its pressure after a tick."""
        return PumpWatch(*self._pumps[row]) if self._pumps else self.before.model.pump

    def contact_unknown_us(self, row: int) -> int:
        """Since when the contact is not known, after a tick."""
        return self._unknown_since_us[row]

    def power(self, row: int) -> tuple[Powered, ...]:
        """Whether dryers run, after a tick."""
        return self.powers.at(row)

    # ---- what is remembered of the channels ----

    def heard_us(self, ticks: int) -> int:
        """The last reading of the first ticks; -1: there is none."""
        counts = [(said, said.count(ticks)) for said in self.said.values()]
        return max((int(said.times_us[n - 1]) for said, n in counts if n), default=-1)

    def channels(self, ticks: int) -> dict[str, ChannelRecord]:
        """The records after the first ticks."""
        found = dict(self.before.channels)
        for name, said in self.said.items():
            count = said.count(ticks)
            if count:
                value, time_us = float(said.values[count - 1]), int(said.times_us[count - 1])
                only_edges = found[name].only_edges
                found[name] = ChannelRecord(value, time_us, time_us, "", only_edges)
        return found


def ticks_along(core: Core, before: CoreState, record: Record, times_us: Ints) -> Ticks:
    """Sort out what was recorded for the ticks at these times: one period apart, the first one
    period after the state, all but the last within one hour."""
    said = {name: _readings(record, name, before.time_us, times_us) for name in core.site.channels}
    judged = judge_along(core.judging, before.quality, before.channels, said, times_us)
    good = min(
        judged.good,
        _as_before(core, before, said, times_us),
        _float(core, before, said, len(times_us)),
    )
    model, period_us = before.model, core.model.period_us
    values, told_us, silent = {}, {}, {}
    for name in core.model.plan.channels:
        held = model.held.get(name)
        values[name], told_us[name] = _along(
            said[name], held.value if held else np.nan, held.time_us if held else -1, len(times_us)
        )
        is_silent = held is None or held.stale(before.time_us, period_us)
        stale = times_us - told_us[name] > STALE_AFTER_PERIODS * period_us
        stale |= told_us[name] < 0
        good = min(good, first(stale != is_silent, len(times_us)))
        silent[name] = is_silent
    heard = [name for name in values if told_us[name][0] >= 0]
    contacts, on_us, unknown_us = _contact(core, model, said, times_us)
    since_us = _unknown_since(model, unknown_us, times_us)
    pumps, booked_us = _pump(core, model, said, since_us)
    course = Course(
        times_us,
        {name: values[name] for name in heard},
        {name: told_us[name] for name in heard},
        {name: silent[name] for name in heard},
        _is_open(core, times_us),
        on_us,
        unknown_us,
        booked_us,
    )
    powers = powers_along(core.model.fittings.drying, model.fittings, said, course)
    return Ticks(
        core,
        before,
        times_us,
        said,
        judged,
        course,
        min(good, powers.good),
        powers,
        contacts,
        pumps,
        since_us[1:],
    )


def _readings(record: Record, name: str, after_us: int, times_us: Ints) -> Readings:
    told = record.channels.get(name)
    if told is None:
        return Readings(np.empty(0, np.int64), np.empty(0), np.empty(0, np.int64), False)
    times, values = told.between(after_us, int(times_us[-1]))
    if len(times) == len(times_us) and np.array_equal(times, times_us):
        return Readings(times, values, np.arange(len(times)), True)
    return Readings(times, values, np.searchsorted(times_us, times), False)


def _along(said: Readings, value: float, time_us: int, ticks: int) -> tuple[Array, Ints]:
    """A channel's last value by each tick, and when it said so."""
    if said.regular:
        return said.values, said.times_us
    last = np.searchsorted(said.tick, np.arange(ticks), side="right") - 1
    values = np.concatenate((said.values, [value]))  # -1: what was held before
    times = np.concatenate((said.times_us, [time_us]))
    return values[last], times[last]


def _as_before(core: Core, before: CoreState, said: Mapping[str, Readings], times_us: Ints) -> int:
    """The first tick in which a channel falls silent, or is not so any more, or is new."""
    stale_us = STALE_AFTER_PERIODS * core.model.period_us
    good = len(times_us)
    for name, record in before.channels.items():
        one = said[name]
        begins = record.time_us < 0 or bool(record.fault) or _repeats(core, record, name, one)
        if begins and len(one.tick):
            good = min(good, int(one.tick[0]))
        if record.only_edges:
            continue
        since_us = max(record.heard_us, before.begun_us)
        _, heard_us = _along(one, 0.0, since_us, len(times_us))
        silent = times_us - np.maximum(heard_us, before.begun_us) > stale_us
        good = min(good, first(silent != (before.time_us - since_us > stale_us), len(times_us)))
    return good


def _float(core: Core, before: CoreState, said: Mapping[str, Readings], ticks: int) -> int:
    """The first tick in which a float switch closes or opens."""
    good = ticks
    for _, switch in floats.switches(core.model.plan):
        seen, one = before.sensed.floats.get(switch.channel), said[switch.channel]
        closed = None if seen is None else seen.closed
        moves = np.full(len(one.values), True) if closed is None else (one.values > 0.5) != closed
        good = min(good, int(one.tick[moves.argmax()]) if moves.any() else ticks)
    return good


def _repeats(core: Core, record: ChannelRecord, name: str, said: Readings) -> bool:
    """Whether a contact that only told of changes now tells its level: from then on its silence
    means something."""
    if not record.only_edges or core.site.channels[name].quantity != "contact":
        return False
    values = np.concatenate(([record.value], said.values))
    return bool((values[1:] == values[:-1]).any())


def _contact(
    core: Core, model: State, said: Mapping[str, Readings], times_us: Ints
) -> tuple[list[Contact], Ints, Ints]:
    """The compressor's contact after each tick, and how long it was closed or not known."""
    name, period_us, ticks = (
        core.model.plan.line.compressor.running,
        core.model.period_us,
        len(times_us),
    )
    if name is None:
        return [], np.zeros(ticks, np.int64), np.full(ticks, period_us)
    contact = model.contact
    states: list[Contact] = []
    if said[name].regular and contact.known_until(
        model.time_us, int(times_us[0]), period_us
    ) == int(times_us[0]):
        return _sampled(contact, said[name], period_us)
    on_us, unknown_us = np.zeros(ticks, np.int64), np.zeros(ticks, np.int64)
    told = _by_tick(said[name], ticks)
    from_us = model.time_us
    for row, to_us in enumerate(times_us.tolist()):
        contact, times = integrate(contact, told[row], from_us, to_us, period_us)
        states.append((contact.closed, contact.last_us, contact.sampled))
        on_us[row], unknown_us[row] = times.on_us, times.unknown_us
        from_us = to_us
    return states, on_us, unknown_us


def _sampled(
    contact: ContactState, said: Readings, period_us: int
) -> tuple[list[Contact], Ints, Ints]:
    """The same where the contact is known, and tells its level at every tick."""
    closed = said.values > 0.5
    was = np.concatenate(([bool(contact.closed)], closed[:-1]))
    repeats = closed == was
    gap_us = int(said.times_us[0]) - contact.last_us
    repeats[0] &= contact.closed is not None and 0 < gap_us <= STALE_AFTER_PERIODS * period_us
    sampled = np.logical_or.accumulate(repeats) | contact.sampled
    states = list(zip(closed.tolist(), said.times_us.tolist(), sampled.tolist(), strict=True))
    return states, np.where(was, period_us, 0), np.zeros(len(was), np.int64)


def _by_tick(said: Readings, ticks: int) -> list[list[tuple[int, float, bool]]]:
    found: list[list[tuple[int, float, bool]]] = [[] for _ in range(ticks)]
    for row, time_us, value in zip(
        said.tick.tolist(), said.times_us.tolist(), said.values.tolist(), strict=True
    ):
        found[row].append((time_us, value, True))
    return found


def _unknown_since(model: State, unknown_us: Ints, times_us: Ints) -> list[int]:
    """Since when the contact is not known, before the first tick and after each."""
    since_us = model.contact_unknown_us
    found = [since_us]
    for how_long_us, to_us in zip(unknown_us.tolist(), times_us.tolist(), strict=True):
        if how_long_us == 0:
            since_us = -1
        elif since_us < 0:
            since_us = to_us - how_long_us
        found.append(since_us)
    return found


def _pump(
    core: Core, model: State, said: Mapping[str, Readings], unknown_since_us: Sequence[int]
) -> tuple[list[Watched], Ints]:
    """The watch of the pressure after each tick, and what it then books as run."""
    ticks = len(unknown_since_us) - 1
    booked_us = np.zeros(ticks, np.int64)
    if core.model.gauge is None:
        return [], booked_us
    name, span_pa = core.model.gauge
    if said[name].regular:
        found, runs_since_us = told_all(
            model.pump, said[name].values.tolist(), said[name].times_us.tolist(), span_pa
        )
        since_us = np.array(unknown_since_us[:-1])
        booked_us = np.maximum(said[name].times_us - np.maximum(runs_since_us, since_us), 0)
        return found, np.where(since_us >= 0, booked_us, 0)
    pump = model.pump
    pumps: list[Watched] = []
    for row, told in enumerate(_by_tick(said[name], ticks)):
        for time_us, value, _ in told:
            pump, from_us, until_us = pump.told(value, time_us, span_pa)
            if unknown_since_us[row] >= 0:
                booked_us[row] += max(0, until_us - max(from_us, unknown_since_us[row]))
        pumps.append(_fields(pump))
    return pumps, booked_us


def _fields(pump: PumpWatch) -> Watched:
    swing = pump.pumping, pump.extreme_pa, pump.extreme_us
    noise = pump.before_pa, pump.noise_pa2, pump.readings
    return (*swing, *noise, pump.anchor_pa, pump.anchor_us)


def _is_open(core: Core, times_us: Ints) -> Bools:
    spans = opening.open_around(core.site.hours, core.site.timezone, int(times_us[0]))
    if spans is None:
        return np.ones(len(times_us), bool)
    is_open = np.zeros(len(times_us), bool)
    for opens_us, closes_us in spans:
        is_open |= (times_us >= opens_us) & (times_us < closes_us)
    return is_open
