"""A clock that is not set yet: what is sampled meanwhile waits, and gets its times afterwards.

A Pi has no clock battery. Until a time server has answered, it may say 1970, or the day on which
it was switched off; only the first of these can be told.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

from daemon.clock import parse_rfc3339
from sensors.reading import Reading

SET_FROM_US = parse_rfc3339("2025-01-01T00:00:00Z")  # no reading of this program can be older
PATIENCE_S = 600.0  # then a shop without a time server is better served by wrong dates than by none


def is_set(now_us: int) -> bool:
    """Whether a clock that says this can be right."""
    return now_us >= SET_FROM_US


@dataclass(slots=True)
class HeldSamples:
    """What was sampled at which second of the monotonic clock, with the wall's wrong time."""

    period_us: int
    samples: list[tuple[float, int, list[Reading]]] = field(default_factory=list)

    def stamp_us(self, now_us: int) -> int:
        """The wall's time as a whole period, which is what a held sample is stamped with."""
        return now_us - now_us % self.period_us

    def add(self, monotonic_s: float, stamp_us: int, readings: Sequence[Reading]) -> None:
        """Hold a sample."""
        self.samples.append((monotonic_s, stamp_us, list(readings)))

    def told(self, monotonic_s: float, now_us: int) -> list[tuple[int, list[Reading]]]:
        """The samples as (time, readings), in order, now that the wall says `now_us`.

        Times move by whole periods, so that ticks go on standing at full hours; what that is off by
        is half a period at most. While the clock is still not set they stay as they are.
        """
        found: list[tuple[int, list[Reading]]] = []
        for second, stamp_us, readings in self.samples:
            true_us = now_us - round((monotonic_s - second) * 1e6)
            periods = round((true_us - stamp_us) / self.period_us) if is_set(now_us) else 0
            shift_us = periods * self.period_us
            at_us = stamp_us + shift_us
            if found and at_us <= found[-1][0]:
                at_us = found[-1][0] + self.period_us
                shift_us = at_us - stamp_us
            moved = [replace(each, time_us=each.time_us + shift_us) for each in readings]
            found.append((at_us, moved))
        return found
