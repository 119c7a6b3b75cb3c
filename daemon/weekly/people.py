"""What people did in a week, from the journal and the alarms: drains, and alarms that were seen."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from statistics import median
from typing import Any

from daemon.alarms import Transition
from daemon.clock import MINUTE_US, SECOND_US
from daemon.journal import Drain, Undo
from daemon.site.types import Site
from daemon.weekly.records import AlarmWeek, DrainLine
from daemon.weekly.rows import WeekRows, due_alarm

# A drain within so long of falling due is on time: nobody stands beside it. Practice, no source.
ON_TIME_US = 30 * MINUTE_US
_RAISED = ("unacknowledged", "acknowledged", "shelved")


# ---- drains ----


def drain_lines(site: Site, rows: WeekRows) -> list[DrainLine]:
    """Every drain in order of time, without those that were taken back.

    One that was a surprise at first counts as learned from once somebody has confirmed it, be it in
    a later week (`daemon/weekly/confirmed.py`).
    """
    undone = {body.entry for entry in rows.entries if isinstance(body := entry.body, Undo)}
    checks = {check.seq: check for check in rows.checks}
    changes = due_changes(site, rows)
    found = []
    for entry in sorted(rows.entries, key=lambda each: (each.at_us, each.seq)):
        drain = entry.body
        known = isinstance(drain, Drain) and drain.trap in site.traps
        if not known or entry.seq in undone or entry.at_us >= rows.to_us:
            continue
        assert isinstance(drain, Drain)
        check = checks.get(entry.seq)
        found.append(
            DrainLine(
                at_us=entry.at_us,
                trap=drain.trap,
                outcome=drain.outcome,
                measured_kg=0.0 if drain.outcome == "empty" else drain.volume_kg,
                expected_kg=None if check is None else check.expected_kg,
                believed=check is None or check.learned or entry.seq in rows.confirmed,
                late_s=_late_s(changes[drain.trap], drain, entry.at_us),
                by=drain.by,
                look=drain.look,
            )
        )
    return found


def _late_s(changes: Sequence[Transition], drain: Drain, at_us: int) -> float | None:
    """How long after falling due; None: on time, or it was not emptied."""
    if drain.outcome == "partly":
        return None
    since_us = due_since_us(changes, at_us)
    if since_us is None or at_us - since_us <= ON_TIME_US:
        return None
    return (at_us - since_us) / SECOND_US


def due_changes(site: Site, rows: WeekRows) -> dict[str, list[Transition]]:
    """By trap: how the alarm that its drain is due changed, in the week and before it."""
    found: dict[str, list[Transition]] = {due_alarm(trap): [] for trap in site.traps}
    for each in (*rows.due_before, *rows.transitions):
        if each.alarm in found:
            found[each.alarm].append(each)
    return {trap: found[due_alarm(trap)] for trap in site.traps}


def due_since_us(changes: Sequence[Transition], before_us: int) -> int | None:
    """Since when a drain had been due, as it was announced; None: it was not."""
    since_us: int | None = None
    for each in changes:
        if each.at_us >= before_us:
            break
        if each.after not in _RAISED:
            since_us = None
        elif since_us is None:
            since_us = each.at_us
    return since_us


def counted(site: Site, rows: WeekRows, trap: str, lines: Sequence[DrainLine]) -> dict[str, Any]:
    """The fields of a trap's week that its drains give."""
    own = [line for line in lines if line.trap == trap]
    whole = [line for line in own if line.outcome != "partly"]
    late = [line.late_s for line in whole if line.late_s is not None]
    measured = [line.measured_kg for line in own if line.measured_kg is not None]
    until_us = min(rows.to_us, rows.now_us + 1)
    return {
        "measured_kg": sum(measured),
        "measured": len(measured),
        "unlearned": sum(not line.believed for line in own),
        "drains": len(own),
        "on_time": len(whole) - len(late),
        "late": len(late),
        "longest_late_s": max(late, default=0.0),
        "due_since_us": due_since_us(due_changes(site, rows)[trap], until_us),
    }


# ---- alarms ----


@dataclass(slots=True)
class _Raised:
    kind: str
    at_us: int
    seen_us: int | None = None


def alarm_lines(rows: WeekRows) -> Iterator[AlarmWeek]:
    """By kind, what was raised in the week and how soon it was seen, within the week."""
    found: list[_Raised] = []
    waiting: dict[str, _Raised] = {}  # by alarm: what nobody has seen yet
    for each in rows.transitions:
        if each.id.endswith("/corrected"):
            continue
        if each.after == "unacknowledged" and each.before not in _RAISED:
            waiting[each.alarm] = _Raised(each.kind, each.at_us)
            found.append(waiting[each.alarm])
        elif _was_seen(each) and each.alarm in waiting:
            waiting.pop(each.alarm).seen_us = each.at_us
    for kind in sorted({each.kind for each in found}):
        own = [each for each in found if each.kind == kind]
        delays = [(e.seen_us - e.at_us) / SECOND_US for e in own if e.seen_us is not None]
        middle = median(delays) if delays else None
        yield AlarmWeek(kind, len(own), len(delays), middle, max(delays, default=None))


def _was_seen(change: Transition) -> bool:
    return change.after == "acknowledged" or (
        change.before == "returned unacknowledged" and change.after == "normal"
    )
