"""Alarms: the states and words of ISA-18.2 / IEC 62682, pure; no clock, no I/O."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

from daemon.clock import format_rfc3339

AlarmState = Literal[
    "normal",
    "unacknowledged",
    "acknowledged",
    "returned unacknowledged",
    "suppressed by design",
    "out of service",
]
Priority = Literal["low", "medium", "high"]


@dataclass(frozen=True, slots=True)
class Transition:
    """An alarm changed its state. `id` is stable: the same in a replay and after a restart."""

    id: str  # "tank-drain-due/2026-03-02T10:00:00Z/1"
    at_us: int
    alarm: str  # "tank-drain-due"
    kind: str  # "drain-due"
    source: str  # "tank"
    before: AlarmState
    after: AlarmState
    priority: Priority
    text: str  # what is so, since when, how sure, what to do
    by: str = ""  # who acknowledged


@dataclass(frozen=True, slots=True)
class Alarm:
    """An alarm as it stands now."""

    id: str
    kind: str
    source: str
    state: AlarmState
    priority: Priority
    since_us: int  # when it took this state
    text: str


@dataclass(frozen=True, slots=True)
class AlarmDefinition:
    """An alarm that a site can raise."""

    id: str
    kind: str
    source: str
    priority: Priority
    on_delay_us: int = 0  # how long its condition must hold before it is raised
    off_delay_us: int = 0  # how long it must be over before it returns


@dataclass(frozen=True, slots=True)
class AlarmRecord:
    """What is carried from tick to tick of one alarm."""

    state: AlarmState = "normal"
    since_us: int = 0
    holding_since_us: int = -1  # since when the opposite condition has held, -1: it does not
    text: str = ""

    @property
    def raised(self) -> bool:
        return self.state in ("unacknowledged", "acknowledged")


# What a condition says: it is so, it is not so, or it lies in the deadband and changes nothing; or
# that nobody needs to know, since what it watches is switched off, or taken out of use.
Condition = Literal["so", "not so", "between", "by design", "out of service"]
_QUIET: dict[Condition, AlarmState] = {
    "by design": "suppressed by design",
    "out of service": "out of service",
}


def watch(
    definition: AlarmDefinition, record: AlarmRecord, now_us: int, condition: Condition, text: str
) -> tuple[AlarmRecord, Transition | None]:
    """Advance one alarm to `now_us`. `text` says what is so and what to do.

    A condition must hold without a break for the delay; in the deadband it does not hold. An
    alarm that is suppressed or out of service changes at once, and begins anew after that.
    """
    quiet = _QUIET.get(condition)
    if quiet is not None:
        if record.state == quiet:
            return record, None
        return _change(definition, record, now_us, quiet, text, "")
    if record.state in _QUIET.values():
        return _change(definition, record, now_us, "normal", "It is watched again.", "")
    wanted = "not so" if record.raised else "so"
    if condition != wanted:
        keeps = text if record.raised and condition == "so" else record.text
        return replace(record, holding_since_us=-1, text=keeps), None
    since_us = record.holding_since_us if record.holding_since_us >= 0 else now_us
    delay_us = definition.off_delay_us if record.raised else definition.on_delay_us
    if now_us - since_us < delay_us:
        return replace(record, holding_since_us=since_us), None
    after: AlarmState
    if not record.raised:
        after = "unacknowledged"
    else:
        after = "normal" if record.state == "acknowledged" else "returned unacknowledged"
    return _change(definition, record, now_us, after, text, "")


def acknowledge(
    definition: AlarmDefinition, record: AlarmRecord, now_us: int, by: str
) -> tuple[AlarmRecord, Transition | None]:
    """Somebody has seen it; where there is nothing to be seen, nothing changes."""
    after: AlarmState
    if record.state == "unacknowledged":
        after = "acknowledged"
    elif record.state == "returned unacknowledged":
        after = "normal"
    else:
        return record, None
    return _change(definition, record, now_us, after, record.text, by)


def _change(
    definition: AlarmDefinition,
    record: AlarmRecord,
    now_us: int,
    after: AlarmState,
    text: str,
    by: str,
) -> tuple[AlarmRecord, Transition]:
    transition = Transition(
        id=f"{definition.id}/{format_rfc3339(now_us)}/{after.replace(' ', '-')}",
        at_us=now_us,
        alarm=definition.id,
        kind=definition.kind,
        source=definition.source,
        before=record.state,
        after=after,
        priority=definition.priority,
        text=text,
        by=by,
    )
    return AlarmRecord(after, now_us, -1, text), transition


def correction(
    definition: AlarmDefinition, was: AlarmRecord, record: AlarmRecord, now_us: int
) -> Transition:
    """What follows an announcement that turned out wrong when a late entry came in."""
    return Transition(
        id=f"{definition.id}/{format_rfc3339(now_us)}/corrected",
        at_us=now_us,
        alarm=definition.id,
        kind=definition.kind,
        source=definition.source,
        before=was.state,
        after=record.state,
        priority=definition.priority,
        text=f"Corrected after a late entry. {record.text}".strip(),
    )


def shown(definition: AlarmDefinition, record: AlarmRecord) -> Alarm:
    """An alarm as it stands."""
    return Alarm(
        id=definition.id,
        kind=definition.kind,
        source=definition.source,
        state=record.state,
        priority=definition.priority,
        since_us=record.since_us,
        text=record.text,
    )
