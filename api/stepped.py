"""Readings step by step: what a channel comes to in each, for charts and long spans."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from pydantic import BaseModel, Field

from api.models import Time
from api.problems import Point, Problem
from api.quantities import ShownIn, shown_in
from api.site_model import reference_of
from daemon.clock import DAY_US, HOUR_US, format_rfc3339
from daemon.site.types import Site
from daemon.views import Running, StepsOfReadings
from sensors.reading import Channel

MOST_STEPS = 10_000  # a year by the hour is 8760
LONGEST_STEP_US = 366 * DAY_US
USUAL_STEPS = 24  # without from
PLACES = 10  # significant digits: far finer than any channel's step


class SteppedOut(BaseModel):
    """What one channel comes to step by step: arrays of one length."""

    channel: str = Field(examples=["tank-gauge.pressure"])
    quantity: str = Field(examples=["pressure"])
    unit: str = Field(description="of the values; 1 for a fraction or a contact", examples=["Pa"])
    reference: str | None = Field(description="a pressure's, absolute or gauge; else null")
    from_: Time = Field(alias="from")
    to: Time = Field(description="up to, but not including it: the end of the last step")
    step_s: float = Field(description="how long a step is", examples=[3600])
    times: list[Time] = Field(description="when each step begins")
    mean: list[float | None] = Field(
        description="of the step's good readings; of a contact the share of the time for which it "
        "was closed, each edge at its own time; null where nothing is known"
    )
    least: list[float | None] = Field(description="of the good readings; null without any")
    greatest: list[float | None] = Field(description="of the good readings; null without any")
    count: list[int] = Field(description="good readings")
    bad: list[int] = Field(description="readings that must not be used")


def step_us_of(site: Site, step_s: float) -> int:
    """A step in microseconds; Problem unless it is a whole number of sampling periods."""
    every_us = site.sample_every_us
    # clipped first: beyond the largest number there is nothing to round
    step_us = round(min(max(step_s, 0.0), 1e12) * 1e6)
    if 0 < step_us <= LONGEST_STEP_US and step_us % every_us == 0:
        return step_us
    every_s = every_us / 1e6
    raise Problem(
        "invalid-request",
        points=[
            Point(
                "query.step",
                f"{step_s:g} s",
                f"give a whole number of sampling periods of {every_s:g} s, at most "
                f"{LONGEST_STEP_US / 1e6:.0f} s, like {max(every_us, HOUR_US) / 1e6:.0f}",
            )
        ],
    )


def usual_begin_us(end_us: int, step_us: int) -> int:
    """Where steps begin when nobody says: a day of hours back, at a whole multiple of the step."""
    return max(0, (end_us // step_us - USUAL_STEPS + (1 if end_us % step_us else 0)) * step_us)


def refuse_too_many(length_us: int, step_us: int, longest_us: int, from_us: int) -> None:
    """Problem when a span has too many steps, or too many readings that would have to be read."""
    steps = -(-length_us // step_us)
    if steps > MOST_STEPS:
        remedy = (
            f"one answer holds at most {MOST_STEPS} steps; ask for longer steps, or for shorter "
            "spans in turn"
        )
        raise Problem(
            "invalid-request",
            points=[Point("query.step", f"{steps} steps from from to to", remedy)],
        )
    whole_hours = step_us % HOUR_US == 0 and from_us % HOUR_US == 0
    if not whole_hours and length_us > longest_us:
        remedy = (
            f"steps that are not whole hours, begun at a full hour, may span at most "
            f"{longest_us / 3.6e9:.4g} h; ask for a multiple of 3600 from a full hour on, or for "
            "shorter spans in turn"
        )
        raise Problem(
            "invalid-request",
            points=[Point("query.from", f"{length_us / 3.6e9:.4g} h before to", remedy)],
        )


def stepped_out(
    daemon: Running, channel: Channel, units: ShownIn, between_us: tuple[int, int], step_us: int
) -> SteppedOut:
    """The answer for a span, whose last step is a whole one."""
    from_us, to_us = between_us
    steps = daemon.reading_steps(channel.name, from_us, to_us, step_us)
    shown = shown_in(channel.quantity, units, daemon.site.units)

    def values(array: npt.NDArray[np.float64]) -> list[float]:
        found: list[float] = array.tolist()
        if units == "si":
            return found
        return [float(f"{shown.from_si(value):.{PLACES}g}") for value in found]

    return SteppedOut.model_validate(
        {
            "channel": channel.name,
            "quantity": channel.quantity,
            "unit": shown.unit,
            "reference": reference_of(channel),
            "from": format_rfc3339(from_us),
            "to": format_rfc3339(from_us + len(steps.start_us) * step_us),
            "step_s": step_us / 1e6,
            "times": [format_rfc3339(time_us) for time_us in steps.start_us.tolist()],
            "mean": values(_mean(channel, steps)),
            "least": values(steps.least),
            "greatest": values(steps.greatest),
            "count": steps.count.tolist(),
            "bad": steps.bad.tolist(),
        }
    )


def _mean(channel: Channel, found: StepsOfReadings) -> npt.NDArray[np.float64]:
    return found.held_mean if channel.quantity == "contact" else found.mean
