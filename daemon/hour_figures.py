"""What the weekly log needs of every hour, as it is gathered and as it is kept: plain records.

Masses are kg, times microseconds or seconds as their names say. Figures of members are kept by
name: `water in`, `drawn`, `used` (kg; the last two are dry air), `on`, `on open` (s, the
compressor; the second while the shop is open) and `shed TRAP` (kg).
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, field
from typing import Any

from daemon.foresight import Score
from daemon.journal import Entry
from daemon.moisture.ensemble import Array
from daemon.moisture.learning import Learned
from daemon.views import Interval

WATER_IN, DRAWN, USED, ON, ON_OPEN = "water in", "drawn", "used", "on", "on open"
CANNOT_TELL = "cannot tell"  # the class of air that supports none


def shed_of(trap: str) -> str:
    """The name of what a trap was given."""
    return f"shed {trap}"


# ---- gathered, from tick to tick ----


@dataclass(frozen=True, slots=True)
class Least:
    """A margin where it was least: its 5, 50 and 95 %, K, when, and at which place."""

    at_us: int
    p05_k: float
    p50_k: float
    p95_k: float
    place: str = ""


@dataclass(frozen=True, slots=True)
class OutletTally:
    """One outlet while the shop was open: microseconds by verdict and by humidity class."""

    verdict_us: Mapping[str, int] = field(default_factory=dict)
    class_us: Mapping[str, int] = field(default_factory=dict)
    line: Least | None = None
    surface: Least | None = None


@dataclass(frozen=True, slots=True)
class HourTally:
    """An unfinished hour. Arrays are (members,) unless said otherwise."""

    from_us: int
    water_in_kg: Array  # the ledger's, as the hour began
    shed_kg: Array  # (stations, members): the same
    on_open_s: Array
    settled: Mapping[str, Array] = field(default_factory=dict)  # what is already booked, by name
    is_open: bool = False  # at the last tick, and so until the next one
    watched_us: int = 0
    open_us: int = 0  # watched, and open
    counted_us: int = 0  # of that, what the outlets were looked at for
    looked_us: int = -1
    faults_us: Mapping[str, int] = field(default_factory=dict)  # by channel
    outlets: Mapping[str, OutletTally] = field(default_factory=dict)
    day: str = ""  # the local day that the sums are of
    day_sums: Mapping[str, Array] = field(default_factory=dict)


# ---- kept ----


@dataclass(frozen=True, slots=True)
class Leak:
    """The leak as it was known at the end of an hour, and what it costs in a week."""

    at_us: int  # when it was measured
    m3_per_s: tuple[float, float, float]
    kwh_per_week: tuple[float, float, float]
    cost_per_week: tuple[float, float, float] | None  # None: nobody said the price


@dataclass(frozen=True, slots=True)
class OutletHour:
    """One outlet in the open part of an hour: seconds by verdict and by class, least margins."""

    verdict_s: Mapping[str, float]
    class_s: Mapping[str, float]
    line: Least | None
    surface: Least | None


@dataclass(frozen=True, slots=True)
class HourFigures:
    """One hour that ended at a full hour, UTC."""

    hour_us: int  # its full hour
    from_us: int  # later than that only where the record began in it
    watched_s: float  # in which the daemon ticked
    open_s: float  # of that, while the shop was open
    totals: Mapping[str, tuple[float, float, float]]  # 5, 50, 95 % by name
    outlets: Mapping[str, OutletHour]
    faults_s: Mapping[str, float]  # by channel: in which it was faulty or silent
    leak: Leak | None

    def to_json(self) -> str:
        """One JSON object; numbers with seven figures."""
        fields = asdict(self)
        del fields["hour_us"]
        return json.dumps(_rounded(fields), separators=(",", ":"))

    @classmethod
    def from_json(cls, hour_us: int, text: str) -> HourFigures:
        """The hour that `to_json` wrote."""
        told: dict[str, Any] = json.loads(text)
        told["outlets"] = {name: _outlet(each) for name, each in told["outlets"].items()}
        told["totals"] = {name: tuple(each) for name, each in told["totals"].items()}
        told["leak"] = None if told["leak"] is None else _leak(told["leak"])
        return cls(hour_us, **told)


@dataclass(frozen=True, slots=True)
class DayMembers:
    """What every member makes of a local day so far, by name: sums keep what they share."""

    day: str  # "2026-12-01"
    sums: Mapping[str, Array]


@dataclass(frozen=True, slots=True)
class DrainCheck:
    """A measured drain beside what the cup should have shown, with the cup's own error."""

    seq: int  # of the journal's entry
    at_us: int
    trap: str
    measured_kg: float
    expected_kg: Interval
    learned: bool  # False: too far off to be believed at once

    @classmethod
    def of(cls, entry: Entry, learned: Learned) -> DrainCheck:
        """What came of an entry's measurement."""
        expected = Interval(*learned.cup_kg)
        measured = learned.measured_kg
        return cls(entry.seq, entry.at_us, learned.trap, measured, expected, not learned.flagged)

    @property
    def held(self) -> bool:
        """Whether the measurement lies in the interval."""
        return self.expected_kg.p05 <= self.measured_kg <= self.expected_kg.p95


@dataclass(frozen=True, slots=True)
class Forecast:
    """When a trap's level was expected to be reached, us; -1: beyond the forecast's horizon."""

    made_us: int
    trap: str
    p05_us: int
    p50_us: int
    p95_us: int


@dataclass(frozen=True, slots=True)
class Noted:
    """What one or more ticks leave for the log."""

    hours: tuple[HourFigures, ...] = ()
    days: tuple[DayMembers, ...] = ()
    drains: tuple[DrainCheck, ...] = ()
    forecasts: tuple[Forecast, ...] = ()
    scores: tuple[Score, ...] = ()

    def __bool__(self) -> bool:
        return bool(self.hours or self.days or self.drains or self.forecasts or self.scores)


NOTHING = Noted()


def joined(noted: Sequence[Noted]) -> Noted:
    """All of these in order; of a day the last counts."""
    days = {day.day: day for each in noted for day in each.days}
    return Noted(
        tuple(hour for each in noted for hour in each.hours),
        tuple(days.values()),
        tuple(drain for each in noted for drain in each.drains),
        tuple(forecast for each in noted for forecast in each.forecasts),
        tuple(score for each in noted for score in each.scores),
    )


def _rounded(value: Any) -> Any:
    if isinstance(value, float):
        return float(f"{value:.7g}")
    if isinstance(value, Mapping):
        return {name: _rounded(each) for name, each in value.items()}
    if isinstance(value, list | tuple):
        return [_rounded(each) for each in value]
    return value


def _outlet(told: dict[str, Any]) -> OutletHour:
    line, surface = (None if told[n] is None else Least(**told[n]) for n in ("line", "surface"))
    return OutletHour(told["verdict_s"], told["class_s"], line, surface)


def _leak(told: dict[str, Any]) -> Leak:
    cost = told["cost_per_week"]
    return Leak(
        told["at_us"],
        tuple(told["m3_per_s"]),
        tuple(told["kwh_per_week"]),
        None if cost is None else tuple(cost),
    )
