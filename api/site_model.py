"""The site as the daemon understood it, as JSON. Values are SI; secrets stay out."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BaseModel, Field

from api.quantities import si_unit
from daemon.alarms import Priority
from daemon.moisture.description import (
    ML_PER_KG,
    Compressor,
    Fixed,
    Like,
    Measured,
    Outlet,
    Share,
    Source,
    Station,
    Trap,
)
from daemon.moisture.dew_sensors import channels_of
from daemon.site.fitting_words import drain_words, station_words
from daemon.site.types import (
    DAY_NAMES,
    OutletSettings,
    Signal,
    SignalKind,
    SignalPattern,
    Site,
    Units,
)
from sensors.reading import Channel
from sensors.registry import SensorConfig

GIVE_OR_TAKE = "a 95 % half-width, in the value's unit"
PLACES = 9  # significant digits kept, so that 0.1 bar is not shown as 9999.999999999998 Pa


def _clean(value: float) -> float:
    return float(f"{value:.{PLACES}g}")


class StatedOut(BaseModel):
    """A value that the site file or a default states."""

    how: Literal["stated"] = "stated"
    value: float
    unit: str
    gauge: bool = Field(description="a pressure above the atmosphere")
    give_or_take: float = Field(description=GIVE_OR_TAKE)


class MeasuredOut(BaseModel):
    """A sensor's channel."""

    how: Literal["measured"] = "measured"
    channel: str
    unit: str
    gauge: bool = Field(description="a pressure above the atmosphere")
    give_or_take: float = Field(description=GIVE_OR_TAKE)


class LikeOut(BaseModel):
    """As another station, plus a difference."""

    how: Literal["like"] = "like"
    station: str
    plus: float
    unit: str
    give_or_take: float = Field(description=GIVE_OR_TAKE)


class RiseOut(BaseModel):
    """As another station, plus a rise that follows the compressor's duty."""

    how: Literal["rise by duty"] = "rise by duty"
    station: str
    rise_at_full_duty: float
    unit: str
    time_constant_s: float
    give_or_take: float = Field(description=GIVE_OR_TAKE)


SourceOut = Annotated[StatedOut | MeasuredOut | LikeOut | RiseOut, Field(discriminator="how")]


def source_out(source: Source, unit: str) -> StatedOut | MeasuredOut | LikeOut | RiseOut:
    """Where a station's value comes from."""
    take = _clean(source.give_or_take)
    if isinstance(source, Fixed):
        return StatedOut(
            value=_clean(source.value), unit=unit, gauge=source.gauge, give_or_take=take
        )
    if isinstance(source, Measured):
        return MeasuredOut(channel=source.channel, unit=unit, gauge=source.gauge, give_or_take=take)
    if isinstance(source, Like):
        return LikeOut(
            station=source.station, plus=_clean(source.plus), unit=unit, give_or_take=take
        )
    return RiseOut(
        station=source.station,
        rise_at_full_duty=_clean(source.rise),
        unit=unit,
        time_constant_s=source.time_constant_s,
        give_or_take=take,
    )


class ShareOut(BaseModel):
    """A fraction between 0 and 1."""

    value: float
    give_or_take: float = Field(description=GIVE_OR_TAKE)

    @classmethod
    def of(cls, share: Share) -> ShareOut:
        return cls(value=share.value, give_or_take=share.give_or_take)


class FloatSwitchOut(BaseModel):
    """A float in a trap."""

    channel: str = Field(examples=["tank-float.contact"])
    closes_at_ml: float = Field(description="closed at and above this")


class TrapDescriptionOut(BaseModel):
    """A trap as described, not what it holds."""

    drain: str = Field(examples=["petcock"])
    capacity_ml: float
    capacity_give_or_take_ml: float
    drain_at_ml: float
    drain_every: str = Field(examples=["working day"])
    separation: ShareOut
    heel_ml: float
    holds_at_start_ml: float
    float_switches: list[FloatSwitchOut]

    @classmethod
    def of(cls, trap: Trap) -> TrapDescriptionOut:
        return cls(
            drain=trap.drain,
            capacity_ml=_clean(trap.capacity.value * ML_PER_KG),
            capacity_give_or_take_ml=_clean(trap.capacity.give_or_take * ML_PER_KG),
            drain_at_ml=_clean(trap.drain_at_kg * ML_PER_KG),
            drain_every=trap.drain_every,
            separation=ShareOut.of(trap.separation),
            heel_ml=_clean(trap.heel_kg * ML_PER_KG),
            holds_at_start_ml=_clean(trap.holds_at_start_kg * ML_PER_KG),
            float_switches=[
                FloatSwitchOut(
                    channel=each.channel, closes_at_ml=_clean(each.level.value * ML_PER_KG)
                )
                for each in trap.floats
            ],
        )


