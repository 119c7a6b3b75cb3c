"""One card a trap: how full, when due and why, what was recorded last."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from api.pages.levels import Level, level_of
from api.pages.round_plan import receivers
from api.pages.words import Words
from daemon.accept import AHEAD_US
from daemon.clock import DAY_US
from daemon.due import volume_words
from daemon.expected import AGAINST_RUST, LITTLE
from daemon.journal import Drain, Entry
from daemon.moisture.description import Trap
from daemon.site.types import Site
from daemon.undoing import WITHIN_US, may_be_undone
from daemon.views import Running, TrapView

LOOKED_BACK_US = 8 * DAY_US  # a drain may be dated so long before it was recorded


@dataclass(frozen=True, slots=True)
class LastDrain:
    """The last thing recorded of a trap, where somebody may still want to take it back."""

    seq: int
    words: str
    undo_until_us: int | None  # None: it was taken back
    by: str


@dataclass(frozen=True, slots=True)
class TrapCard:
    """A trap as the page shows it."""

    name: str
    view: TrapView
    level: Level
    due: tuple[str, ...]
    last: LastDrain | None


def cards_of(daemon: Running, views: Sequence[TrapView]) -> dict[str, TrapCard]:
    """Everything that is said of the traps, by name."""
    site, now_us = daemon.site, daemon.clock.now_us()
    recent = {view.trap: _recent(daemon, view.trap, now_us) for view in views}
    # what was undone is looked up only where something could have been
    undone = daemon.undoings() if any(recent.values()) else {}
    return {
        view.trap: TrapCard(
            name=view.trap,
            view=view,
            level=level_of(view),
            due=tuple(_due(site, view, now_us)),
            last=_last(Words(site), recent[view.trap], undone),
        )
        for view in views
    }


def _recent(daemon: Running, trap: str, now_us: int) -> Entry | None:
    """The last drain of a trap that was recorded so lately that it may be taken back."""
    entries = daemon.drains(trap, now_us - LOOKED_BACK_US, now_us + AHEAD_US + 1)
    recent = (entry for entry in entries if may_be_undone(entry, now_us))
    return max(recent, key=lambda each: each.seq, default=None)


def _last(words: Words, entry: Entry | None, undone: Mapping[int, Entry]) -> LastDrain | None:
    if entry is None:
        return None
    drain = entry.body
    assert isinstance(drain, Drain)
    said = [_outcome(words, drain)]
    if drain.look:
        said.append(drain.look)
    by = f" by {drain.by}" if drain.by else ""
    text = f"Recorded {words.time(entry.at_us)}{by}: {', '.join(said)}."
    if entry.seq in undone:
        taken_us = undone[entry.seq].at_us
        return LastDrain(entry.seq, f"{text} Taken back {words.time(taken_us)}.", None, drain.by)
    return LastDrain(entry.seq, text, entry.written_us + WITHIN_US, drain.by)


def _outcome(words: Words, drain: Drain) -> str:
    if drain.outcome == "empty":
        return "it was empty"
    rest = ", some was left" if drain.outcome == "partly" else ""
    return ("drained" if drain.volume_kg is None else words.volume(drain.volume_kg)) + rest


def _due(site: Site, view: TrapView, now_us: int) -> list[str]:
    """When and why. For a steel tank nothing may read as leave to wait."""
    words = Words(site)
    tank = view.trap in receivers(site)
    if view.due and view.because == "volume":
        mark = volume_words(site, view.drain_at_kg)
        return [f"Due now, by volume: the water has reached its mark of {mark}."]
    every = _every(_trap(site, view.trap))
    if view.due:
        return [f"Due now, by the calendar: it is drained {every}."]
    said = []
    little = view.p95_kg < LITTLE * view.drain_at_kg
    if tank and little:
        said.append(f"{AGAINST_RUST[0].upper()}{AGAINST_RUST[1:]}.")
    elif view.because != "calendar" and view.expected:
        more = "; drain daily against rust all the same" if tank else ""
        said.append(f"By volume {view.expected}{more}.")
    if view.due_at_us is not None:
        coming = words.coming(view.due_at_us, now_us)
        said.append(f"By the calendar {coming}: it is drained {every}.")
    return said or ["Not due by volume."]


def _trap(site: Site, name: str) -> Trap:
    return next(s.trap for s in site.line.stations if s.id == name and s.trap is not None)


def _every(trap: Trap) -> str:
    if trap.drain_every == "working day":
        return "every working day, at the shift's end"
    return f"every {trap.drain_every}" if trap.drain_every else "by the calendar"
