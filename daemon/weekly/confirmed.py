"""Which measured drains were learned from after all, because a person confirmed them. Pure.

What a drain's measurement taught is noted as it is measured, and a surprise is noted as not learned
from. A confirmation speaks of the trap's last measurement, whenever it comes (`daemon/taking.py`).
It belongs to the drain: a log says that the drain was learned from also when somebody confirmed it
in a later week, so that a week's page may say more than the files that were written as it ended.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from daemon.hour_figures import DrainCheck
from daemon.journal import Confirm, Drain, Entry


def waiting(checks: Iterable[DrainCheck]) -> list[DrainCheck]:
    """The measurements that were not learned from at once."""
    return [check for check in checks if not check.learned]


def confirmed(checks: Iterable[DrainCheck], entries: Sequence[Entry]) -> frozenset[int]:
    """The numbers of the drains among `checks` that were confirmed; `entries` are those that count.

    A measurement can be confirmed until the trap's next one, which takes its place as the last.
    """
    in_order = sorted(entries, key=lambda each: (each.at_us, each.seq))
    return frozenset(check.seq for check in waiting(checks) if _was_confirmed(check, in_order))


def _was_confirmed(check: DrainCheck, in_order: Sequence[Entry]) -> bool:
    for entry in in_order:
        if (entry.at_us, entry.seq) <= (check.at_us, check.seq):
            continue
        match entry.body:
            case Confirm(trap=trap) if trap == check.trap:
                return True
            case Drain(trap=trap) as drain if trap == check.trap and _measured(drain):
                return False
    return False


def _measured(drain: Drain) -> bool:
    return drain.outcome == "empty" or (drain.outcome == "emptied" and drain.volume_kg is not None)
