"""Alarms as a page shows them. "Seen" is a page's word for acknowledged, "put off" for shelved."""

from __future__ import annotations

from dataclasses import dataclass

from daemon.alarms import Alarm, Priority
from daemon.views import Running

_WORDS = {
    "unacknowledged": "not seen by anybody yet",
    "acknowledged": "seen",
    "returned unacknowledged": "over, but not seen by anybody yet",
    "shelved": "put off",
}
_URGENT_FIRST: tuple[Priority, ...] = ("high", "medium", "low")
WAITING = ("unacknowledged", "returned unacknowledged")
STANDING = ("unacknowledged", "acknowledged")
# what is offered; an alarm of high priority may be put off for an hour at most
LENGTHS = ("30 min", "1 h", "4 h", "1 day")
LENGTHS_URGENT = ("10 min", "30 min", "1 h")


@dataclass(frozen=True, slots=True)
class AlarmCard:
    """One alarm, and what a person can do about it."""

    id: str
    text: str
    priority: str
    since_us: int
    words: str
    waits: bool  # for somebody to see it
    lengths: tuple[str, ...]  # that it can be put off for; none: it cannot
    put_off_until_us: int | None


def alarm_cards(daemon: Running) -> list[AlarmCard]:
    """The alarms that are not normal: those that wait for somebody first, the urgent before."""
    shown = [alarm for alarm in daemon.alarms() if alarm.state != "normal"]
    shown.sort(key=lambda alarm: (alarm.state not in WAITING, _URGENT_FIRST.index(alarm.priority)))
    return [_card(alarm) for alarm in shown]


def _card(alarm: Alarm) -> AlarmCard:
    lengths = LENGTHS_URGENT if alarm.priority == "high" else LENGTHS
    return AlarmCard(
        alarm.id,
        # put off before it was ever raised, it has nothing to say yet
        alarm.text or f"{alarm.source}: {alarm.kind.replace('-', ' ')}",
        alarm.priority,
        alarm.since_us,
        _WORDS.get(alarm.state, alarm.state),
        alarm.state in WAITING,
        lengths if alarm.state in STANDING else (),
        alarm.shelved_until_us if alarm.state == "shelved" else None,
    )
