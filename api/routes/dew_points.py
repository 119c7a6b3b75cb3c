"""What the sensors say of the air's dew point in the line."""

from __future__ import annotations

from fastapi import APIRouter
from pydantic import BaseModel, Field

from api.problems import answered_by
from api.routes.running import TheDaemon
from daemon.clock import format_rfc3339
from daemon.views import DewPointView

router = APIRouter(tags=["site"])

ZERO_CELSIUS_K, PA_PER_BAR = 273.15, 1e5


class DewPointOut(BaseModel):
    """A measured pressure dew point (frost point below 0 degC), as an interval (95 %).

    Where the sensor is within its own uncertainty of dry, only `below_c` can be said. While it
    fails, or says what cannot be, all of them are null and `fault` says why.
    """

    station: str = Field(examples=["riser"])
    sensor: str = Field(examples=["cell"])
    at: str = Field(examples=["2026-12-01T09:00:00Z"])
    pressure_abs_bar: float = Field(description="the line's, at which the dew point is")
    low_c: float | None
    middle_c: float | None
    high_c: float | None
    below_c: float | None = Field(description="instead of the three: it is below this")
    fault: str = Field(description="why there is no number; empty while there is one")

    @classmethod
    def of(cls, view: DewPointView) -> DewPointOut:
        only_above = view.high_k is not None and view.middle_k is None
        return cls(
            station=view.station,
            sensor=view.sensor,
            at=format_rfc3339(view.at_us),
            pressure_abs_bar=round(view.pressure_pa / PA_PER_BAR, 3),
            low_c=_celsius(view.low_k),
            middle_c=_celsius(view.middle_k),
            high_c=None if only_above else _celsius(view.high_k),
            below_c=_celsius(view.high_k) if only_above else None,
            fault=view.fault,
        )


def _celsius(temperature_k: float | None) -> float | None:
    return None if temperature_k is None else round(temperature_k - ZERO_CELSIUS_K, 1)


@router.get(
    "/dew-points",
    summary="What dew-point transmitters and vented cells say",
    responses=answered_by("log-unavailable"),
)
def get_dew_points(daemon: TheDaemon) -> list[DewPointOut]:
    """One for each station with such a sensor, in line order; an empty list without any."""
    return [DewPointOut.of(view) for view in daemon.dew_points()]
