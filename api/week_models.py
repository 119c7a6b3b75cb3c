"""The JSON of a weekly moisture log.

A number's unit is in its name: h hours, ml millilitres, K kelvin. Times are RFC 3339 in UTC.
"""

from __future__ import annotations

from collections.abc import Mapping

from pydantic import BaseModel, Field

from api.models import Time
from api.outlet_models import IntervalOut
from daemon.clock import format_rfc3339
from daemon.hour_figures import Least
from daemon.journal import Blotted, Outcome
from daemon.moisture.air import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.moisture.description import ML_PER_KG
from daemon.site.types import Site
from daemon.units import from_si
from daemon.views import Interval
from daemon.weekly.records import (
    AlarmWeek,
    DrainLine,
    Hits,
    OutletWeek,
    PlantWeek,
    TrapWeek,
    Watched,
    WeekLog,
)
from daemon.weekly.sheet import CAUTIONS

HOUR_S = 3600.0


class GapOut(BaseModel):
    """Whole hours in which something is missing, and how much."""

    begins: Time
    ends: Time
    missing_h: float = Field(examples=[3.3])


class WatchedOut(BaseModel):
    """How much of the week is known at all."""

    recorded_h: float = Field(
        description="of the week, what has passed since the record began", examples=[168.0]
    )
    watched_h: float = Field(examples=[164.7])
    open_h: float = Field(description="of recorded_h, while the shop was open", examples=[45.0])
    open_watched_h: float = Field(examples=[45.0])
    not_watched: list[GapOut]


class WeekDrainOut(BaseModel):
    """One drain. Null: not said, or not known."""

    at: Time
    trap: str
    outcome: Outcome
    measured_ml: float | None
    expected_ml: IntervalOut | None = Field(
        description="what the cup should have shown, with the cup's own error"
    )
    learned_from: bool = Field(
        description="false: so far from what was expected that it was kept, and that nobody has "
        "confirmed it yet"
    )
    late_h: float | None = Field(description="since it was due; null: it was on time")
    by: str
    look: str


class WeekTrapOut(BaseModel):
    """One trap: what dropped out there, what was measured, and its drains."""

    trap: str = Field(examples=["tank"])
    shed_ml: IntervalOut | None
    measured_ml: float | None = Field(description="in all; null: nothing was measured")
    drains: int
    drains_measured: int
    drains_on_time: int
    drains_late: int
    longest_late_h: float | None
    still_due_since: Time | None


class LeastOut(BaseModel):
    """A margin where it was least, by its 5 % end."""

    at: Time
    margin_k: IntervalOut
    place: str | None = Field(examples=["the hose"])


class BlotterTestOut(BaseModel):
    """A blotter test after ASTM D4285."""

    at: Time
    result: Blotted
    by: str


class WeekOutletOut(BaseModel):
    """One outlet while the shop was open."""

    outlet: str = Field(examples=["spray-gun"])
    work: str | None
    unfit_h: float = Field(description="hours with the verdict wait", examples=[2.5])
    verdict_h: dict[str, float] = Field(
        description="hours by verdict: wait, unknown, care, dry enough; and not watched"
    )
    iso_8573_1_humidity_h: dict[str, float] = Field(
        description="hours in the range of each class (estimate, humidity only); and cannot tell",
        examples=[{"4": 41.5, "7": 3.5}],
    )
    least_line_margin: LeastOut | None
    least_surface_margin: LeastOut | None
    blotter_tests: list[BlotterTestOut]


class WeekAlarmOut(BaseModel):
    """The alarms of one kind, and how soon they were acknowledged."""

    kind: str = Field(examples=["drain-due"])
    raised: int
    acknowledged: int
    median_min: float | None
    longest_min: float | None


class WeekLeakOut(BaseModel):
    """The leak as it was known last. Cost: null where nobody said the price."""

    measured: Time
    flow_l_min: IntervalOut = Field(description="reference litres: 20 degC, 1 bar absolute, dry")
    kwh_per_week: IntervalOut
    cost_per_week: IntervalOut | None
    currency: str


class WeekPlantOut(BaseModel):
    """The compressor and the leak. Null: not known."""

    running_h: IntervalOut | None
    duty_percent: IntervalOut | None = Field(description="of the watched open hours")
    drawn_m3: IntervalOut | None = Field(description="reference air drawn in")
    leak: WeekLeakOut | None


class HitsOut(BaseModel):
    """How many of how many; nine in ten are meant to hold."""

    held: int
    scored: int


class WeekOut(BaseModel):
    """The moisture log of one ISO week in the shop's own time zone. Null: not known."""

    week: str = Field(examples=["2026-W49"])
    begins: Time
    ends: Time
    over: bool = Field(description="false: as far as `until`")
    until: Time
    record_begins: Time | None = Field(description="where that was in this week")
    watched: WatchedOut
    water_in_ml: IntervalOut | None
    traps: list[WeekTrapOut]
    drains: list[WeekDrainOut]
    outlets: list[WeekOutletOut]
    alarms: list[WeekAlarmOut]
    compressor: WeekPlantOut
    sensor_faults_h: dict[str, float] = Field(
        description="by channel: hours in which it was faulty or silent",
        examples=[{"tank-gauge.pressure": 0.5}],
    )
    forecasts: HitsOut = Field(
        description="levels reached that lay within what had been foreseen a day ahead"
    )
    intervals: HitsOut = Field(description="measured drains that lay in their 5-95 % interval")
    cautions: list[str]

    @classmethod
    def of(cls, site: Site, log: WeekLog) -> WeekOut:
        """A log as JSON."""
        return cls(
            week=log.week,
            begins=format_rfc3339(log.from_us),
            ends=format_rfc3339(log.to_us),
            over=log.over,
            until=format_rfc3339(log.until_us),
            record_begins=_time(log.begun_us),
            watched=_watched(log.watched),
            water_in_ml=_ml(log.water_in_kg),
            traps=[_trap(each) for each in log.traps],
            drains=[_drain(each) for each in log.drains],
            outlets=[_outlet(log, each) for each in log.outlets],
            alarms=[_alarm(each) for each in log.alarms],
            compressor=_plant(site, log.plant, log.watched.open_watched_s),
            sensor_faults_h=_hours(log.faults_s),
            forecasts=_hits(log.forecasts),
            intervals=_hits(log.intervals),
            cautions=list(CAUTIONS),
        )


