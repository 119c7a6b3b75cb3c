"""The JSON of the outlets: whether it is dry enough there, and what people report from there.

A number's unit is in its name. Times are RFC 3339 in UTC and end in Z.
"""

from __future__ import annotations

from typing import Literal

from pydantic import BaseModel, ConfigDict, Field

from api.models import Key, Name, Time, TimeIn
from daemon.clock import format_rfc3339
from daemon.journal import Blotted, Blotter, Entry, Gauge
from daemon.outlet_payloads import outlet_payload
from daemon.views import OutletView, Verdict


class IntervalOut(BaseModel):
    """A median with its 5 to 95 % interval."""

    p05: float
    p50: float
    p95: float


class JudgementOut(BaseModel):
    """A verdict, why, and what would change it; in the site's units."""

    verdict: Verdict
    reasons: list[str]
    would_change: list[str]


class LineAirOut(JudgementOut):
    """The air in the line, before the nozzle. Null: not known."""

    pressure_gauge_bar: float | None = Field(examples=[3.0])
    pressure_dew_point_c: IntervalOut | None = Field(
        description="at that pressure; the frost point at and below 0 degC"
    )
    atmospheric_dew_point_c: IntervalOut | None
    line_margin_k: IntervalOut | None = Field(
        description="the least, over all that the air touches after the last place that takes "
        "water out, of the temperature there less the dew point there; null: an input failed"
    )
    line_margin_wanted_k: float = Field(description="dry enough from here", examples=[5.0])
    coldest: str | None = Field(
        description="where the margin is least: a station, hose or slab", examples=["slab"]
    )
    after_expansion_c: IntervalOut | None = Field(
        description="let down to the atmosphere and come to rest; not the jet's core"
    )
    carried_liquid_g_m3: IntervalOut | None = Field(
        description="per reference cubic metre (20 degC, 1 bar absolute, dry) used lately"
    )
    iso_8573_1_humidity: str = Field(
        examples=["in the range of class 4 (estimate, humidity only)", "cannot tell"]
    )


class AheadOut(BaseModel):
    """The surface margin foreseen for a time."""

    at: Time
    surface_margin_k: IntervalOut


class SurfaceOut(JudgementOut):
    """The surface, and the air around it. Null: not known."""

    air_c: IntervalOut | None
    relative_humidity_percent: IntervalOut | None
    dew_point_c: IntervalOut | None = Field(
        description="of the air around; the frost point at and below 0 degC"
    )
    surface_c: IntervalOut | None
    surface_margin_k: IntervalOut | None
    surface_margin_wanted_k: float = Field(examples=[3.0])
    surface_relative_humidity_percent: IntervalOut | None
    by_gauge_until: Time | None = Field(description="while a painter's gauge reading holds")
    ahead: list[AheadOut] = Field(description="hour by hour; empty while the margin is not known")


class BlotterResultOut(BaseModel):
    """The last blotter test that stands: a stain stands until a clean one."""

    result: Blotted
    at: Time


class OutletStateOut(BaseModel):
    """Whether it is dry enough at an outlet. The same object as over MQTT."""

    outlet: str = Field(examples=["spray-gun"])
    at: Time
    work: str | None = Field(examples=["solvent-borne"])
    verdict: Verdict = Field(description="of the air in the line and the surface together")
    speaks_of: str = Field(description="what the verdict is about, and what it is not about")
    air: LineAirOut
    surface: SurfaceOut
    holding_blast: JudgementOut | None = Field(
        description="whether a blasted surface may be left bare; null: no blasting here"
    )
    blotter: BlotterResultOut | None

    @classmethod
    def of(cls, view: OutletView) -> OutletStateOut:
        return cls.model_validate(outlet_payload(view))


class BlotterIn(BaseModel):
    """What a white absorbent showed, held in the discharge for a minute (ASTM D4285)."""

    model_config = ConfigDict(
        extra="forbid",
        strict=True,
        json_schema_extra={"examples": [{"result": "clean", "by": "AM"}, {"result": "water"}]},
    )

    result: Blotted = Field(description="any stain of oil or water rejects the air")
    at: TimeIn | None = Field(
        default=None,
        description="when it was, RFC 3339 with an offset; left out: now",
        examples=["2026-12-01T09:00:00Z"],
    )
    by: Name | None = Field(default=None, description="who looked", examples=["AM"])
    key: Key | None = Field(
        default=None,
        description="any text of your own; the same one again records nothing twice",
        examples=["phone-7c1e"],
    )


class BlotterOut(BaseModel):
    """A blotter test as it stands in the journal."""

    seq: int = Field(description="its number in the journal", examples=[43])
    outlet: str
    result: Literal["clean", "water", "oil"]
    at: Time
    written: Time
    by: str
    key: str

    @classmethod
    def of(cls, entry: Entry, body: Blotter) -> BlotterOut:
        return cls(
            seq=entry.seq,
            outlet=body.outlet,
            result=body.result,
            at=format_rfc3339(entry.at_us),
            written=format_rfc3339(entry.written_us),
            by=body.by,
            key=entry.key,
        )


class GaugeIn(BaseModel):
    """What a painter's own gauge shows: how far the surface is above the dew point around it."""

    model_config = ConfigDict(
        extra="forbid",
        strict=True,
        json_schema_extra={"examples": [{"spread_k": 4.2, "by": "AM"}, {"spread_f": 7.5}]},
    )

    spread_k: float | None = Field(
        default=None, allow_inf_nan=False, description="in kelvin (degrees Celsius of difference)"
    )
    spread_f: float | None = Field(
        default=None, allow_inf_nan=False, description="instead of spread_k, degrees Fahrenheit"
    )
    valid_min: float = Field(
        default=30.0, allow_inf_nan=False, description="how long it speaks for, minutes"
    )
    at: TimeIn | None = Field(
        default=None,
        description="when it was read, RFC 3339 with an offset; left out: now",
        examples=["2026-12-01T09:00:00Z"],
    )
    by: Name | None = Field(default=None, description="who read it", examples=["AM"])
    key: Key | None = Field(
        default=None,
        description="any text of your own; the same one again records nothing twice",
        examples=["phone-7c1e"],
    )


class GaugeOut(BaseModel):
    """A gauge reading as it stands in the journal."""

    seq: int = Field(description="its number in the journal", examples=[44])
    outlet: str
    spread_k: float
    valid_min: float
    at: Time
    written: Time
    by: str
    key: str

    @classmethod
    def of(cls, entry: Entry, body: Gauge) -> GaugeOut:
        return cls(
            seq=entry.seq,
            outlet=body.outlet,
            spread_k=body.spread_k,
            valid_min=body.valid_s / 60.0,
            at=format_rfc3339(entry.at_us),
            written=format_rfc3339(entry.written_us),
            by=body.by,
            key=entry.key,
        )
