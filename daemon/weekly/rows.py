"""What a weekly log is computed from: the store's rows of one week."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

from daemon.alarms import Transition
from daemon.clock import DAY_US, HOUR_US
from daemon.foresight import Score
from daemon.hour_figures import DayMembers, DrainCheck, HourFigures
from daemon.journal import Entry
from daemon.site.types import Site
from daemon.weekly.confirmed import confirmed, waiting
from daemon.weekly.weeks import Week, first_hour_us

STANDING_US = 60 * DAY_US  # how far back an alarm is looked for that stood as the week began


class LogRows(Protocol):
    """The part of the store that the log reads."""

    def hour_figures(self, from_us: int, to_us: int) -> Sequence[HourFigures]: ...

    def day_members(self, first: str, last: str) -> Sequence[DayMembers]: ...

    def drain_checks(self, from_us: int, to_us: int) -> Sequence[DrainCheck]: ...

    def forecast_scores(self, from_us: int, to_us: int) -> Sequence[Score]: ...

    def transitions(
        self, from_us: int, to_us: int, alarms: Sequence[str] | None = None
    ) -> Sequence[Transition]: ...

    def entries(
        self, after_seq: int = 0, from_us: int | None = None, to_us: int | None = None
    ) -> Sequence[Entry]: ...

    def get_meta(self, name: str) -> str | None: ...


@dataclass(frozen=True, slots=True)
class WeekRows:
    """Everything that was noted of one week."""

    week: Week
    from_us: int
    to_us: int
    now_us: int
    begun_us: int | None  # when the record began
    hours: Sequence[HourFigures]
    days: Sequence[DayMembers]
    checks: Sequence[DrainCheck]
    scores: Sequence[Score]
    due_before: Sequence[Transition]  # of drains that are due, before the week
    transitions: Sequence[Transition]
    entries: Sequence[Entry]
    confirmed: frozenset[int]  # drains that were learned from later: their numbers in the journal

    @property
    def hours_from_us(self) -> int:
        """The first full hour that belongs to the week."""
        return first_hour_us(self.from_us)

    @property
    def until_us(self) -> int:
        """The end of the week, or of what has passed of it in full hours."""
        return min(first_hour_us(self.to_us), self.now_us // HOUR_US * HOUR_US)


def due_alarm(trap: str) -> str:
    """The alarm that a trap's drain is due."""
    return f"{trap}-drain-due"


def read_rows(store: LogRows, week: Week, site: Site, now_us: int) -> WeekRows:
    """The rows of a week, as of now."""
    from_us, to_us = week.bounds_us(site.timezone)
    days = week.days()
    begun = store.get_meta("grid_us")
    checks = store.drain_checks(from_us, to_us)
    # what was confirmed may have been so weeks later; it is seldom that any drain waits for it
    wait_us = min((check.at_us for check in waiting(checks)), default=None)
    later = () if wait_us is None else store.entries(from_us=wait_us)
    return WeekRows(
        week=week,
        from_us=from_us,
        to_us=to_us,
        now_us=now_us,
        begun_us=None if begun is None else int(begun),
        hours=store.hour_figures(first_hour_us(from_us), first_hour_us(to_us)),
        days=store.day_members(days[0].isoformat(), days[-1].isoformat()),
        checks=checks,
        scores=store.forecast_scores(from_us, to_us),
        due_before=store.transitions(
            from_us - STANDING_US, from_us, [due_alarm(trap) for trap in site.traps]
        ),
        transitions=store.transitions(from_us, to_us),
        entries=store.entries(from_us=from_us, to_us=to_us),
        confirmed=confirmed(checks, later),
    )
