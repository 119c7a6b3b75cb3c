"""A small daemon in memory: keeps a journal and readings, changes nothing until it is told to."""

from __future__ import annotations

import threading
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from daemon import undoing
from daemon.alarms import Alarm
from daemon.clock import HOUR_US, MINUTE_US, SECOND_US, parse_rfc3339
from daemon.errors import JournalError, KeyReusedError
from daemon.foresight import Score
from daemon.journal import Acknowledge, Body, Drain, Entry, Shelve, Undo, Unshelve
from daemon.keys import ApiKey, KeyRing
from daemon.moisture.description import (
    Compressor,
    Fixed,
    Like,
    Line,
    Measured,
    Outlet,
    RiseByDuty,
    Share,
    Station,
    Trap,
)
from daemon.moisture.forecast import Due
from daemon.reminders import Reminder
from daemon.site.types import Api, Cup, DefaultUsed, Hours, Mqtt, OutletSettings, Site, Units
from daemon.store.columns import Column
from daemon.store.rollups import parts_of, steps_of
from daemon.views import (
    ChannelHealth,
    DewPointView,
    Health,
    Interval,
    OutletView,
    PlantView,
    Recorded,
    SeriesOfReadings,
    StationView,
    StepsOfReadings,
    TrapView,
)
from daemon.weekly.compute import week_log
from daemon.weekly.records import WeekLog
from daemon.weekly.rows import read_rows
from daemon.weekly.weeks import Week
from sensors.reading import Channel
from sensors.registry import SensorConfig
from tests.api.outlet_views import gun_view
from tests.daemon.week_rows import HeldRows

NOW_US = parse_rfc3339("2026-12-01T09:00:00Z")
LOG_BEGINS_US = NOW_US - 30 * 24 * HOUR_US


def a_site(
    host: str = "127.0.0.1",
    units: Units = "metric",
    password: str = "",
    open_reading: bool = False,
) -> Site:
    """An invented shop with two traps, in metric or US units."""
    channels = [
        Channel("intake-air.temperature", "temperature", 0.01, 233.15, 358.15, 1.0),
        Channel("intake-air.relative_humidity", "relative_humidity", 0.0001, 0.0, 1.0, 0.03),
        Channel("intake-air.pressure", "pressure", 1.0, 30e3, 110e3, 100.0),
        Channel("tank-gauge.pressure", "pressure", 100.0, -1e5, 12e5, 12e3, gauge=True),
        Channel("motor.contact", "contact", 1.0, 0.0, 1.0, 0.0),
    ]
    line = Line(
        stations=(
            Station(
                "intake",
                "intake",
                "",
                Measured("intake-air.temperature", 1.0),
                Measured("intake-air.pressure", 100.0),
                Measured("intake-air.relative_humidity", 0.03),
            ),
            Station(
                "tank",
                "receiver",
                "intake",
                RiseByDuty("intake", 20.0, 1800.0, 8.0),
                Measured("tank-gauge.pressure", 12e3, gauge=True),
                volume=Fixed(0.1, 0.005),
                trap=Trap(
                    "petcock", Fixed(15.0, 1.5), 0.6, Share(0.7, 0.25), drain_every="working day"
                ),
            ),
            Station(
                "riser",
                "pipe",
                "tank",
                Like("intake", 0.0, 2.0),
                Like("tank", -1e4, 5e3),
                trap=Trap("petcock", Fixed(0.3, 0.03), 0.15, Share(0.6, 0.3)),
            ),
            Station(
                "gun-regulator",
                "regulator",
                "riser",
                Like("riser", 0.0, 1.0),
                Fixed(3e5, 2e4, gauge=True),
            ),
        ),
        outlets=(Outlet("spray-gun", "gun-regulator", 1.0),),
        compressor=Compressor(
            Fixed(0.0025, 0.00025),
            "motor.contact",
            Fixed(6e5, 2e4, gauge=True),
            Fixed(8e5, 2e4, gauge=True),
            off_when_closed=True,
        ),
        period_s=10.0,
    )
    day = ((480, 720), (780, 1050))
    return Site(
        path="alder-yard.toml",
        id="alder-yard",
        name="Alder Yard Finishing",
        timezone="Europe/Lisbon",
        units=units,
        sample_every_us=10 * SECOND_US,
        hours=Hours((day, day, day, day, day, (), ()), frozenset({"2026-12-25"}), False),
        cup=Cup(),
        sensors=(
            SensorConfig("intake-air", "bme280", {"bus": 1, "address": 0x76}),
            SensorConfig("tank-gauge", "pressure-transducer", {"bus": 1, "address": 0x48}),
            SensorConfig("motor", "contact", {"chip": "/dev/gpiochip0", "line": 17}),
        ),
        channels={channel.name: channel for channel in channels},
        line=line,
        outlets=(OutletSettings("spray-gun", "", "solvent-borne", None, 3.0),),
        mqtt=Mqtt("127.0.0.1", 1883, "shop", password),
        api=Api(host, 8080, open_reading),
        defaults=(DefaultUsed("cup", "reads_low_by", "5 %", "common practice"),),
    )


