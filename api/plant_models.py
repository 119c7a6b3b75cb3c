"""The JSON of the plant, its reminders, and its supplies of desiccant and ice.

A number's unit is in its name. Air is reference air: 20 degC, 1 bar absolute, dry.
"""

from __future__ import annotations

from typing import Literal

from pydantic import BaseModel, Field

from api.models import Time
from api.outlet_models import IntervalOut
from daemon.clock import SECOND_US, format_rfc3339
from daemon.foresight import NOT_WITHIN, Score
from daemon.moisture.forecast import Due
from daemon.payloads import reminder_payload
from daemon.reminders import Reminder
from daemon.site.types import ReminderTime
from daemon.views import Interval, PlantView

L_PER_MIN = 60e3  # of a m3/s
MM_PER_M = 1e3


class LeakOut(BaseModel):
    """What the line loses while nobody works, between the pressure switch's two settings."""

    reference_l_min: IntervalOut
    at: Time | None = Field(description="when it was measured last")
    one_hole_mm: float | None = Field(
        description="the diameter of the one hole that leaks as much", examples=[0.6]
    )
    kwh_per_year: IntervalOut | None
    cost_per_year: IntervalOut | None = Field(description="null: no kwh_price in the site file")
    currency: str = Field(examples=["EUR"])
    probability_high: float = Field(
        description="the chance, 0 to 1, that it is above leak_limit", examples=[0.25]
    )


class DeliveredOut(BaseModel):
    """What the compressor delivers, by how it pumps up the line while the shop is closed."""

    reference_l_min: IntervalOut
    at: Time | None = Field(description="when it was measured last")
    times: int = Field(description="how often it was measured", examples=[7])
    to_rated: IntervalOut | None = Field(description="as a share of the rated delivery")
    probability_weak: float = Field(
        description="the chance, 0 to 1, that it is well below the rated", examples=[0.03]
    )


class PlantOut(BaseModel):
    """What closed hours have told of leak and compressor, and how busy it is."""

    at: Time
    leak: LeakOut | None = Field(description="null: not measured yet")
    delivered: DeliveredOut | None = Field(description="null: not measured yet")
    duty: float | None = Field(
        description="the share of the last working hours that it ran, 0 to 1; null: too few seen",
        examples=[0.42],
    )

    @classmethod
    def of(cls, view: PlantView) -> PlantOut:
        return cls(
            at=format_rfc3339(view.at_us),
            leak=_leak(view),
            delivered=_delivered(view),
            duty=None if view.duty is None else round(view.duty, 3),
        )


def _leak(view: PlantView) -> LeakOut | None:
    if view.leak_m3_per_s is None:
        return None
    return LeakOut(
        reference_l_min=_some(view.leak_m3_per_s, L_PER_MIN, 2),
        at=_time(view.leak_at_us),
        one_hole_mm=None if view.leak_hole_m is None else round(view.leak_hole_m * MM_PER_M, 2),
        kwh_per_year=_scaled(view.leak_kwh_per_year, 1.0, 0),
        cost_per_year=_scaled(view.leak_cost_per_year, 1.0, 2),
        currency=view.currency,
        probability_high=round(view.leak_high, 3),
    )


def _delivered(view: PlantView) -> DeliveredOut | None:
    if view.delivered_m3_per_s is None:
        return None
    return DeliveredOut(
        reference_l_min=_some(view.delivered_m3_per_s, L_PER_MIN, 1),
        at=_time(view.delivered_at_us),
        times=view.delivered_times,
        to_rated=_scaled(view.delivered_to_rated, 1.0, 3),
        probability_weak=round(view.weak, 3),
    )


class ReminderOut(BaseModel):
    """A reminder to go on a round, or the list for opening up. The same object as over MQTT."""

    id: str = Field(examples=["reminder/shift-end/2026-12-01T17:20:00Z"])
    at: Time
    kind: Literal["round", "opening-up"]
    source: ReminderTime = Field(description="the turn of the day")
    traps: list[str] = Field(description="in walking order", examples=[["riser", "tank"]])
    text: str = Field(examples=["2 to drain, the tank last: about 0.6 L."])

    @classmethod
    def of(cls, reminder: Reminder) -> ReminderOut:
        return cls.model_validate(reminder_payload(reminder))


class UsedUpOut(BaseModel):
    """When desiccant or ice is expected to be used up, at the recent load."""

    p05: Time | None = Field(description="null: beyond the forecast's ten days")
    p50: Time | None
    p95: Time | None

    @classmethod
    def of(cls, due: Due) -> UsedUpOut:
        return cls(p05=_whole(due.p05_us), p50=_whole(due.p50_us), p95=_whole(due.p95_us))


class HoursLeftOut(BaseModel):
    """How long desiccant or ice lasts, as it was used of late; null: more than a year."""

    p05: float | None = Field(examples=[310.5])
    p50: float | None
    p95: float | None


class ScoreOut(BaseModel):
    """A drain-at level that was reached, and what had been foreseen at least a day ahead."""

    trap: str = Field(examples=["tank"])
    foreseen_at: Time = Field(description="when the forecast was made")
    p05: Time | None = Field(description="null: beyond the forecast's ten days")
    p50: Time | None
    p95: Time | None
    reached_at: Time
    held: bool = Field(description="whether it was reached between p05 and p95")

    @classmethod
    def of(cls, score: Score) -> ScoreOut:
        low, middle, high = (
            None if each == NOT_WITHIN else _whole(each)
            for each in (score.p05_us, score.p50_us, score.p95_us)
        )
        return cls(
            trap=score.trap,
            foreseen_at=format_rfc3339(score.made_us),
            p05=low,
            p50=middle,
            p95=high,
            reached_at=format_rfc3339(score.happened_us),
            held=score.hit,
        )


def _time(time_us: int | None) -> str | None:
    return None if time_us is None else format_rfc3339(time_us)


def _whole(time_us: int | None) -> str | None:
    """A time without a fraction of a second, which nobody could foresee."""
    return None if time_us is None else format_rfc3339(time_us - time_us % SECOND_US)


def _some(interval: Interval, times: float, digits: int) -> IntervalOut:
    low, middle, high = (round(each * times, digits) + 0.0 for each in interval.values)
    return IntervalOut(p05=low, p50=middle, p95=high)


def _scaled(interval: Interval | None, times: float, digits: int) -> IntervalOut | None:
    return None if interval is None else _some(interval, times, digits)
