"""The JSON that the API takes and gives, except the site, which has its own module.

A number's unit is in its name. Times are RFC 3339 in UTC and end in Z.
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field, StringConstraints

from api.quantities import VolumeUnit
from daemon.accept import LONGEST_KEY, LONGEST_NAME
from daemon.alarms import Alarm, AlarmState, Priority
from daemon.clock import format_rfc3339
from daemon.journal import Acknowledge, Entry, Outcome, Serviced
from daemon.payloads import alarm_payload, drain_payload, trap_payload
from daemon.views import Because, ChannelHealth, Health, TrapView

Time = Annotated[
    str, Field(json_schema_extra={"format": "date-time"}, examples=["2026-12-01T09:00:00Z"])
]
# as it comes in: read, and refused in words, by `api/validation.py`
TimeIn = Annotated[str, Field(json_schema_extra={"format": "date-time"})]
Look = Literal["clear", "milky", "oily", "rusty"]
_NO_CONTROLS = r"^[^\x00-\x1f\x7f-\x9f]*$"  # control characters would spoil logs and messages
Name = Annotated[
    str, StringConstraints(min_length=1, max_length=LONGEST_NAME, pattern=_NO_CONTROLS)
]
Key = Annotated[str, StringConstraints(min_length=1, max_length=LONGEST_KEY, pattern=_NO_CONTROLS)]


def _time(time_us: int | None) -> str | None:
    return None if time_us is None else format_rfc3339(time_us)


class DueOut(BaseModel):
    """When a drain is expected to be due: 5, 50 and 95 %; null beyond the forecast's horizon."""

    p05: Time | None
    p50: Time | None
    p95: Time | None
    because: Because | None = Field(
        description="what makes it due, or will make it due next; null: neither is known"
    )


class TrapOut(BaseModel):
    """What a trap holds: a median with its 5 to 95 % interval. The same object as over MQTT."""

    trap: str = Field(examples=["tank"])
    at: Time
    p05_ml: int = Field(examples=[300])
    p50_ml: int = Field(examples=[410])
    p95_ml: int = Field(examples=[560])
    capacity_ml: int = Field(examples=[15000])
    drain_at_ml: int = Field(examples=[600])
    probability_due: float = Field(
        description="the chance, 0 to 1, that it holds drain_at_ml or more", examples=[0.12]
    )
    due: DueOut
    since: Literal["start", "last drain"] = Field(description="what the estimate counts from")
    chance_stuck: float = Field(
        default=0.0,
        description="only of a drain that empties itself: the volumes are those of one that "
        "works, and this is the chance, 0 to 1, that it is stuck",
        examples=[0.02],
    )
    counted_from: Time | None = Field(
        default=None,
        description="only while the trap's contents are counted from then, because the state "
        "before could not be read: it may hold more than is said, until it is drained once",
    )
    questioned_ml: int | None = Field(
        default=None,
        description="only while a measured volume, far from what was expected, waits to be "
        "confirmed or taken back: it is not learned from",
    )

    @classmethod
    def of(cls, view: TrapView) -> TrapOut:
        return cls.model_validate(trap_payload(view))


class DrainIn(BaseModel):
    """Somebody opened a drain. Every field may be left out."""

    model_config = ConfigDict(
        extra="forbid",
        strict=True,
        json_schema_extra={
            "examples": [
                {"outcome": "emptied", "volume_ml": 380, "by": "AM", "look": "clear"},
                {"volume": 13, "unit": "oz", "key": "phone-7c1e"},
                {"outcome": "empty"},
            ]
        },
    )

    outcome: Outcome | None = Field(
        default=None,
        description="emptied: run until air came; empty: opened and nothing came; partly: some "
        "was left. Said nothing: emptied, or empty when the volume is 0",
    )
    volume_ml: float | None = Field(
        default=None, allow_inf_nan=False, description="as the cup read; left out: not measured"
    )
    volume: float | None = Field(
        default=None, allow_inf_nan=False, description="instead of volume_ml, with its unit"
    )
    unit: VolumeUnit | None = Field(
        default=None, description="of volume; oz and gal are US fluid ounces and gallons"
    )
    at: TimeIn | None = Field(
        default=None,
        description="when it happened, RFC 3339 with an offset; left out: now",
        examples=["2026-12-01T09:00:00Z"],
    )
    by: Name | None = Field(default=None, description="who opened it", examples=["AM"])
    look: Look | None = Field(default=None, description="what the water looked like")
    key: Key | None = Field(
        default=None,
        description="any text of your own; the same one again records nothing twice and is "
        "answered with the first entry",
        examples=["phone-7c1e"],
    )


class DrainOut(BaseModel):
    """A drain as it stands in the journal."""

    seq: int = Field(description="its number in the journal", examples=[41])
    trap: str = Field(examples=["tank"])
    outcome: Outcome
    volume_ml: int | None = Field(description="as the cup read; null: not measured")
    at: Time = Field(description="when it happened")
    written: Time = Field(description="when it was committed")
    by: str
    look: str
    key: str
    said: str = Field(
        default="",
        description="what was learned from the volume, when it has just been recorded",
        examples=["tank: you measured 380 ml, expected 410 ml (300 to 560 ml); ..."],
    )

    undone: Time | None = Field(
        default=None, description="when it was taken back, so that it does not count; null: it does"
    )

    @classmethod
    def of(cls, entry: Entry, said: str = "", undone: Entry | None = None) -> DrainOut:
        undone_at = None if undone is None else format_rfc3339(undone.at_us)
        return cls.model_validate({**drain_payload(entry), "said": said, "undone": undone_at})


