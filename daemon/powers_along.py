"""Whether the dryers of a line run, over several ticks in which that stays as it is."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from daemon.judged_along import Readings, first
from daemon.moisture import dryers
from daemon.moisture.along_course import Course, Ints
from daemon.moisture.description import Power, Refrigerated
from daemon.moisture.drying import Drying
from daemon.moisture.fitting_state import FittingState
from daemon.moisture.power import Powered, switched


@dataclass(frozen=True, slots=True)
class PowersAlong:
    """By tick, but only of the first `good`: in the next one a dryer is switched, has warmed up,
    or is not known of any more."""

    good: int
    before: tuple[Powered, ...]
    contacts: Mapping[int, Sequence[Powered]]  # by dryer: of those that have a contact

    def at(self, row: int) -> tuple[Powered, ...]:
        """After one tick."""
        if not self.contacts:
            return self.before
        return tuple(
            self.contacts[number][row] if number in self.contacts else one
            for number, one in enumerate(self.before)
        )


def powers_along(
    drying: Drying, state: FittingState, said: Mapping[str, Readings], course: Course
) -> PowersAlong:
    """After a state, at ticks in which this was said."""
    good = len(course.times_us)
    contacts: dict[int, Sequence[Powered]] = {}
    for number, (_, dryer) in enumerate(drying.dryers):
        before, name = state.power[number], dryer.power.contact
        if name is None:
            good = min(good, _by_hours(before, dryer.power, course, drying.period_us))
        else:
            contacts[number] = _told(before, dryer.power, said[name], course, drying.period_us)
            good = min(good, len(contacts[number]))
        if isinstance(dryer, Refrigerated):
            good = min(good, _warm(before, course.times_us))
    return PowersAlong(good, state.power, contacts)


def _by_hours(before: Powered, power: Power, course: Course, period_us: int) -> int:
    """So many ticks from the first in which a dryer without a contact stays as it is."""
    is_open, to_us = course.is_open, int(course.times_us[0])
    if switched(before, power, (), bool(is_open[0]), to_us, period_us) != before:
        return 0
    return first(is_open != is_open[0], len(is_open))


def _told(
    before: Powered, power: Power, said: Readings, course: Course, period_us: int
) -> list[Powered]:
    """A dryer with a contact after each tick, up to the first in which it is not as before."""
    found: list[Powered] = []
    now, place = before, 0
    times_us, is_open = course.times_us.tolist(), course.is_open.tolist()
    ends = np.searchsorted(said.tick, np.arange(len(times_us)), side="right").tolist()
    for to_us, works, end in zip(times_us, is_open, ends, strict=True):
        part = slice(place, end)
        told = [
            (at_us, value, True)
            for at_us, value in zip(
                said.times_us[part].tolist(), said.values[part].tolist(), strict=True
            )
        ]
        now, place = switched(now, power, told, works, to_us, period_us), end
        if not _alike(now, before):
            break
        found.append(now)
    return found


def _alike(one: Powered, other: Powered) -> bool:
    """But for when its contact was last heard, and whether it repeats its level."""
    same = one.since_us == other.since_us and one.known is other.known
    return same and one.contact.closed is other.contact.closed


def _warm(before: Powered, times_us: Ints) -> int:
    """So many ticks from the first in which a refrigerated dryer stays warm, or cold."""
    warm = times_us - before.since_us >= dryers.WARMS_UP_US
    return first(warm != warm[0], len(warm))
