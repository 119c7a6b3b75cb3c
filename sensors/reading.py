"""What a reading is, what a sensor must do, and how a sensor says that it failed.

A reading is in SI (K, Pa, a fraction for relative humidity, 0 or 1 for a contact). It is rounded
to its channel's step when it is made, so that the model, the store and an export carry one value.
A part that fails gives no value: a bad reading with the reason, or SensorFault.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, Protocol

from daemon.errors import DriplegError

Quantity = Literal[
    "temperature",  # K
    "relative_humidity",  # fraction of saturation over liquid water, 0-1
    "pressure",  # Pa, absolute or gauge as the channel says
    "contact",  # 0 open, 1 closed
    "dew_point",  # K, at the pressure where the transmitter sits
    "free_air_flow",  # m3/s at the meter's reference conditions
]


@dataclass(frozen=True, slots=True)
class Channel:
    """One quantity that one sensor gives, with the limits that its data sheet states (SI)."""

    name: str  # "tank-gauge.pressure", as the site file writes it
    quantity: Quantity
    step: float  # the value is a whole number of these
    lowest: float
    highest: float
    give_or_take: float  # 95 % half-width of the data sheet's error
    gauge: bool = False  # a pressure measured from the atmosphere

    @property
    def sensor(self) -> str:
        return self.name.rsplit(".", 1)[0]


@dataclass(frozen=True, slots=True)
class Reading:
    """A value of a channel at a time; NaN with a reason when it is bad and must not be used."""

    channel: str
    value: float
    time_us: int
    fault: str = ""  # empty: good; otherwise why the value must not be used

    @property
    def good(self) -> bool:
        return not self.fault


def in_steps(value: float, step: float) -> float:
    """The value rounded to its step: `count * step`, so that it survives storage to the bit."""
    return round(value / step) * step


def reading(channel: Channel, value: float, time_us: int) -> Reading:
    """A reading of `value` in the channel's steps; bad when it is not a number or out of range."""
    if not math.isfinite(value):
        return Reading(channel.name, math.nan, time_us, "not a number")
    if not channel.lowest <= value <= channel.highest:
        reason = f"out of range: {value:g} is not within {channel.lowest:g} to {channel.highest:g}"
        return Reading(channel.name, math.nan, time_us, reason)
    return Reading(channel.name, in_steps(value, channel.step), time_us)


class SensorFault(DriplegError):
    """A part did not give a reading that can be believed. The reason is short and stable."""

    def __init__(self, sensor: str, reason: str, detail: str = "") -> None:
        self.sensor = sensor
        self.reason = reason  # one of a few stable phrases, "no answer", "bad checksum" ...
        self.detail = detail
        super().__init__(f"{sensor}: {reason}" + (f" ({detail})" if detail else ""))


class Sensor(Protocol):
    """One part on one bus. Only the thread that owns the bus calls it."""

    @property
    def id(self) -> str: ...

    @property
    def channels(self) -> Sequence[Channel]: ...

    def read(self, now_us: int) -> Sequence[Reading]:
        """Readings taken now, their times after the last call's and not after `now_us`.

        A contact gives its edges since the last call with their own times, then its level at
        `now_us`; every other part gives one reading a channel at `now_us`. Raises SensorFault.
        """
        ...

    def close(self) -> None:
        """Let go of the part. May be called twice."""
        ...
