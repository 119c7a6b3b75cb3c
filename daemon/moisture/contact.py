"""A contact's time, integrated from its own edges, with what is not known kept apart.

A contact that only reports changes holds until its next change. One that repeats its value within
three sampling periods is being sampled, and goes stale like any other channel when it falls silent.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

STALE_AFTER_PERIODS = 3


@dataclass(frozen=True, slots=True)
class ContactState:
    """What is known of a contact."""

    closed: bool | None = None  # None: it has said nothing yet
    last_us: int = -1  # time of its last good reading
    sampled: bool = False  # it repeats its value: silence means something

    def told(self, time_us: int, closed: bool, period_us: int) -> ContactState:
        """After a good reading."""
        gap_us = time_us - self.last_us
        repeats = self.closed is closed and 0 < gap_us <= STALE_AFTER_PERIODS * period_us
        return ContactState(closed, time_us, self.sampled or repeats)

    def known_until(self, from_us: int, to_us: int, period_us: int) -> int:
        """How far into (from_us, to_us] the last reading still speaks."""
        if self.closed is None:
            return from_us
        if not self.sampled:
            return to_us
        stale_us = self.last_us + STALE_AFTER_PERIODS * period_us
        return min(to_us, max(from_us, stale_us))


@dataclass(frozen=True, slots=True)
class ContactTime:
    """How a span divides, microseconds; what is left over is known to be off."""

    on_us: int = 0
    unknown_us: int = 0


def integrate(
    contact: ContactState,
    readings: Sequence[tuple[int, float, bool]],
    from_us: int,
    to_us: int,
    period_us: int,
) -> tuple[ContactState, ContactTime]:
    """Divide (from_us, to_us] into on, off and unknown.

    `readings` are (time_us, value, good), in order of time, none after `to_us`; one from before
    `from_us` that comes late still tells the level from then on. A bad reading makes the
    contact a sampled one: its silence then means something.
    """
    on_us = unknown_us = 0
    cursor = from_us

    def span(until: int) -> None:
        nonlocal on_us, unknown_us, cursor
        known = contact.known_until(cursor, until, period_us)
        if contact.closed:
            on_us += known - cursor
        unknown_us += until - known
        cursor = until

    for time_us, value, good in readings:
        span(max(cursor, time_us))
        if good:
            contact = contact.told(time_us, value > 0.5, period_us)
        else:
            contact = replace(contact, sampled=True)
    span(to_us)
    return contact, ContactTime(on_us, unknown_us)
