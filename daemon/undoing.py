"""Taking back a drain: who may, and for how long. What is undone counts as if it had never been."""

from __future__ import annotations

from daemon.clock import MINUTE_US
from daemon.errors import UndoError
from daemon.journal import Drain, Entry, Undo

WITHIN_US = 10 * MINUTE_US  # after it was recorded


def may_be_undone(drain: Entry, now_us: int) -> bool:
    """Whether there is still time for it."""
    return now_us - drain.written_us <= WITHIN_US


def same_initials(one: str, other: str) -> bool:
    """Whether two people's initials are one person's."""
    return one.strip().casefold() == other.strip().casefold()


def check(undo: Undo, found: Entry | None, now_us: int) -> Entry:
    """The drain that is to be taken back. UndoError says why it cannot be, and what to do."""
    if found is None or not isinstance(found.body, Drain) or found.body.trap != undo.trap:
        raise UndoError(
            f"entry {undo.entry} is no drain of {undo.trap}: look at its drains for the number"
        )
    by = found.body.by
    if not same_initials(by, undo.by):
        whose = f'"{by}"' if by else "nobody's initials"
        said = f'"{undo.by}"' if undo.by else "none"
        raise UndoError(
            f"it was recorded with {whose}, and the undo came with {said}: the same initials are "
            "asked for"
        )
    if not may_be_undone(found, now_us):
        minutes = (now_us - found.written_us) // MINUTE_US
        raise UndoError(
            f"it was recorded {minutes} minutes ago, and can be taken back for "
            f"{WITHIN_US // MINUTE_US}: drain {undo.trap} again and record what came, then the "
            "estimate is right from there on"
        )
    return found
