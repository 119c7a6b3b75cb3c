"""Alarms as a page shows them. "Seen" is a page's word for acknowledged, "put off" for shelved."""

from __future__ import annotations

from dataclasses import dataclass

from daemon.alarms import Alarm
from daemon.views import Running

_WORDS = {
    "unacknowledged": "not seen by anybody yet",
    "acknowledged": "seen",
    "returned unacknowledged": "over, but not seen by anybody yet",
    "shelved": "put off",
}
WAITING = ("unacknowledged", "returned unacknowledged")


@dataclass(frozen=True, slots=True)
class AlarmCard:
    """One alarm, and whether it waits for somebody to see it."""

    id: str
    text: str
    priority: str
    since_us: int
    words: str
    waits: bool


def alarm_cards(daemon: Running) -> list[AlarmCard]:
    """The alarms that are not normal."""
    return [_card(alarm) for alarm in daemon.alarms() if alarm.state != "normal"]


def _card(alarm: Alarm) -> AlarmCard:
    words = _WORDS.get(alarm.state, alarm.state)
    waits = alarm.state in WAITING
    return AlarmCard(alarm.id, alarm.text, alarm.priority, alarm.since_us, words, waits)
