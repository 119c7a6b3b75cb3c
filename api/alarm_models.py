"""The JSON of putting alarms off."""

from __future__ import annotations

from typing import Annotated

from pydantic import BaseModel, ConfigDict, Field, StringConstraints

from api.models import Key, Name, Time
from api.problems import Point, Problem
from api.validation import shown
from daemon.clock import SECOND_US, format_rfc3339
from daemon.errors import UnitError
from daemon.journal import Entry, Shelve, Unshelve
from daemon.units import parse, show_duration

SECONDS_PER_MINUTE = 60.0


class ShelveIn(BaseModel):
    """Somebody puts an alarm off for a while."""

    model_config = ConfigDict(
        extra="forbid",
        strict=True,
        json_schema_extra={"examples": [{"for": "2 h", "by": "AM"}, {"for": 30}]},
    )

    for_: Annotated[str, StringConstraints(min_length=1, max_length=40)] | float = Field(
        alias="for",
        description="how long, like 2 h or 45 min, or as a number of minutes: at least a minute, "
        "at most a day, and at most an hour for an alarm of high priority",
    )
    by: Name | None = Field(default=None, description="who puts it off", examples=["AM"])
    key: Key | None = Field(
        default=None, description="any text of your own: the same one again records nothing twice"
    )


class UnshelveIn(BaseModel):
    """Somebody ends that before its time."""

    model_config = ConfigDict(
        extra="forbid", strict=True, json_schema_extra={"examples": [{"by": "AM"}, {}]}
    )

    by: Name | None = Field(default=None, description="who ends it", examples=["AM"])
    key: Key | None = Field(
        default=None, description="any text of your own: the same one again records nothing twice"
    )


class ShelveOut(BaseModel):
    """An alarm put off, as it stands in the journal."""

    seq: int = Field(description="its number in the journal", examples=[43])
    alarm: str = Field(examples=["tank-drain-due"])
    at: Time
    until: Time
    by: str
    key: str

    @classmethod
    def of(cls, entry: Entry, body: Shelve) -> ShelveOut:
        return cls(
            seq=entry.seq,
            alarm=body.alarm,
            at=format_rfc3339(entry.at_us),
            until=format_rfc3339(entry.at_us + round(body.for_s * SECOND_US)),
            by=body.by,
            key=entry.key,
        )


class UnshelveOut(BaseModel):
    """The early end of it, as it stands in the journal."""

    seq: int = Field(description="its number in the journal", examples=[44])
    alarm: str = Field(examples=["tank-drain-due"])
    at: Time
    by: str
    key: str

    @classmethod
    def of(cls, entry: Entry, body: Unshelve) -> UnshelveOut:
        return cls(
            seq=entry.seq,
            alarm=body.alarm,
            at=format_rfc3339(entry.at_us),
            by=body.by,
            key=entry.key,
        )


def seconds_of(body: ShelveIn, least_s: float, most_s: float) -> float:
    """For how long, s. Problem when it cannot be, with what can."""
    if isinstance(body.for_, str):
        try:
            length_s = parse(body.for_, "duration")
        except UnitError as error:
            raise _wrong(body, str(error)) from error
    else:
        length_s = body.for_ * SECONDS_PER_MINUTE
    if not least_s <= length_s <= most_s:  # nor when it is not a number
        span = f"from {show_duration(least_s)} to {show_duration(most_s)}"
        raise _wrong(body, f"this alarm can be put off for {span}")
    return length_s


def _wrong(body: ShelveIn, remedy: str) -> Problem:
    return Problem("invalid-request", points=[Point("body.for", shown(body.for_), remedy)])