class StillClock:
    """Stands where it is put."""

    def __init__(self, now_us: int = NOW_US) -> None:
        self.time_us = now_us

    def now_us(self) -> int:
        return self.time_us

    def monotonic(self) -> float:
        return self.time_us / SECOND_US

    def wait(self, seconds: float, stop: threading.Event) -> bool:
        self.time_us += round(seconds * SECOND_US)
        return stop.is_set()


def tank_view() -> TrapView:
    """The tank of the design's example: 410 ml (300-560), not due by volume."""
    return TrapView(
        trap="tank",
        at_us=NOW_US - 5 * SECOND_US,
        p05_kg=0.300,
        p50_kg=0.410,
        p95_kg=0.560,
        capacity_kg=15.0,
        drain_at_kg=0.6,
        probability_due=0.125,
        due=False,
        because="calendar",
        due_at_us=NOW_US + 8 * HOUR_US,
        since="last drain",
        last_drain_us=NOW_US - 16 * HOUR_US,
        due_p05_us=NOW_US + 7 * HOUR_US,
        due_p50_us=NOW_US + 8 * HOUR_US,
        due_p95_us=NOW_US + 8 * HOUR_US,
    )


def riser_view() -> TrapView:
    """A riser that is due."""
    return TrapView(
        trap="riser",
        at_us=NOW_US - 5 * SECOND_US,
        p05_kg=0.14,
        p50_kg=0.17,
        p95_kg=0.21,
        capacity_kg=0.3,
        drain_at_kg=0.15,
        probability_due=0.875,
        due=True,
        because="volume",
        due_at_us=None,
        since="start",
        last_drain_us=None,
        due_p05_us=NOW_US,
        due_p50_us=NOW_US,
        due_p95_us=NOW_US + 2 * HOUR_US,
    )


def some_alarms() -> dict[str, Alarm]:
    """One alarm a state."""
    return {
        alarm.id: alarm
        for alarm in (
            Alarm("tank-drain-due", "drain-due", "tank", "normal", "medium", NOW_US - HOUR_US, ""),
            Alarm(
                "riser-drain-due",
                "drain-due",
                "riser",
                "unacknowledged",
                "medium",
                NOW_US - 5 * MINUTE_US,
                "riser: about 170 ml (140-210 ml); drain it",
            ),
            Alarm(
                "spare-drain-due",
                "drain-due",
                "spare",
                "acknowledged",
                "low",
                NOW_US - HOUR_US,
                "spare: drain it",
            ),
            Alarm(
                "old-drain-due",
                "drain-due",
                "old",
                "returned unacknowledged",
                "high",
                NOW_US - HOUR_US,
                "old: was due",
            ),
        )
    }


