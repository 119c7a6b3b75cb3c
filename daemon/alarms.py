"""Alarms: the states and words of ISA-18.2 / IEC 62682, pure; no clock, no I/O."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

AlarmState = Literal["normal", "unacknowledged", "acknowledged", "returned unacknowledged"]
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
