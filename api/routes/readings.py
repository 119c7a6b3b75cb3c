"""Recorded readings, as arrays."""

from __future__ import annotations

from typing import Annotated

import numpy as np
from fastapi import APIRouter, Query, Response

from api.models import FaultOut, ReadingsOut
from api.problems import Point, Problem, answered_by
from api.quantities import ShownIn, shown_in
from api.routes.running import TheDaemon
from api.routes.spans import FROM, TO, span
from api.site_model import reference_of
from api.stepped import (
    SteppedOut,
    refuse_too_many,
    step_us_of,
    stepped_out,
    usual_begin_us,
)
from daemon.clock import HOUR_US, format_rfc3339
from daemon.views import Running, SeriesOfReadings
from sensors.reading import Channel

router = APIRouter(prefix="/readings", tags=["readings"])

MOST_PERIODS = 70_000  # sampling periods in one answer: a week at 10 s (60 480) and some more
PLACES = 10  # significant digits after a conversion: far finer than any channel's step


@router.get(
    "",
    summary="The readings of one channel",
    response_model=ReadingsOut | SteppedOut,
    responses=answered_by("unknown-channel", "invalid-request", "log-unavailable"),
)
def get_readings(
    daemon: TheDaemon,
    channel: Annotated[str, Query(examples=["tank-gauge.pressure"])],
    from_: Annotated[str | None, FROM] = None,
    to: Annotated[str | None, TO] = None,
    units: Annotated[
        ShownIn,
        Query(description="si, or what people read: site (as the site file says), metric, us"),
    ] = "si",
    step: Annotated[
        float | None,
        Query(
            description="seconds: what the channel comes to in steps of that length, a whole "
            "number of sampling periods. Long spans want whole hours (3600, 86400) from a full "
            "hour on, which are quick however long the span is",
            allow_inf_nan=False,
            examples=[3600],
        ),
    ] = None,
) -> Response:
    """Two arrays of one length, times and values; without from and to, the last hour.

    A bad reading is null, and its reason stands in `faults`. With `step`: mean, least and greatest
    of each step instead; without from then the last 24 steps.
    """
    described = daemon.site.channels.get(channel)
    if described is None:
        known = ", ".join(daemon.site.channels)
        raise Problem(
            "unknown-channel", f'there is no channel "{channel}"; those of this site are: {known}'
        )
    if step is not None:
        return _json(_stepped(daemon, described, units, (from_, to), step))
    start_us, end_us = span(from_, to, daemon.clock.now_us(), HOUR_US)
    _refuse_too_long(daemon, end_us - start_us)
    series = daemon.readings(channel, start_us, end_us)
    return _json(_readings_out(series, described, daemon, units, (start_us, end_us)))


def _json(answer: ReadingsOut | SteppedOut) -> Response:
    return Response(answer.model_dump_json(by_alias=True), media_type="application/json")


def _stepped(
    daemon: Running,
    channel: Channel,
    units: ShownIn,
    between: tuple[str | None, str | None],
    step_s: float,
) -> SteppedOut:
    from_, to = between
    step_us = step_us_of(daemon.site, step_s)
    start_us, end_us = span(from_, to, daemon.clock.now_us(), step_us)
    if from_ is None:
        start_us = usual_begin_us(end_us, step_us)
    longest_us = MOST_PERIODS * daemon.site.sample_every_us
    refuse_too_many(end_us - start_us, step_us, longest_us, start_us)
    return stepped_out(daemon, channel, units, (start_us, end_us), step_us)


def _refuse_too_long(daemon: Running, length_us: int) -> None:
    longest_us = MOST_PERIODS * daemon.site.sample_every_us
    if length_us <= longest_us:
        return
    every_s = daemon.site.sample_every_us / 1e6
    raise Problem(
        "invalid-request",
        points=[
            Point(
                "query.from",
                f"{length_us / 3.6e9:.4g} h before to",
                f"one answer holds at most {longest_us / 3.6e9:.4g} h of this site "
                f"({MOST_PERIODS} readings at {every_s:g} s); ask for shorter spans in turn",
            )
        ],
    )


def _readings_out(
    series: SeriesOfReadings,
    channel: Channel,
    daemon: Running,
    units: ShownIn,
    between_us: tuple[int, int],
) -> ReadingsOut:
    shown = shown_in(channel.quantity, units, daemon.site.units)
    times = _times(series)
    values = series.values.tolist()
    if units != "si":  # in SI the recorded value goes out to the last bit
        values = [float(f"{shown.from_si(value):.{PLACES}g}") for value in values]
    return ReadingsOut.model_validate(
        {
            "channel": channel.name,
            "quantity": channel.quantity,
            "unit": shown.unit,
            "reference": reference_of(channel),
            "from": format_rfc3339(between_us[0]),
            "to": format_rfc3339(between_us[1]),
            "times": times,
            "values": values,  # NaN becomes null as it is written
            "faults": [
                FaultOut(time=times[place], reason=series.faults[place] or "not a number")
                for place in np.flatnonzero(np.isnan(series.values))
            ],
        }
    )


def _times(series: SeriesOfReadings) -> list[str]:
    """RFC 3339 in UTC; fractions of a second only where some reading has one."""
    whole = not np.any(series.times_us % 1_000_000)
    moments = series.times_us.astype("datetime64[us]")
    texts = np.datetime_as_string(moments, unit="s" if whole else "us", timezone="UTC")
    return [str(text) for text in texts]