def some_plant() -> PlantView:
    """A leak of 12 L/min (8-18) that costs money, and a compressor that gives what it should."""
    return PlantView(
        at_us=NOW_US - 5 * SECOND_US,
        leak_m3_per_s=Interval(8 / 60e3, 12 / 60e3, 18 / 60e3),
        leak_at_us=NOW_US - 10 * HOUR_US,
        leak_hole_m=0.0006,
        leak_kwh_per_year=Interval(200.0, 310.0, 480.0),
        leak_cost_per_year=Interval(60.0, 93.0, 144.0),
        currency="EUR",
        leak_high=0.25,
        delivered_m3_per_s=Interval(0.0022, 0.0024, 0.0026),
        delivered_at_us=NOW_US - 15 * HOUR_US,
        delivered_times=7,
        delivered_to_rated=Interval(0.88, 0.96, 1.04),
        weak=0.03,
        duty=0.42,
    )


def some_reminder() -> Reminder:
    """What was called out at the shift's start."""
    return Reminder(
        "reminder/shift-start/2026-12-01T08:00:00Z",
        NOW_US - HOUR_US,
        "round",
        "shift start",
        ("riser", "tank"),
        "2 to drain, the tank last: about 0.6 L.",
    )


def _no_readings() -> dict[str, SeriesOfReadings]:
    return {}


@dataclass
class MemoryKeys:
    """Where keys are kept, in memory."""

    keys: dict[str, tuple[ApiKey, bytes]] = field(default_factory=dict)
    writes: int = 0

    def find_key(self, key_id: str) -> tuple[ApiKey, bytes] | None:
        return self.keys.get(key_id)

    def key_used(self, key_id: str, at_us: int) -> None:
        self.writes += 1
        key, digest = self.keys[key_id]
        self.keys[key_id] = (replace(key, used_us=at_us), digest)