class StationOut(BaseModel):
    """One place along the line."""

    id: str = Field(examples=["tank"])
    kind: str = Field(examples=["receiver"])
    after: str | None = Field(description="the station upstream; null for the intake")
    temperature: SourceOut
    pressure: SourceOut
    relative_humidity: SourceOut | None
    volume: SourceOut | None
    trap: TrapDescriptionOut | None
    measured_dew_point: list[str] = Field(
        description="the channels that the dew point of its air is measured with"
    )
    fittings: list[str] = Field(
        description="in words: what its dryer, its rating, its ice and its drain are taken for",
        examples=[["rated for 333 L/min of free air, give or take 33.3 L/min"]],
    )

    @classmethod
    def of(cls, station: Station, units: Units) -> StationOut:
        humidity, volume, trap = station.relative_humidity, station.volume, station.trap
        return cls(
            id=station.id,
            kind=station.kind,
            after=station.after or None,
            temperature=source_out(station.temperature, "K"),
            pressure=source_out(station.pressure, "Pa"),
            relative_humidity=None if humidity is None else source_out(humidity, "1"),
            volume=None if volume is None else source_out(volume, "m3"),
            trap=None if trap is None else TrapDescriptionOut.of(trap),
            measured_dew_point=_dew_point_channels(station),
            fittings=_fittings(station, units),
        )


def _fittings(station: Station, units: Units) -> list[str]:
    found = [f"{what} {words}" for what, words in station_words(station, units)]
    by_itself = "" if station.trap is None else drain_words(station.trap, units)
    return [*found, f"drain {by_itself}"] if by_itself else found


def _dew_point_channels(station: Station) -> list[str]:
    point = station.measured_dew_point
    return [] if point is None else list(channels_of(point))


class OutletOut(BaseModel):
    """Where a hose connects."""

    id: str = Field(examples=["spray-gun"])
    after: str
    share: float = Field(description="of the air used")
    surroundings: str | None = Field(description="the sensor in the air around hose and surface")
    slab: str | None = Field(description="the channel of the coldest thing under the hose")
    surface: str | None = Field(description="the channel of what is sprayed or blasted")
    work: str
    line_margin_k: float | None
    surface_margin_k: float

    @classmethod
    def of(cls, place: Outlet, settings: OutletSettings) -> OutletOut:
        return cls(
            id=place.id,
            after=place.after,
            share=place.share,
            surroundings=settings.surroundings or None,
            slab=place.slab.channel if place.slab is not None else None,
            surface=place.surface.channel if place.surface is not None else None,
            work=settings.work,
            line_margin_k=settings.line_margin_k,
            surface_margin_k=settings.surface_margin_k,
        )


class ChannelOut(BaseModel):
    """One quantity that a sensor gives."""

    channel: str = Field(examples=["tank-gauge.pressure"])
    quantity: str
    unit: str
    reference: Literal["absolute", "gauge"] | None = Field(description="a pressure's; else null")
    step: float
    lowest: float
    highest: float
    give_or_take: float = Field(description=GIVE_OR_TAKE)

    @classmethod
    def of(cls, channel: Channel) -> ChannelOut:
        return cls(
            channel=channel.name,
            quantity=channel.quantity,
            unit=si_unit(channel.quantity),
            reference=reference_of(channel),
            step=channel.step,
            lowest=_clean(channel.lowest),
            highest=_clean(channel.highest),
            give_or_take=_clean(channel.give_or_take),
        )


class SensorOut(BaseModel):
    """A sensor and its channels."""

    id: str = Field(examples=["tank-gauge"])
    driver: str
    channels: list[ChannelOut]

    @classmethod
    def of(cls, sensor: SensorConfig, site: Site) -> SensorOut:
        mine = [channel for channel in site.channels.values() if channel.sensor == sensor.id]
        return cls(
            id=sensor.id, driver=sensor.driver, channels=[ChannelOut.of(each) for each in mine]
        )


