"""What the daemon shows to the outside: immutable views, and the one interface the API is built on.

Views are in SI and microseconds; the API and MQTT turn them into people's units and RFC 3339.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, Protocol

import numpy as np
import numpy.typing as npt

from daemon.alarms import Alarm
from daemon.clock import Clock
from daemon.foresight import Score
from daemon.journal import Blotted, Body, Entry
from daemon.keys import KeyRing
from daemon.moisture.forecast import Due
from daemon.reminders import Reminder
from daemon.site.types import Site

if TYPE_CHECKING:  # they are made of these views
    from daemon.weekly.records import WeekLog
    from daemon.weekly.weeks import Week

Because = Literal["volume", "calendar"]
Verdict = Literal["wait", "care", "dry enough", "unknown"]
# where a station's value comes from: "rule" also while a silent sensor's rule stands in for it
Origin = Literal["sensor", "site file", "rule", "default"]


@dataclass(frozen=True, slots=True)
class TrapView:
    """What a trap holds, and whether its drain is due."""

    trap: str
    at_us: int
    p05_kg: float
    p50_kg: float
    p95_kg: float
    capacity_kg: float
    drain_at_kg: float
    probability_due: float
    due: bool
    because: Because | None  # why it is due, or why it will be next; None: neither is known
    due_at_us: int | None  # the calendar's next time, None without one
    since: Literal["start", "last drain"]
    last_drain_us: int | None
    # when it is expected to be due, by volume or date; None: not within the forecast's horizon
    due_p05_us: int | None = None
    due_p50_us: int | None = None
    due_p95_us: int | None = None
    expected: str = ""  # the same in words
    # of a drain that empties itself: it is taken to work, and this is the chance that it is stuck
    chance_stuck: float | None = None
    # a measured volume that was not believed and waits for somebody to say that it is right
    questioned_kg: float | None = None
    # its contents are counted from then only: the state before could not be read, and it has not
    # been drained since
    counted_from_us: int | None = None


@dataclass(frozen=True, slots=True)
class Interval:
    """A median with its 5 to 95 % interval."""

    p05: float
    p50: float
    p95: float

    @property
    def values(self) -> tuple[float, float, float]:
        return self.p05, self.p50, self.p95


@dataclass(frozen=True, slots=True)
class Judgement:
    """A verdict, why, and what would change it, in plain words and the site's units."""

    verdict: Verdict
    reasons: tuple[str, ...]
    would_change: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class LineAirView:
    """The air in the line at an outlet. None: not known."""

    judgement: Judgement
    pressure_pa: float | None  # absolute, median, before the nozzle
    atmosphere_pa: float | None
    pressure_dew_point_k: Interval | None  # the frost point at and below 0 degC
    atmospheric_dew_point_k: Interval | None
    line_margin_k: Interval | None
    wanted_k: float  # dry enough from here
    coldest: str  # the place where the margin is least, "" while it is not known
    after_expansion_k: Interval | None  # let down to the atmosphere and come to rest
    carried_kg_per_m3: Interval | None  # liquid, per reference m3 of dry air
    humidity_class: str | None  # of ISO 8573-1, that the interval supports


@dataclass(frozen=True, slots=True)
class SurfaceView:
    """The surface, and the air around it. None: not known."""

    judgement: Judgement
    air_k: Interval | None
    relative_humidity: Interval | None  # 0-1
    dew_point_k: Interval | None
    surface_k: Interval | None
    surface_margin_k: Interval | None
    wanted_k: float
    humidity_at_surface: Interval | None  # 0-1
    by_gauge_until_us: int | None  # while a painter's gauge reading holds
    ahead: tuple[tuple[int, Interval], ...]  # time, and the surface margin foreseen for it


@dataclass(frozen=True, slots=True)
class OutletView:
    """Whether it is dry enough to spray or blast at an outlet: of water only."""

    outlet: str
    at_us: int
    work: str
    verdict: Verdict  # of the air and the surface together
    air: LineAirView
    surface: SurfaceView
    holding: Judgement | None  # whether a blasted surface may be left bare
    blotter: Blotted | None  # the last test's result
    blotter_us: int | None
    # when the oldest of the inputs was heard last; None: there is none, or it has never spoken
    inputs_us: int | None = None


@dataclass(frozen=True, slots=True)
class StationValue:
    """One value of a station, and where it comes from."""

    value: Interval
    origin: Origin
    words: str  # the same in words and in the site's units, with its width


@dataclass(frozen=True, slots=True)
class StationView:
    """A station as it is now. Pressures are absolute."""

    station: str
    kind: str
    after: str  # "" for the intake
    at_us: int
    temperature: StationValue  # K
    pressure: StationValue  # Pa
    atmosphere_pa: float
    relative_humidity: StationValue | None  # 0-1, over liquid water: the intake's
    dew_point_k: Interval  # of the air that leaves, at the station's own pressure
    saturated: float  # the chance that this air can hold no more, 0-1
    trap: bool


@dataclass(frozen=True, slots=True)
class PlantView:
    """What closed hours have told of the plant. Air is reference air: 20 degC, 1 bar, dry."""

    at_us: int
    leak_m3_per_s: Interval | None  # at the middle of the pressure switch's span; None: not yet
    leak_at_us: int | None  # when it was measured last
    leak_hole_m: float | None  # the diameter of the one hole that leaks as much
    leak_kwh_per_year: Interval | None
    leak_cost_per_year: Interval | None  # None also where nobody said the price
    currency: str
    leak_high: float  # the chance that it is above its limit, 0-1
    delivered_m3_per_s: Interval | None
    delivered_at_us: int | None
    delivered_times: int  # how often it was measured
    delivered_to_rated: Interval | None
    weak: float  # the chance that it is well below the rated, 0-1
    duty: float | None  # of the last working hours; None: too few were seen


