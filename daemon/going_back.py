"""Advancing again from a checkpoint through what is stored, a little at a time.

A drain that is reported a week late means sixty thousand ticks: a daemon that made them all between
two of its own would not sample for minutes, and answer nobody.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from daemon.advance import Core
from daemon.clock import DAY_US, MINUTE_US
from daemon.hour_figures import Noted, joined
from daemon.journal import Entry
from daemon.state import CoreState
from daemon.store.store import Store
from daemon.ticks import ticks
from sensors.quality import as_given

TOO_OLD_US = 7 * DAY_US  # an entry dated before this is kept, but the model does not go back
AT_ONCE_US = 10 * MINUTE_US  # of the record, between two looks at the time


def is_reckoned_with(entry: Entry) -> bool:
    """Whether the model goes back to when an entry is dated, should that be in the past."""
    return entry.at_us >= entry.written_us - TOO_OLD_US


@dataclass(frozen=True, slots=True)
class Back:
    """A state that was come back to."""

    state: CoreState
    pending: list[Entry]  # committed, dated after it
    rewritten: bool  # checkpoints after the one it was made from are gone: they were wrong
    from_us: int  # the time of that one
    noted: Noted  # for the weekly log, since then


class GoingBack:
    """On the way from a checkpoint to the last stored tick. Until it is there, no checkpoint of a
    state that does not know of the late entries may be kept: a start would take it for complete."""

    def __init__(
        self,
        core: Core,
        store: Store,
        grid_us: int,
        before_us: int | None,
        state: CoreState,
        rewritten: bool,
    ) -> None:
        self._core, self._store, self._grid_us = core, store, grid_us
        self._before_us, self._rewritten = before_us, rewritten
        self._state, self._from_us = state, state.time_us
        self.reached_us = state.time_us
        self._noted: list[Noted] = []

    def go_on(self, until_us: int, in_time: Callable[[], bool] = lambda: True) -> Back | None:
        """Advance to the last stored tick up to `until_us`; None when the time was up before.

        StoreError as it comes: what was done by then is kept, and can be gone on with.
        """
        entries = self._entries()
        while self.reached_us < until_us:
            self._advance(min(self.reached_us + AT_ONCE_US, until_us), entries)
            if self.reached_us < until_us and not in_time():
                return None
        if self._before_us is not None:
            self._store.drop_checkpoints_after(self._before_us - 1)
        undoings = self._store.undoings().values()
        # an undoing that no tick has followed: what was announced has not been corrected yet
        untold = any(undo.at_us > self._state.time_us for undo in undoings)
        return Back(
            self._state,
            [entry for entry in entries if entry.at_us > self._state.time_us],
            self._rewritten or self._before_us is not None or untold,
            self._from_us,
            joined(self._noted),
        )

    def _entries(self) -> list[Entry]:
        """What is recorded by now, dated after the state, in order of time."""
        found = self._store.entries(from_us=self._state.time_us + 1)
        usable = [entry for entry in found if is_reckoned_with(entry)]
        return sorted(usable, key=lambda entry: (entry.at_us, entry.seq))

    def _advance(self, until_us: int, entries: list[Entry]) -> None:
        """Through the ticks that are stored up to a time."""
        for tick_us, readings in self._store.ticks(self._state.time_us, until_us):
            after_us = self._state.time_us
            for each in ticks(
                self._grid_us,
                self._core.model.period_us,
                after_us,
                self._core.heard_us(self._state),
                sorted(as_given(readings), key=lambda reading: reading.time_us),
                [entry for entry in entries if after_us < entry.at_us <= tick_us],
                tick_us,
            ):
                self._state, estimate, _ = self._core.advance(self._state, each.now_us, each.inputs)
                self._noted += [estimate.noted] if estimate.noted else []
        self.reached_us = until_us
