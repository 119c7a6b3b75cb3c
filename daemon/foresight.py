"""What a site has learned in order to look ahead, and how well its forecasts did: plain records."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from daemon.clock import DAY_US
from daemon.moisture.ensemble import Array
from daemon.moisture.forecast import Due
from daemon.moisture.outlook import Pattern
from daemon.moisture.week import Week

AHEAD_US = DAY_US  # how old a forecast must be to be scored
MOST_KEPT, MOST_SCORES = 6, 100
NOT_WITHIN = -1  # a time beyond the forecast's horizon


@dataclass(frozen=True, slots=True)
class Kept:
    """A forecast as it was made: by trap, 5, 50 and 95 % of when its level is reached, us."""

    at_us: int
    due_us: tuple[tuple[int, int, int], ...]


@dataclass(frozen=True, slots=True)
class Score:
    """A level reached, and what had been foreseen at least a day ahead."""

    trap: str
    made_us: int
    p05_us: int
    p50_us: int
    p95_us: int
    happened_us: int

    @property
    def hit(self) -> bool:
        """Whether it happened within the 5-95 % interval."""
        early = self.p05_us == NOT_WITHIN or self.happened_us < self.p05_us
        late = self.p95_us != NOT_WITHIN and self.happened_us > self.p95_us
        return not early and not late


@dataclass(frozen=True, slots=True)
class Foresight:
    """What is carried from tick to tick. By trap: in the line's order."""

    week: Week
    pattern: Pattern
    medians_kg: Array  # (traps,), at the last look
    looked_us: int
    crossed: tuple[bool, ...]  # whether the level was reached since the last drain
    kept: tuple[Kept, ...] = ()  # the last few forecasts, oldest first
    used_kg: float = -1.0  # what had been used by the last of them; -1: make a new one
    scores: tuple[Score, ...] = ()  # the last of them
    scored: int = 0  # of all time
    hits: int = 0
    services: int = 0  # of any part, so that a forecast knows that something was renewed


def keep(foresight: Foresight, at_us: int, dues: Sequence[Due], used_kg: float) -> Foresight:
    """With a forecast to be held against what happens."""
    times = tuple(
        tuple(NOT_WITHIN if each is None else each for each in (due.p05_us, due.p50_us, due.p95_us))
        for due in dues
    )
    kept = Kept(at_us, times)  # type: ignore[arg-type]  # three each
    return replace(foresight, kept=(*foresight.kept, kept)[-MOST_KEPT:], used_kg=used_kg)


def score(
    foresight: Foresight, number: int, trap: str, since_us: int, happened_us: int
) -> Foresight:
    """A trap's level was reached: hold it against the last forecast of at least a day ago.

    Only forecasts since the trap was last drained (`since_us`) were about this level.
    """
    made = [
        kept
        for kept in foresight.kept
        if since_us <= kept.at_us and kept.at_us <= happened_us - AHEAD_US
    ]
    if not made:
        return foresight
    p05_us, p50_us, p95_us = made[-1].due_us[number]
    found = Score(trap, made[-1].at_us, p05_us, p50_us, p95_us, happened_us)
    return replace(
        foresight,
        scores=(*foresight.scores, found)[-MOST_SCORES:],
        scored=foresight.scored + 1,
        hits=foresight.hits + found.hit,
    )


def hit_rate(scores: Sequence[Score], from_us: int, to_us: int) -> tuple[int, int]:
    """How many of the levels reached in that time were foreseen, and how many were scored."""
    within = [each for each in scores if from_us <= each.happened_us < to_us]
    return sum(each.hit for each in within), len(within)