@dataclass(frozen=True, slots=True)
class DewPointView:
    """A measured pressure dew point (frost point below 0 degC), K; None where it is not known.

    With `high_k` alone nothing but "below" can be said.
    """

    station: str
    sensor: str
    at_us: int
    pressure_pa: float  # absolute, of the line there
    low_k: float | None
    middle_k: float | None
    high_k: float | None
    fault: str  # why there is no number, in words


@dataclass(frozen=True, slots=True)
class ChannelHealth:
    """The last thing that a channel said."""

    channel: str
    time_us: int | None  # of the last good reading
    value: float | None  # SI
    fault: str  # "" while it is good


@dataclass(frozen=True, slots=True)
class Health:
    """Whether the daemon does its job."""

    ok: bool
    at_us: int
    started_us: int
    last_tick_us: int | None
    ticks: int
    channels: tuple[ChannelHealth, ...]
    mqtt: Literal["off", "connected", "not connected"]
    outbox_waiting: int
    problems: tuple[str, ...]  # in words


@dataclass(frozen=True, slots=True)
class SeriesOfReadings:
    """Readings of one channel as arrays of one length, times increasing."""

    channel: str
    times_us: npt.NDArray[np.int64]
    values: npt.NDArray[np.float64]  # SI; NaN where the reading is bad
    faults: tuple[str, ...]  # "" where good


@dataclass(frozen=True, slots=True)
class StepsOfReadings:
    """What one channel comes to step by step, as arrays of one length; SI.

    A step has the readings whose own times are at or after its start and before the next step's.
    NaN where it has no good one.
    """

    channel: str
    step_us: int
    start_us: npt.NDArray[np.int64]
    count: npt.NDArray[np.int64]  # good readings
    bad: npt.NDArray[np.int64]
    least: npt.NDArray[np.float64]  # of the good ones
    greatest: npt.NDArray[np.float64]
    total: npt.NDArray[np.float64]  # the sum of their values
    held_us: npt.NDArray[np.int64]  # how long a value was known, each until the next reading
    held_total: npt.NDArray[np.float64]  # the sum of value times how long it held, in s

    @property
    def mean(self) -> npt.NDArray[np.float64]:
        """Of the good readings, each counting alike."""
        return self.total / np.where(self.count > 0, self.count, 1)

    @property
    def held_mean(self) -> npt.NDArray[np.float64]:
        """Over the time in which a value was known: of a contact the share that it was closed."""
        known = self.held_us > 0
        return np.where(known, self.held_total / np.where(known, self.held_us / 1e6, 1.0), np.nan)


@dataclass(frozen=True, slots=True)
class Recorded:
    """A journal entry as committed, and whether its key had been seen before."""

    entry: Entry
    repeated: bool
    said: str = ""  # what was learned from it, in words for whoever brought it


class Running(Protocol):
    """The running daemon as the API sees it. Safe to call from any thread."""

    @property
    def site(self) -> Site: ...

    @property
    def clock(self) -> Clock: ...

    @property
    def keys(self) -> KeyRing: ...

    def health(self) -> Health: ...

    def traps(self) -> Sequence[TrapView]:
        """One view a trap, in line order; empty until the first tick."""
        ...

    def outlets(self) -> Sequence[OutletView]:
        """One view an outlet, in the site file's order; empty until the first tick."""
        ...

    def dew_points(self) -> Sequence[DewPointView]:
        """One view a station whose dew point is measured; empty until the first tick."""
        ...

    def stations(self) -> Sequence[StationView]:
        """One view a station, in line order; empty until the first tick. Costs a millisecond."""
        ...

    def reminders(self) -> Sequence[Reminder]:
        """The last few, oldest first."""
        ...

    def plant(self) -> PlantView | None:
        """What closed hours have told of the plant; None until the first tick."""
        ...

    def supplies(self) -> Mapping[str, Due]:
        """By station: when its desiccant or ice is expected to be used up."""
        ...

    def hours_left(self) -> Mapping[str, Mapping[str, float | None]]:
        """By station: hours that its desiccant or ice lasts as it is used now, p05, p50, p95; None
        beyond a year."""
        ...

    def forecast_scores(self) -> Sequence[Score]:
        """What was reached of late, and what had been foreseen at least a day ahead."""
        ...

    def margin(self, outlet: str, surface_k: float) -> OutletView | None:
        """An outlet's view for a surface of this temperature; None until the first tick."""
        ...

    def alarms(self) -> Sequence[Alarm]:
        """Every alarm that the site can raise, also the normal ones."""
        ...

    def record(self, body: Body, at_us: int | None = None, key: str = "") -> Recorded:
        """Commit a journal entry (now, when no time is said). JournalError says what is wrong.

        The same key with the same content gives the first entry again; with other content, error.
        """
        ...

    def drains(self, trap: str, from_us: int, to_us: int) -> Sequence[Entry]:
        """The drains recorded for a trap, also those that were undone."""
        ...

    def undoings(self) -> Mapping[int, Entry]:
        """The entries that undo a drain, by the drain's number."""
        ...

    def readings(self, channel: str, from_us: int, to_us: int) -> SeriesOfReadings:
        """The readings of a channel from a time on, up to but not including another."""
        ...

    def week(self, week: Week) -> WeekLog:
        """The moisture log of a week, as far as it has gone. Costs some 10 ms."""
        ...

    def reading_steps(
        self, channel: str, from_us: int, to_us: int, step_us: int
    ) -> StepsOfReadings:
        """What a channel comes to in steps from a time on; the last one reaches `to_us`."""
        ...
