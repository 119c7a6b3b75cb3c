"""What a weekly log says: plain records, in SI and microseconds."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from daemon.hour_figures import Leak, Least
from daemon.journal import Blotted, Outcome
from daemon.views import Interval

VERDICTS = ("wait", "unknown", "care", "dry enough")  # the worst first
NOT_WATCHED = "not watched"


@dataclass(frozen=True, slots=True)
class Watched:
    """How much of the week is known at all. Seconds."""

    of_s: float  # the week, or what has passed of it since the record began
    watched_s: float
    open_s: float  # of that time, while the shop was open
    open_watched_s: float
    gaps: tuple[tuple[int, int], ...]  # from, to, us: whole hours in which something is missing
    gaps_s: tuple[float, ...]  # how much is missing in each

    @property
    def complete(self) -> bool:
        """Whether nothing worth a word is missing."""
        return not self.gaps


@dataclass(frozen=True, slots=True)
class DrainLine:
    """One drain. None: not said, or not known."""

    at_us: int
    trap: str
    outcome: Outcome
    measured_kg: float | None
    expected_kg: Interval | None  # what the cup should have shown, with its own error
    believed: bool  # False: too far off to be learned from, and confirmed by nobody
    late_s: float | None  # since when it was due; None: it was on time
    by: str
    look: str


@dataclass(frozen=True, slots=True)
class TrapWeek:
    """One trap: what it shed, what was measured, and its drains."""

    trap: str
    shed_kg: Interval | None
    measured_kg: float
    measured: int  # how many drains were
    unlearned: int  # how many of them were too far off, and confirmed by nobody
    drains: int
    on_time: int
    late: int
    longest_late_s: float
    due_since_us: int | None  # still due as the week ended


@dataclass(frozen=True, slots=True)
class BlotterLine:
    """One blotter test after ASTM D4285."""

    at_us: int
    outlet: str
    result: Blotted
    by: str


@dataclass(frozen=True, slots=True)
class OutletWeek:
    """One outlet while the shop was open. Seconds."""

    outlet: str
    work: str
    verdict_s: Mapping[str, float]  # also `not watched`
    class_s: Mapping[str, float]  # of ISO 8573-1, humidity only; also `cannot tell`
    line: Least | None
    surface: Least | None

    @property
    def unfit_s(self) -> float:
        """How long it was not fit to spray."""
        return self.verdict_s.get("wait", 0.0)


@dataclass(frozen=True, slots=True)
class AlarmWeek:
    """The alarms of one kind, and how soon somebody had seen them."""

    kind: str
    raised: int
    seen: int
    median_s: float | None  # of those that were seen
    longest_s: float | None


@dataclass(frozen=True, slots=True)
class PlantWeek:
    """The compressor and the leak. Air is kg of dry air."""

    on_s: Interval | None
    on_open_s: Interval | None  # in the watched open hours
    drawn_kg: Interval | None
    leak: Leak | None

    def duty(self, open_watched_s: float) -> Interval | None:
        """The share of the watched open hours in which it made air."""
        if self.on_open_s is None or open_watched_s <= 0.0:
            return None
        return Interval(*(min(each / open_watched_s, 1.0) for each in self.on_open_s.values))


@dataclass(frozen=True, slots=True)
class Hits:
    """How many of how many."""

    hit: int
    of: int


@dataclass(frozen=True, slots=True)
class DayWeek:
    """One local day for the charts. Medians; seconds and kg."""

    day: str
    watched_s: float
    shed_kg: Mapping[str, float]
    on_s: float
    verdict_s: Mapping[str, Mapping[str, float]]  # by outlet


@dataclass(frozen=True, slots=True)
class WeekLog:
    """One week. None: nothing is known of it."""

    week: str  # "2026-W49"
    from_us: int
    to_us: int
    over: bool  # else it is what is known so far
    until_us: int  # its end, or the last full hour that it knows of
    begun_us: int | None  # when the record began, where that was in this week
    watched: Watched
    water_in_kg: Interval | None
    traps: tuple[TrapWeek, ...]
    drains: tuple[DrainLine, ...]
    outlets: tuple[OutletWeek, ...]
    blotters: tuple[BlotterLine, ...]
    alarms: tuple[AlarmWeek, ...]
    plant: PlantWeek
    faults_s: Mapping[str, float]  # by channel
    forecasts: Hits  # levels reached, and foreseen at least a day ahead
    intervals: Hits  # measured drains that lay in their interval
    days: tuple[DayWeek, ...]
    margins: Mapping[str, tuple[Least, ...]]  # by outlet: the least of each open hour

    @property
    def empty(self) -> bool:
        """Whether nothing at all is known."""
        return self.water_in_kg is None and not self.drains and not self.alarms