class CompressorOut(BaseModel):
    """What the compressor gives while it runs."""

    delivered: SourceOut = Field(description="free air at intake conditions")
    running: str | None = Field(description="the contact channel; null: from receiver pressure")
    cut_in: SourceOut
    cut_out: SourceOut
    off_when_closed: bool

    @classmethod
    def of(cls, compressor: Compressor) -> CompressorOut:
        return cls(
            delivered=source_out(compressor.delivered, "m3/s"),
            running=compressor.running,
            cut_in=source_out(compressor.cut_in, "Pa"),
            cut_out=source_out(compressor.cut_out, "Pa"),
            off_when_closed=compressor.off_when_closed,
        )


class HoursOut(BaseModel):
    """When the shop works, in its own time zone."""

    always_open: bool
    week: dict[str, list[str]] = Field(examples=[{"mon": ["08:00-12:00", "13:00-17:30"]}])
    holidays: list[str]

    @classmethod
    def of(cls, site: Site) -> HoursOut:
        week = {
            day: [f"{_clock(start)}-{_clock(end)}" for start, end in spans]
            for day, spans in zip(DAY_NAMES, site.hours.spans, strict=True)
        }
        return cls(
            always_open=site.hours.always_open, week=week, holidays=sorted(site.hours.holidays)
        )


def _clock(minutes: int) -> str:
    return f"{minutes // 60:02d}:{minutes % 60:02d}"


class SignalOut(BaseModel):
    """A lamp or buzzer that shows the alarms."""

    kind: SignalKind
    chip: str = Field(examples=["/dev/gpiochip0"])
    line: int = Field(examples=[25])
    active: Literal["high", "low"] = Field(description="the line's level that switches it on")
    priorities: list[Priority] = Field(description="of the alarms that it shows")
    pattern: SignalPattern

    @classmethod
    def of(cls, signal: Signal) -> SignalOut:
        return cls(
            kind=signal.kind,
            chip=signal.chip,
            line=signal.line,
            active="high" if signal.active_high else "low",
            priorities=list(signal.priorities),
            pattern=signal.pattern,
        )


class DefaultOut(BaseModel):
    """A value that nobody said."""

    table: str = Field(examples=['station "tank"'])
    key: str
    value: str
    because: str


class SiteOut(BaseModel):
    """The site file as understood, every default filled in."""

    id: str = Field(examples=["alder-yard"])
    name: str
    timezone: str
    units: Units = Field(description="what people are shown")
    sample_every_s: float
    members: int = Field(description="of the ensemble that carries the uncertainty")
    hours: HoursOut
    compressor: CompressorOut
    sensors: list[SensorOut]
    stations: list[StationOut] = Field(description="in the order the air meets them")
    traps: list[str] = Field(description="the stations that have a trap, in the same order")
    outlets: list[OutletOut]
    signal: SignalOut | None = Field(description="null: no lamp and no buzzer")
    defaults: list[DefaultOut] = Field(description="values that nobody said")
    without_effect: list[str] = Field(description="keys that are checked but change nothing yet")
    remarks: list[str]

    @classmethod
    def of(cls, site: Site) -> SiteOut:
        settings = {outlet.id: outlet for outlet in site.outlets}
        return cls(
            id=site.id,
            name=site.name,
            timezone=site.timezone,
            units=site.units,
            sample_every_s=site.sample_every_us / 1e6,
            members=site.line.members,
            hours=HoursOut.of(site),
            compressor=CompressorOut.of(site.line.compressor),
            sensors=[SensorOut.of(sensor, site) for sensor in site.sensors],
            stations=[StationOut.of(station, site.units) for station in site.line.stations],
            traps=list(site.traps),
            outlets=[OutletOut.of(place, settings[place.id]) for place in site.line.outlets],
            signal=None if site.signal is None else SignalOut.of(site.signal),
            defaults=[
                DefaultOut(table=each.table, key=each.key, value=each.value, because=each.because)
                for each in site.defaults
            ],
            without_effect=list(site.without_effect),
            remarks=list(site.remarks),
        )


def reference_of(channel: Channel) -> Literal["absolute", "gauge"] | None:
    """What a pressure is measured from; None for other quantities."""
    if channel.quantity != "pressure":
        return None
    return "gauge" if channel.gauge else "absolute"