class UndoIn(BaseModel):
    """Somebody takes back a drain that they recorded by mistake."""

    model_config = ConfigDict(
        extra="forbid", strict=True, json_schema_extra={"examples": [{"by": "AM"}]}
    )

    by: Name | None = Field(
        default=None, description="the initials that it was recorded with", examples=["AM"]
    )


class ServiceIn(BaseModel):
    """A part was changed or looked at."""

    model_config = ConfigDict(
        extra="forbid",
        strict=True,
        json_schema_extra={
            "examples": [
                {"what": "element changed", "by": "AM"},
                {"what": "sensor replaced", "sensor": "intake-air"},
            ]
        },
    )

    what: Serviced
    sensor: str | None = Field(
        default=None, max_length=80, description="which one, when a sensor was replaced"
    )
    at: TimeIn | None = Field(
        default=None,
        description="when it was done, RFC 3339 with an offset; left out: now",
        examples=["2026-12-01T09:00:00Z"],
    )
    by: Name | None = Field(default=None, description="who did it", examples=["AM"])
    key: Key | None = Field(
        default=None, description="any text of your own: the same one again records nothing twice"
    )


class SaltCheckIn(BaseModel):
    """A humidity sensor was read over a salt whose humidity is known."""

    model_config = ConfigDict(
        extra="forbid",
        strict=True,
        json_schema_extra={"examples": [{"reads_percent": 77.1, "true_percent": 75.4}]},
    )

    reads_percent: float = Field(ge=0.0, le=100.0, description="relative humidity as it read")
    true_percent: float = Field(gt=0.0, lt=100.0, description="relative humidity as it was")
    by: Name | None = Field(default=None, description="who did it", examples=["AM"])


class RecordedOut(BaseModel):
    """An entry as it stands in the journal."""

    seq: int = Field(description="its number in the journal", examples=[42])
    at: Time = Field(description="when it happened")

    @classmethod
    def of(cls, entry: Entry) -> RecordedOut:
        return cls(seq=entry.seq, at=format_rfc3339(entry.at_us))


class AlarmOut(BaseModel):
    """An alarm as it stands."""

    id: str = Field(examples=["tank-drain-due"])
    kind: str = Field(examples=["drain-due"])
    source: str = Field(examples=["tank"])
    state: AlarmState
    priority: Priority
    since: Time = Field(description="when it took this state")
    shelved_until: Time | None = Field(description="until when it is put off; null: it is not")
    text: str = Field(description="what is so, how sure, and what to do")

    @classmethod
    def of(cls, alarm: Alarm) -> AlarmOut:
        return cls.model_validate(alarm_payload(alarm))


class AcknowledgeIn(BaseModel):
    """Somebody has seen an alarm."""

    model_config = ConfigDict(
        extra="forbid", strict=True, json_schema_extra={"examples": [{"by": "AM"}, {}]}
    )

    by: Name | None = Field(default=None, description="who has seen it", examples=["AM"])


class AcknowledgeOut(BaseModel):
    """An acknowledgement as it stands in the journal; the alarm follows at the next tick."""

    seq: int = Field(description="its number in the journal", examples=[42])
    alarm: str = Field(examples=["tank-drain-due"])
    at: Time
    by: str

    @classmethod
    def of(cls, entry: Entry, body: Acknowledge) -> AcknowledgeOut:
        return cls(seq=entry.seq, alarm=body.alarm, at=format_rfc3339(entry.at_us), by=body.by)


class ChannelHealthOut(BaseModel):
    """The last thing that a channel said."""

    channel: str = Field(examples=["tank-gauge.pressure"])
    last_good_at: Time | None
    value: float | None = Field(description="of the last good reading, SI")
    unit: str = Field(examples=["Pa"])
    fault: str = Field(description="why the latest reading is bad; empty while it is good")

    @classmethod
    def of(cls, channel: ChannelHealth, unit: str) -> ChannelHealthOut:
        return cls(
            channel=channel.channel,
            last_good_at=_time(channel.time_us),
            value=channel.value,
            unit=unit,
            fault=channel.fault,
        )


class HealthOut(BaseModel):
    """Whether the daemon does its job, and what is wrong when it does not."""

    ok: bool
    problems: list[str] = Field(description="what is wrong, in words; empty when all is well")
    at: Time
    started_at: Time
    last_tick_at: Time | None
    ticks: int
    channels: list[ChannelHealthOut]
    mqtt: Literal["off", "connected", "not connected"]
    outbox_waiting: int = Field(description="messages that the broker has not yet acknowledged")

    @classmethod
    def of(cls, health: Health, units: dict[str, str]) -> HealthOut:
        return cls(
            ok=health.ok,
            problems=list(health.problems),
            at=format_rfc3339(health.at_us),
            started_at=format_rfc3339(health.started_us),
            last_tick_at=_time(health.last_tick_us),
            ticks=health.ticks,
            channels=[
                ChannelHealthOut.of(channel, units.get(channel.channel, ""))
                for channel in health.channels
            ],
            mqtt=health.mqtt,
            outbox_waiting=health.outbox_waiting,
        )


class FaultOut(BaseModel):
    """A reading that must not be used."""

    time: Time
    reason: str = Field(examples=["no answer"])


class ReadingsOut(BaseModel):
    """Readings of one channel: two arrays of one length, and the faults with their reasons."""

    channel: str = Field(examples=["tank-gauge.pressure"])
    quantity: str = Field(examples=["pressure"])
    unit: str = Field(description="of the values; 1 for a fraction or a contact", examples=["Pa"])
    reference: Literal["absolute", "gauge"] | None = Field(description="a pressure's; else null")
    from_: Time = Field(alias="from")
    to: Time = Field(description="up to, but not including it")
    times: list[Time]
    values: list[float | None] = Field(description="null where the reading is bad")
    faults: list[FaultOut]
