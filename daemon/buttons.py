"""The "drained" buttons beside traps: a press is a drain in the journal, like a tap on a page."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from daemon.journal import Drain
from daemon.site.trap_sensors import buttons
from daemon.site.types import Site
from daemon.state import ChannelRecord
from sensors.reading import Reading

BY = "button"


@dataclass(frozen=True, slots=True)
class Press:
    """One press, which says that a trap was emptied."""

    channel: str
    trap: str
    at_us: int

    @property
    def key(self) -> str:
        """The same press, told again after a failure, is the same drain."""
        return f"{self.channel}@{self.at_us}"

    @property
    def drain(self) -> Drain:
        return Drain(self.trap, by=BY)


class Buttons:
    """The buttons of one site."""

    def __init__(self, site: Site) -> None:
        self._traps = dict(buttons(site.sensors))

    def presses(
        self, readings: Sequence[Reading], before: Mapping[str, ChannelRecord]
    ) -> Iterator[Press]:
        """The presses among readings in order of time; `before` is what was last said.

        Only a change that was seen is a press: a button that is closed when it is first heard, or
        after a fault, may have been so for long.
        """
        for channel, trap in self._traps.items():
            record = before[channel]
            released = record.time_us >= 0 and not record.fault and record.value < 0.5
            for each in readings:
                if each.channel != channel:
                    continue
                closed = each.good and each.value > 0.5
                if closed and released:
                    yield Press(channel, trap, each.time_us)
                released = each.good and not closed
