"""Reminders to go on a round: at turns of the day when hands are free, and never while the gun
draws, unless a trap is flooded. After a long closure, the list for opening up. Pure.

A turn is the start of a shift, the start of a break, and a little before the shift ends. A reminder
whose turn has come waits until no air is used; when the turn is over (the next one comes, or the
working day ends) it is dropped, as the alarms stand all the same.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace

from daemon.clock import DAY_US, HOUR_US, MINUTE_US, format_rfc3339
from daemon.site import hours as opening
from daemon.site.types import ReminderTime, Site

AHEAD_US = 10 * MINUTE_US  # of the shift's end: there must be pressure and hands
WATCHED_US = MINUTE_US  # over so long, use of air is looked at
LONG_CLOSED_US = 36 * HOUR_US
MOST_RECENT = 10
NEVER = -1
# Common practice, no source.
OPENING_UP = (
    "drain everything, bowls and legs first, the tank last",
    "run the dryer for 15 minutes before anybody sprays",
    "blow the hose for a minute into a rag",
    "make a blotter test at the gun",
    "measure the surface's temperature",
)


@dataclass(frozen=True, slots=True)
class Turn:
    """A turn of the day, and until when a reminder may still come."""

    turn: ReminderTime
    at_us: int
    until_us: int
    next_us: int  # the turn after this one; what falls due before belongs on this round
    closed_us: int = 0  # how long the shop had been closed, at a shift's start


@dataclass(frozen=True, slots=True)
class Reminder:
    """One reminder. Its id is stable: the same in a replay and after a restart."""

    id: str  # "reminder/shift-end/2026-03-02T17:20:00Z"
    at_us: int
    kind: str  # "round", "opening-up"
    turn: str  # "shift start", "break", "shift end"
    traps: tuple[str, ...]  # in walking order
    text: str


@dataclass(frozen=True, slots=True)
class Reminders:
    """What is carried from tick to tick."""

    turn: Turn | None = None  # the one that is waited for
    watched_us: int = NEVER  # since when the use of air is watched
    watched_kg: float = 0.0  # what had been used by then
    recent: tuple[Reminder, ...] = ()


@dataclass(frozen=True, slots=True)
class Scene:
    """What a reminder is judged by at one time."""

    now_us: int
    used_kg: float  # by now, of all time; NaN where nobody can know
    flooded: bool


def next_turn(site: Site, after_us: int) -> Turn | None:
    """The first turn of the day after a time; None for a shop without hours, or closed for good."""
    wanted = set(site.reminders)
    if site.hours.always_open or not wanted:
        return None
    turns = sorted(_turns(site, after_us), key=lambda each: each.at_us)
    ahead = [
        turn
        for turn in turns
        if turn.at_us > after_us and (turn.turn in wanted or turn.closed_us >= LONG_CLOSED_US)
    ]
    if not ahead:
        return None
    found = ahead[0]
    later_us = ahead[1].at_us if len(ahead) > 1 else found.at_us + DAY_US
    return replace(found, until_us=min(found.until_us, later_us), next_us=later_us)


def _turns(site: Site, after_us: int) -> Iterator[Turn]:
    """The turns of the day that holds a time, and of the two working days after it."""
    hours, zone = site.hours, site.timezone
    starts_us = opening.working_day_start(hours, zone, after_us)
    if starts_us is None:
        starts_us = opening.next_shift_start(hours, zone, after_us)
    for _ in range(3):
        if starts_us is None:
            return
        yield from _turns_of_day(site, starts_us)
        starts_us = opening.next_shift_start(hours, zone, starts_us)


def _turns_of_day(site: Site, starts_us: int) -> Iterator[Turn]:
    hours, zone = site.hours, site.timezone
    ends_us = opening.next_shift_end(hours, zone, starts_us)
    if ends_us is None:
        return
    closed_from_us = opening.last_shift_end(hours, zone, starts_us)
    closed_us = 0 if closed_from_us is None else starts_us - closed_from_us
    yield Turn("shift start", starts_us, ends_us, ends_us, closed_us)
    day = opening.local_day(zone, starts_us)
    for from_us, _ in opening.breaks(hours, zone, day):
        yield Turn("break", from_us, ends_us, ends_us)
    yield Turn("shift end", max(ends_us - AHEAD_US, starts_us + 1), ends_us, ends_us)


# What belongs on a round before a time, with the round's words: the traps in walking order.
Round = Callable[[int], tuple[Sequence[str], str]]


def tick(
    site: Site, reminders: Reminders, scene: Scene, most_leaked_kg_per_s: float, round_of: Round
) -> tuple[Reminders, Reminder | None]:
    """After a tick. `most_leaked_kg_per_s` is what may go without anybody using air."""
    turn = reminders.turn
    if turn is None or scene.now_us < turn.at_us - WATCHED_US:
        return reminders, None
    if scene.now_us >= turn.until_us:
        return _missed(site, reminders, scene.now_us), None
    drawing = True
    if reminders.watched_us == NEVER:
        reminders = replace(reminders, watched_us=scene.now_us, watched_kg=scene.used_kg)
    elif scene.now_us - reminders.watched_us >= WATCHED_US:
        seconds = (scene.now_us - reminders.watched_us) / 1e6
        rate = (scene.used_kg - reminders.watched_kg) / seconds
        drawing = rate > most_leaked_kg_per_s  # not for NaN: who cannot know does not wait
        reminders = replace(reminders, watched_us=scene.now_us, watched_kg=scene.used_kg)
    if scene.now_us < turn.at_us or (drawing and not scene.flooded):
        return reminders, None
    reminder = _made(turn, scene, round_of)
    after = _onward(site, reminders, scene.now_us)
    if reminder is None:
        return after, None
    return replace(after, recent=(*after.recent, reminder)[-MOST_RECENT:]), reminder


def is_watching(reminders: Reminders, now_us: int) -> bool:
    """Whether the use of air is still being watched, so that nothing can be said before."""
    turn = reminders.turn
    within = reminders.watched_us != NEVER and now_us - reminders.watched_us < WATCHED_US
    return within and turn is not None and now_us < turn.until_us


def _onward(site: Site, reminders: Reminders, now_us: int) -> Reminders:
    assert reminders.turn is not None
    after_us = max(now_us, reminders.turn.at_us)
    return replace(reminders, turn=next_turn(site, after_us), watched_us=NEVER, watched_kg=0.0)


def _missed(site: Site, reminders: Reminders, now_us: int) -> Reminders:
    """Onward from a turn that went by: the next one may begin just as this one ends."""
    turn = reminders.turn
    while turn is not None and turn.until_us <= now_us:
        turn = next_turn(site, max(turn.until_us - 1, now_us - DAY_US))
    return replace(reminders, turn=turn, watched_us=NEVER, watched_kg=0.0)


def _made(turn: Turn, scene: Scene, round_of: Round) -> Reminder | None:
    traps, words = round_of(turn.next_us)
    at = format_rfc3339(turn.at_us)
    if turn.closed_us >= LONG_CLOSED_US:
        text = "After the closure, before work: " + "; ".join(OPENING_UP) + "."
        return Reminder(
            f"opening-up/{at}", scene.now_us, "opening-up", turn.turn, tuple(traps), text
        )
    if not traps:
        return None
    name = turn.turn.replace(" ", "-")
    return Reminder(f"reminder/{name}/{at}", scene.now_us, "round", turn.turn, tuple(traps), words)


def begun(site: Site, now_us: int) -> Reminders:
    """At the beginning of a record."""
    return Reminders(next_turn(site, now_us - 1))


def hour(site: Site, reminders: Reminders, now_us: int) -> Reminders:
    """At a full hour: hours may have been changed in the site file since."""
    if reminders.turn is not None and reminders.turn.at_us - WATCHED_US <= now_us:
        return reminders  # it is being waited for
    turn = next_turn(site, now_us)
    return reminders if turn == reminders.turn else replace(reminders, turn=turn)
