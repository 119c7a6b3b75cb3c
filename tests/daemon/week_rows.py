"""The rows of an invented week, held in memory, for tests of the log and of what shows it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from daemon.alarms import AlarmState, Transition
from daemon.clock import HOUR_US
from daemon.foresight import Score
from daemon.hour_figures import (
    DayMembers,
    DrainCheck,
    HourFigures,
    Leak,
    Least,
    OutletHour,
)
from daemon.journal import Entry
from daemon.site import hours as opening
from daemon.site.types import Site

MEMBERS = 16


@dataclass
class HeldRows:
    """The part of the store that the log reads."""

    hours: list[HourFigures] = field(default_factory=list)
    days: list[DayMembers] = field(default_factory=list)
    checks: list[DrainCheck] = field(default_factory=list)
    scores: list[Score] = field(default_factory=list)
    changes: list[Transition] = field(default_factory=list)
    journal: list[Entry] = field(default_factory=list)
    begun_us: int | None = None

    def hour_figures(self, from_us: int, to_us: int) -> Sequence[HourFigures]:
        return [each for each in self.hours if from_us <= each.hour_us < to_us]

    def day_members(self, first: str, last: str) -> Sequence[DayMembers]:
        return [each for each in self.days if first <= each.day <= last]

    def drain_checks(self, from_us: int, to_us: int) -> Sequence[DrainCheck]:
        return [each for each in self.checks if from_us <= each.at_us < to_us]

    def forecast_scores(self, from_us: int, to_us: int) -> Sequence[Score]:
        return [each for each in self.scores if from_us <= each.happened_us < to_us]

    def transitions(
        self, from_us: int, to_us: int, alarms: Sequence[str] | None = None
    ) -> Sequence[Transition]:
        found = [each for each in self.changes if from_us <= each.at_us < to_us]
        return [each for each in found if alarms is None or each.alarm in alarms]

    def entries(
        self, after_seq: int = 0, from_us: int | None = None, to_us: int | None = None
    ) -> Sequence[Entry]:
        begins = 0 if from_us is None else from_us
        return [
            each
            for each in self.journal
            if each.seq > after_seq
            and begins <= each.at_us
            and (to_us is None or each.at_us < to_us)
        ]

    def get_meta(self, name: str) -> str | None:
        return None if self.begun_us is None else str(self.begun_us)


def transition(
    at_us: int, alarm: str, kind: str, before: AlarmState, after: AlarmState, number: int = 1
) -> Transition:
    """A change of an alarm."""
    return Transition(
        f"{alarm}/{at_us}/{number}", at_us, alarm, kind, alarm, before, after, "medium", ""
    )


def an_hour(
    site: Site, hour_us: int, watched_s: float = 3600.0, margin_k: float = 6.0
) -> HourFigures:
    """An hour in which every trap sheds 10 g; at its outlets 6 in 10 of the open time is `wait`."""
    open_s = opening.open_us(site.hours, site.timezone, hour_us, hour_us + HOUR_US) / 1e6
    open_s = min(open_s, watched_s)
    outlets = {}
    if open_s > 0.0:
        least = Least(hour_us + HOUR_US, margin_k, margin_k + 2.0, margin_k + 4.0, "the hose")
        outlets = {
            place.id: OutletHour(
                {"wait": 0.6 * open_s, "dry enough": 0.4 * open_s}, {"7": open_s}, least, None
            )
            for place in site.outlets
        }
    totals = {f"shed {trap}": (0.008, 0.010, 0.012) for trap in site.traps}
    leak = Leak(hour_us, (1e-4, 2e-4, 3e-4), (10.0, 20.0, 30.0), (3.0, 6.0, 9.0))
    return HourFigures(hour_us, hour_us, watched_s, open_s, totals, outlets, {}, leak)


def a_day(site: Site, day: str, hours: float) -> DayMembers:
    """Members that differ by up to a fifth, all day long."""
    spread = np.linspace(0.8, 1.2, MEMBERS)
    sums: Mapping[str, np.ndarray] = {
        "water in": 0.050 * hours * spread,
        "drawn": 2.0 * hours * spread,
        "used": 2.0 * hours * spread,
        "on": np.full(MEMBERS, 1200.0 * hours),
        "on open": np.full(MEMBERS, 800.0 * hours),
        **{f"shed {trap}": 0.010 * hours * spread for trap in site.traps},
    }
    return DayMembers(day, sums)


def rows_of(site: Site, from_us: int, to_us: int) -> HeldRows:
    """Every hour between two full hours, and their days."""
    rows = HeldRows(begun_us=from_us)
    by_day: dict[str, int] = {}
    for hour_us in range(from_us, to_us, HOUR_US):
        rows.hours.append(an_hour(site, hour_us))
        day = opening.local_day(site.timezone, hour_us).isoformat()
        by_day[day] = by_day.get(day, 0) + 1
    rows.days = [a_day(site, day, float(count)) for day, count in by_day.items()]
    return rows