def _time(at_us: int | None) -> str | None:
    return None if at_us is None else format_rfc3339(at_us)


def _h(seconds: float) -> float:
    return round(seconds / HOUR_S, 4)


def _hours(by_name: Mapping[str, float]) -> dict[str, float]:
    return {name: _h(seconds) for name, seconds in by_name.items()}


def _scaled(found: Interval | None, times: float, digits: int) -> IntervalOut | None:
    if found is None:
        return None
    low, middle, high = (round(each * times, digits) for each in found.values)
    return IntervalOut(p05=low, p50=middle, p95=high)


def _kg_in_ml(kg: float) -> float:
    return round(kg * ML_PER_KG, 1)


def _ml(found: Interval | None) -> IntervalOut | None:
    return _scaled(found, ML_PER_KG, 1)


def _watched(watched: Watched) -> WatchedOut:
    return WatchedOut(
        recorded_h=_h(watched.of_s),
        watched_h=_h(watched.watched_s),
        open_h=_h(watched.open_s),
        open_watched_h=_h(watched.open_watched_s),
        not_watched=[
            GapOut(begins=format_rfc3339(a), ends=format_rfc3339(b), missing_h=_h(lacks_s))
            for (a, b), lacks_s in zip(watched.gaps, watched.gaps_s, strict=True)
        ],
    )


def _trap(trap: TrapWeek) -> WeekTrapOut:
    return WeekTrapOut(
        trap=trap.trap,
        shed_ml=_ml(trap.shed_kg),
        measured_ml=_kg_in_ml(trap.measured_kg) if trap.measured else None,
        drains=trap.drains,
        drains_measured=trap.measured,
        drains_on_time=trap.on_time,
        drains_late=trap.late,
        longest_late_h=_h(trap.longest_late_s) if trap.late else None,
        still_due_since=_time(trap.due_since_us),
    )


def _drain(line: DrainLine) -> WeekDrainOut:
    return WeekDrainOut(
        at=format_rfc3339(line.at_us),
        trap=line.trap,
        outcome=line.outcome,
        measured_ml=None if line.measured_kg is None else _kg_in_ml(line.measured_kg),
        expected_ml=_ml(line.expected_kg),
        learned_from=line.believed and line.expected_kg is not None,
        late_h=None if line.late_s is None else _h(line.late_s),
        by=line.by,
        look=line.look,
    )


def _outlet(log: WeekLog, outlet: OutletWeek) -> WeekOutletOut:
    tests = [each for each in log.blotters if each.outlet == outlet.outlet]
    return WeekOutletOut(
        outlet=outlet.outlet,
        work=outlet.work or None,
        unfit_h=_h(outlet.unfit_s),
        verdict_h=_hours(outlet.verdict_s),
        iso_8573_1_humidity_h=_hours(outlet.class_s),
        least_line_margin=_least(outlet.line),
        least_surface_margin=_least(outlet.surface),
        blotter_tests=[
            BlotterTestOut(at=format_rfc3339(t.at_us), result=t.result, by=t.by) for t in tests
        ],
    )


def _least(least: Least | None) -> LeastOut | None:
    if least is None:
        return None
    margin = _scaled(Interval(least.p05_k, least.p50_k, least.p95_k), 1.0, 2)
    assert margin is not None
    at = format_rfc3339(least.at_us)
    return LeastOut(at=at, margin_k=margin, place=least.place or None)


def _alarm(alarm: AlarmWeek) -> WeekAlarmOut:
    return WeekAlarmOut(
        kind=alarm.kind,
        raised=alarm.raised,
        acknowledged=alarm.seen,
        median_min=None if alarm.median_s is None else round(alarm.median_s / 60.0, 2),
        longest_min=None if alarm.longest_s is None else round(alarm.longest_s / 60.0, 2),
    )


def _plant(site: Site, plant: PlantWeek, open_s: float) -> WeekPlantOut:
    leak = None
    if plant.leak is not None:
        flow = _scaled(Interval(*plant.leak.m3_per_s), from_si(1.0, "L/min", "flow"), 2)
        energy = _scaled(Interval(*plant.leak.kwh_per_week), 1.0, 2)
        assert flow is not None
        assert energy is not None
        cost = plant.leak.cost_per_week
        leak = WeekLeakOut(
            measured=format_rfc3339(plant.leak.at_us),
            flow_l_min=flow,
            kwh_per_week=energy,
            cost_per_week=None if cost is None else _scaled(Interval(*cost), 1.0, 2),
            currency=site.costs.currency,
        )
    return WeekPlantOut(
        running_h=_scaled(plant.on_s, 1.0 / HOUR_S, 4),
        duty_percent=_scaled(plant.duty(open_s), 100.0, 1),
        drawn_m3=_scaled(plant.drawn_kg, 1.0 / REFERENCE_DRY_AIR_KG_PER_M3, 3),
        leak=leak,
    )


def _hits(hits: Hits) -> HitsOut:
    return HitsOut(held=hits.hit, scored=hits.of)