@dataclass
class FakeRunning:
    """What the API needs of a daemon, kept in memory."""

    site: Site = field(default_factory=a_site)
    clock: StillClock = field(default_factory=StillClock)
    views: list[TrapView] = field(default_factory=lambda: [tank_view(), riser_view()])
    standing: dict[str, Alarm] = field(default_factory=some_alarms)
    shown_outlets: list[OutletView] = field(default_factory=lambda: [gun_view()])
    shown_dew_points: list[DewPointView] = field(default_factory=list)
    shown_stations: list[StationView] = field(default_factory=list)
    shown_plant: PlantView | None = field(default_factory=some_plant)
    shown_reminders: list[Reminder] = field(default_factory=lambda: [some_reminder()])
    shown_supplies: dict[str, Due] = field(default_factory=dict)
    shown_hours: dict[str, dict[str, float | None]] = field(default_factory=dict)
    shown_scores: list[Score] = field(default_factory=list)
    problems: tuple[str, ...] = ()
    recorded: dict[str, SeriesOfReadings] = field(default_factory=_no_readings)
    journal: list[Entry] = field(default_factory=list)
    said: str = ""  # what every drain is told to have taught
    log_rows: HeldRows = field(default_factory=HeldRows)
    kept_keys: MemoryKeys = field(default_factory=MemoryKeys)
    _lock: threading.Lock = field(default_factory=threading.Lock)

    @property
    def keys(self) -> KeyRing:
        return KeyRing(self.kept_keys, self.clock)

    def health(self) -> Health:
        return Health(
            ok=not self.problems,
            at_us=self.clock.now_us(),
            started_us=NOW_US - HOUR_US,
            last_tick_us=NOW_US - 5 * SECOND_US,
            ticks=360,
            channels=(
                ChannelHealth("intake-air.temperature", NOW_US - 5 * SECOND_US, 293.15, ""),
                ChannelHealth("tank-gauge.pressure", NOW_US - HOUR_US, 7.2e5, "no answer"),
            ),
            mqtt="connected",
            outbox_waiting=0,
            problems=self.problems,
        )

    def traps(self) -> Sequence[TrapView]:
        return tuple(self.views)

    def outlets(self) -> Sequence[OutletView]:
        return tuple(self.shown_outlets)

    def dew_points(self) -> Sequence[DewPointView]:
        return tuple(self.shown_dew_points)

    def stations(self) -> Sequence[StationView]:
        return self.shown_stations

    def reminders(self) -> Sequence[Reminder]:
        return tuple(self.shown_reminders)

    def plant(self) -> PlantView | None:
        return self.shown_plant

    def supplies(self) -> Mapping[str, Due]:
        return self.shown_supplies

    def hours_left(self) -> Mapping[str, Mapping[str, float | None]]:
        return self.shown_hours

    def forecast_scores(self) -> Sequence[Score]:
        return tuple(self.shown_scores)

    def margin(self, outlet: str, surface_k: float) -> OutletView | None:
        return gun_view(surface_k) if self.shown_outlets else None

    def alarms(self) -> Sequence[Alarm]:
        return tuple(self.standing.values())

    def record(self, body: Body, at_us: int | None = None, key: str = "") -> Recorded:
        with self._lock:
            for entry in self.journal:
                if key and entry.key == key:
                    if entry.body == body and at_us in (None, entry.at_us):
                        return Recorded(entry, repeated=True)
                    raise KeyReusedError(f'the key "{key}" was used before for something else')
            now_us = self.clock.now_us()
            if isinstance(body, Undo):
                found = next((e for e in self.journal if e.seq == body.entry), None)
                if (done := self.undoings().get(body.entry)) is not None:
                    return Recorded(done, repeated=True)
                undoing.check(body, found, now_us)
            when_us = now_us if at_us is None else at_us
            if when_us < LOG_BEGINS_US:
                raise JournalError("the time is before the log begins, 2026-11-01T09:00:00Z")
            entry = Entry(len(self.journal) + 1, when_us, now_us, body, key)
            self.journal.append(entry)
            return Recorded(entry, repeated=False, said=self.said)

    def tick(self) -> None:
        """Let the alarms follow the journal, as the daemon's next tick would."""
        for entry in self.journal:
            if isinstance(entry.body, Shelve):
                until_us = entry.at_us + round(entry.body.for_s * SECOND_US)
                self.standing[entry.body.alarm] = replace(
                    self.standing[entry.body.alarm], state="shelved", shelved_until_us=until_us
                )
            if isinstance(entry.body, Unshelve):
                self.standing[entry.body.alarm] = replace(
                    self.standing[entry.body.alarm], state="unacknowledged", shelved_until_us=None
                )
            if isinstance(entry.body, Acknowledge):
                alarm = self.standing[entry.body.alarm]
                seen = "acknowledged" if alarm.state == "unacknowledged" else alarm.state
                self.standing[alarm.id] = replace(
                    alarm, state="normal" if seen == "returned unacknowledged" else seen
                )

    def undoings(self) -> Mapping[int, Entry]:
        return {e.body.entry: e for e in self.journal if isinstance(e.body, Undo)}

    def drains(self, trap: str, from_us: int, to_us: int) -> Sequence[Entry]:
        return [
            entry
            for entry in self.journal
            if isinstance(entry.body, Drain)
            and entry.body.trap == trap
            and from_us <= entry.at_us < to_us
        ]

    def week(self, week: Week) -> WeekLog:
        rows = read_rows(self.log_rows, week, self.site, self.clock.now_us())
        return week_log(self.site, rows)

    def readings(self, channel: str, from_us: int, to_us: int) -> SeriesOfReadings:
        series = self.recorded.get(channel)
        if series is None:
            none = np.zeros(0, dtype=np.int64)
            return SeriesOfReadings(channel, none, none.astype(np.float64), ())
        chosen = (series.times_us >= from_us) & (series.times_us < to_us)
        return SeriesOfReadings(
            channel,
            series.times_us[chosen],
            series.values[chosen],
            tuple(fault for fault, keep in zip(series.faults, chosen, strict=True) if keep),
        )

    def reading_steps(
        self, channel: str, from_us: int, to_us: int, step_us: int
    ) -> StepsOfReadings:
        found = self.readings(channel, from_us, to_us)
        column = Column(found.times_us, found.values, list(found.faults))
        starts_us = np.arange(from_us, to_us, step_us, dtype=np.int64)
        parts = list(parts_of(column, 30 * SECOND_US, step_us, from_us))
        return steps_of(channel, parts, starts_us, step_us, 30 * SECOND_US, self.clock.now_us())
