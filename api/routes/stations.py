"""The line as it is now, station by station, and what each value comes from."""

from __future__ import annotations

from collections.abc import Mapping

from fastapi import APIRouter
from pydantic import BaseModel, Field

from api.outlet_models import IntervalOut
from api.plant_models import HoursLeftOut, UsedUpOut
from api.problems import answered_by
from api.routes.running import TheDaemon
from daemon.clock import format_rfc3339
from daemon.moisture.forecast import Due
from daemon.unit_tables import ZERO_CELSIUS_K
from daemon.views import Interval, Origin, StationValue, StationView

router = APIRouter(tags=["site"])

PA_PER_BAR = 1e5


class OriginOut(BaseModel):
    """What a value comes from."""

    origin: Origin = Field(
        description="rule: also while one stands in for a sensor that is not heard"
    )
    words: str = Field(
        description="in the site's units",
        examples=["sensor pipe-end.temperature, give or take 0.5 K"],
    )

    @classmethod
    def of(cls, value: StationValue) -> OriginOut:
        return cls(origin=value.origin, words=value.words)


class StationNowOut(BaseModel):
    """A station as it is now, each value with its 5 to 95 % interval."""

    station: str = Field(examples=["riser"])
    kind: str = Field(examples=["pipe"])
    after: str | None = Field(description="the station before; null for the intake")
    at: str = Field(examples=["2026-12-01T09:00:00Z"])
    temperature_c: IntervalOut
    temperature_from: OriginOut
    pressure_abs_bar: IntervalOut
    pressure_from: OriginOut
    relative_humidity_percent: IntervalOut | None = Field(description="the intake's")
    relative_humidity_from: OriginOut | None
    dew_point_c: IntervalOut = Field(
        description="of the air that leaves, at this pressure; the frost point at and below 0 degC"
    )
    saturated: float = Field(description="the chance that this air can hold no more, 0 to 1")
    trap: bool = Field(description="whether liquid collects here; see traps")
    used_up: UsedUpOut | None = Field(
        description="when its desiccant or ice is expected to be used up; null: it has none"
    )

    hours_left: HoursLeftOut | None = Field(
        description="how many hours of air like that of late are left in it; null: it has none"
    )

    @classmethod
    def of(
        cls, view: StationView, used_up: Due | None, hours: Mapping[str, float | None] | None
    ) -> StationNowOut:
        humidity = view.relative_humidity
        return cls(
            station=view.station,
            kind=view.kind,
            after=view.after or None,
            at=format_rfc3339(view.at_us),
            temperature_c=_celsius(view.temperature.value),
            temperature_from=OriginOut.of(view.temperature),
            pressure_abs_bar=_scaled(view.pressure.value, 1.0 / PA_PER_BAR, 0.0, 3),
            pressure_from=OriginOut.of(view.pressure),
            relative_humidity_percent=None
            if humidity is None
            else _scaled(humidity.value, 100.0, 0.0, 1),
            relative_humidity_from=None if humidity is None else OriginOut.of(humidity),
            dew_point_c=_celsius(view.dew_point_k),
            saturated=round(view.saturated, 3),
            trap=view.trap,
            used_up=None if used_up is None else UsedUpOut.of(used_up),
            hours_left=None if hours is None else HoursLeftOut.model_validate(hours),
        )


def _celsius(interval: Interval) -> IntervalOut:
    return _scaled(interval, 1.0, -ZERO_CELSIUS_K, 1)


def _scaled(interval: Interval, times: float, plus: float, digits: int) -> IntervalOut:
    low, middle, high = (round(each * times + plus, digits) + 0.0 for each in interval.values)
    return IntervalOut(p05=low, p50=middle, p95=high)


@router.get(
    "/stations",
    summary="Every station of the line as it is now, and what each value comes from",
    responses=answered_by("log-unavailable"),
)
def get_stations(daemon: TheDaemon) -> list[StationNowOut]:
    """In the order in which the air meets them; an empty list until the first tick."""
    supplies, hours = daemon.supplies(), daemon.hours_left()
    return [
        StationNowOut.of(view, supplies.get(view.station), hours.get(view.station))
        for view in daemon.stations()
    ]
