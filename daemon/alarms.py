"""Alarms: the states and words of ISA-18.2 / IEC 62682, pure; no clock, no I/O."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

from daemon.clock import DAY_US, HOUR_US, MINUTE_US, format_rfc3339

AlarmState = Literal[
    "normal",
    "unacknowledged",
    "acknowledged",
    "returned unacknowledged",
    "shelved",
    "suppressed by design",
    "out of service",
]
Priority = Literal["low", "medium", "high"]
# How long an alarm may be put off (common practice, no source): no longer than till the next day's
# work, and what floods or freezes no longer than it takes to fetch a wrench.
SHELVED_LEAST_US, SHELVED_US, SHELVED_URGENT_US = MINUTE_US, DAY_US, HOUR_US


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
    shelved_until_us: int | None = None  # None: it is not shelved


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
    until_us: int = -1  # while it is shelved: for how long
    beneath: AlarmState = "normal"  # while it is shelved: the state that it would be in

    @property
    def standing(self) -> AlarmState:
        """The state, or what it would be if nobody had put the alarm off."""
        return self.beneath if self.state == "shelved" else self.state

    @property
    def raised(self) -> bool:
        """Whether what it watches is so, shelved or not."""
        return self.standing in ("unacknowledged", "acknowledged")


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
    alarm that is suppressed or out of service changes at once, and begins anew after that. One that
    is shelved goes on beneath, silently.
    """
    if record.state == "shelved":
        return _watch_shelved(definition, record, now_us, condition, text)
    quiet = _QUIET.get(condition)
    if quiet is not None and record.state != quiet:
        return change(definition, record, now_us, quiet, text, "")
    if quiet is not None:
        return record, None
    if record.state in _QUIET.values():
        return change(definition, record, now_us, "normal", "It is watched again.", "")
    return _watch_open(definition, record, now_us, condition, text)


def _watch_open(
    definition: AlarmDefinition, record: AlarmRecord, now_us: int, condition: Condition, text: str
) -> tuple[AlarmRecord, Transition | None]:
    """As `watch`, of an alarm that nothing keeps quiet."""
    wanted = "not so" if record.raised else "so"
    if condition != wanted:
        keeps = text if record.raised and condition == "so" else record.text
        if record.holding_since_us == -1 and keeps == record.text:
            return record, None  # nearly always, and quicker than a copy
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
    return change(definition, record, now_us, after, text, "")


def _watch_shelved(
    definition: AlarmDefinition, record: AlarmRecord, now_us: int, condition: Condition, text: str
) -> tuple[AlarmRecord, Transition | None]:
    """What it watches goes on being watched; when the time is over that is told."""
    seen, _ = watch(definition, replace(record, state=record.beneath), now_us, condition, text)
    record = replace(
        record, beneath=seen.state, holding_since_us=seen.holding_since_us, text=seen.text
    )
    return (record, None) if now_us < record.until_us else unshelve(definition, record, now_us, "")


def shelve(
    definition: AlarmDefinition, record: AlarmRecord, now_us: int, until_us: int, by: str, text: str
) -> tuple[AlarmRecord, Transition | None]:
    """Somebody puts the alarm off, or for longer; one that is suppressed or out of service stays
    so. `text` says until when."""
    if record.state in _QUIET.values():
        return record, None
    said = f"{text} {record.text}".strip()
    _, transition = change(definition, record, now_us, "shelved", said, by)
    shelved = AlarmRecord(
        "shelved", now_us, record.holding_since_us, record.text, until_us, record.standing
    )
    return shelved, transition


def unshelve(
    definition: AlarmDefinition, record: AlarmRecord, now_us: int, by: str
) -> tuple[AlarmRecord, Transition | None]:
    """The time is over, or somebody ends it: what is so is told anew, also if it had been
    acknowledged; what came and went meanwhile is over."""
    if record.state != "shelved":
        return record, None
    quiet = record.beneath in _QUIET.values()
    after: AlarmState = record.beneath if quiet else "normal"
    after = "unacknowledged" if record.raised else after
    text = record.text if record.raised else "No longer put off."
    return change(definition, record, now_us, after, text, by)


def longest_shelved_us(definition: AlarmDefinition) -> int:
    """For how long an alarm may be put off at most."""
    return SHELVED_URGENT_US if definition.priority == "high" else SHELVED_US


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
    return change(definition, record, now_us, after, record.text, by)


def change(
    definition: AlarmDefinition,
    record: AlarmRecord,
    now_us: int,
    after: AlarmState,
    text: str,
    by: str,
) -> tuple[AlarmRecord, Transition]:
    """Take another state, and tell of it."""
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
        shelved_until_us=record.until_us if record.state == "shelved" else None,
    )
