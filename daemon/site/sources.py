"""Reads where a value comes from: a channel, a literal, a table, or a rule like another station."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from daemon.moisture.description import Fixed, Like, Measured, RiseByDuty, Source
from daemon.site import defaults
from daemon.site.names import Names
from daemon.site.table import Table
from daemon.site.values import quantity
from daemon.site.widths import OF_FRACTION, OF_PRESSURE, OF_TEMPERATURE, Width, give_or_take
from daemon.units import parse, parse_pressure, show_barometer, show_duration
from sensors.reading import Channel, Quantity

KEYS = ("value", "channel", "like", "plus", "rise_by_duty", "time_constant", "give_or_take")


@dataclass(frozen=True, slots=True)
class Spec:
    """What may stand for one kind of value."""

    quantity: Quantity
    literal: Callable[[object], Fixed]  # with the give or take of a value that is only said
    width: Width  # of a give_or_take and a plus
    fits: Callable[[Channel], str] = lambda channel: ""  # why a channel cannot stand here


@dataclass(frozen=True, slots=True)
class Rules:
    """Which rules may stand at a station, and what they assume."""

    like_give_or_take: float  # of a `like` without give_or_take
    like: bool = True
    rise_by_duty: bool = False
    unlike: str = "the line begins at the intake"  # why no `like` may stand here


def _temperature(raw: object) -> Fixed:
    value = parse(raw, "temperature")
    lowest, highest = defaults.TEMPERATURE_LIMITS_K
    if not lowest <= value <= highest:
        raise ValueError("is no temperature of a shop's air: -60 to 100 degC (-76 to 212 degF)")
    return Fixed(value, defaults.GIVE_OR_TAKE_K)


def line_pressure(raw: object) -> Fixed:
    """A pressure in the line, gauge unless it says "abs"."""
    pressure = parse_pressure(raw)
    lowest, highest = defaults.LINE_PRESSURE_LIMITS_PA
    offset = 0.0 if pressure.gauge else defaults.BAROMETER.value
    if not lowest <= pressure.value_pa - offset <= highest:
        raise ValueError("is no pressure of a shop's line: 0 to 16 bar (0 to 232 psi) gauge")
    return Fixed(pressure.value_pa, defaults.GIVE_OR_TAKE_PA, gauge=pressure.gauge)


def gauge_pressure(raw: object) -> Fixed:
    """A setting that somebody reads off a gauge: "abs" is refused."""
    fixed = line_pressure(raw)
    if not fixed.gauge:
        raise ValueError('is read off a gauge: write what the gauge shows, without "abs"')
    return fixed


def _barometer(raw: object) -> Fixed:
    """The atmosphere at the shop, absolute whether it says so or not."""
    pressure = parse_pressure(raw)
    lowest, highest = defaults.BAROMETER_LIMITS_PA
    if pressure.said and pressure.gauge:
        raise ValueError('the barometer\'s pressure is absolute; leave "gauge" out')
    if not lowest <= pressure.value_pa <= highest:
        raise ValueError(
            "is no barometer's pressure: write the atmosphere where the shop stands "
            '(not corrected to sea level), 500 to 1100 hPa, like "1013 hPa"'
        )
    return Fixed(pressure.value_pa, defaults.GIVE_OR_TAKE_BAROMETER_PA)


def humidity(raw: object) -> Fixed:
    """A relative humidity over liquid water."""
    value = parse(raw, "fraction")
    if not 0.0 <= value <= 1.0:
        raise ValueError('relative humidity lies between 0 and 100 %; write it like "50 %"')
    return Fixed(value, defaults.GIVE_OR_TAKE_HUMIDITY)


def is_barometer(channel: Channel) -> bool:
    """Whether a channel measures the atmosphere and cannot stand in a line."""
    return channel.quantity == "pressure" and not channel.gauge and channel.highest <= 120_000.0


def _fits_line(channel: Channel) -> str:
    if is_barometer(channel):
        return "is a barometer: it cannot stand in the line; name a pressure transducer"
    return ""


def _fits_intake(channel: Channel) -> str:
    if channel.gauge or channel.lowest > defaults.BAROMETER_LIMITS_PA[1]:
        return "measures the line, but the intake's pressure is the barometer's; name a barometer"
    return ""


TEMPERATURE = Spec("temperature", _temperature, OF_TEMPERATURE)
PRESSURE = Spec("pressure", line_pressure, OF_PRESSURE, _fits_line)
BAROMETER = Spec(
    "pressure", _barometer, Width("pressure difference", show_barometer, True, 6e4), _fits_intake
)
HUMIDITY = Spec("relative_humidity", humidity, OF_FRACTION)


def read_source(table: Table, key: str, spec: Spec, rules: Rules, names: Names) -> Source | None:
    """What a key says; None when it is absent, or wrong (then it is broken)."""
    raw = table.values.get(key)
    if raw is None:
        return None
    if isinstance(raw, dict):
        return _from_table(table, key, spec, rules, names)
    if isinstance(raw, str) and names.is_channel(raw):
        return table.read(key, lambda name: _measured(names, spec, name), None)
    fixed = table.read(key, spec.literal, None)
    if fixed is not None:
        shown = spec.width.show(fixed.give_or_take, table.notes.units)
        table.default(f"{key}.give_or_take", shown, defaults.SAID_BECAUSE)
    return fixed


def _measured(names: Names, spec: Spec, name: object) -> Measured:
    if not isinstance(name, str):
        raise ValueError('must be a channel in quotes, "sensor.quantity"')
    channel = names.channel(name, spec.quantity)
    unfit = spec.fits(channel)
    if unfit:
        raise ValueError(unfit)
    return Measured(channel.name, channel.give_or_take, channel.gauge)


def _from_table(table: Table, key: str, spec: Spec, rules: Rules, names: Names) -> Source | None:
    inner = table.sub(key, KEYS)
    forms = [form for form in ("value", "channel", "like") if form in inner.values]
    source: Source | None = None
    if len(forms) != 1:
        if not inner.broken:  # a misspelt key has been told already
            table.wrong(key, _which_form(forms, rules))
    elif forms == ["value"]:
        source = _fixed(inner, spec)
    elif forms == ["channel"]:
        source = _channel(inner, spec, names)
    else:
        source = _rule(inner, spec, rules, names)
    if source is None or inner.broken:
        table.broken.add(key)
        return None
    return source


def _which_form(forms: Sequence[str], rules: Rules) -> str:
    known = 'value = "...", channel = "..." or like = "..."' if rules.like else "value or channel"
    if forms:
        return f"says {' and '.join(forms)}; keep one of them"
    return f"does not say where the value comes from; write {known}"


def _surplus(inner: Table, form: str, *others: str) -> None:
    """Keys that say nothing in this form."""
    for other in others:
        if other in inner.values and not inner.broken:
            inner.wrong(other, f"says nothing beside {form}; take it out")


def _fixed(inner: Table, spec: Spec) -> Source | None:
    _surplus(inner, "value", "plus", "rise_by_duty", "time_constant")
    fixed = inner.read("value", spec.literal, None)
    if fixed is None:
        return None
    width = give_or_take(inner, spec.width, fixed.value, fixed.give_or_take, defaults.SAID_BECAUSE)
    return Fixed(fixed.value, width, fixed.gauge)


def _channel(inner: Table, spec: Spec, names: Names) -> Source | None:
    _surplus(inner, "channel", "plus", "rise_by_duty", "time_constant")
    measured = inner.read("channel", lambda name: _measured(names, spec, name), None)
    if measured is None:
        return None
    width = give_or_take(inner, spec.width, None, measured.give_or_take, "")
    return Measured(measured.channel, width, measured.gauge)


def _rule(inner: Table, spec: Spec, rules: Rules, names: Names) -> Source | None:
    if not rules.like:
        inner.wrong("like", f"{rules.unlike}: name a channel or write a value")
        return None
    station = inner.read("like", names.station, "")
    if "rise_by_duty" in inner.values:
        return _rise(inner, rules, station)
    _surplus(inner, "like without rise_by_duty", "time_constant")
    zero = spec.width.show(0.0, inner.notes.units)
    widest = spec.width.widest
    plus = inner.value(
        "plus",
        quantity(spec.width.kind, -widest, widest, "no such difference in a shop's line"),
        0.0,
        zero,
        "nothing else is said",
    )
    because = "what a guess by another station is worth (practice)"
    width = give_or_take(inner, spec.width, None, rules.like_give_or_take, because)
    return Like(station, plus, width)


def _rise(inner: Table, rules: Rules, station: str) -> Source | None:
    if not rules.rise_by_duty:
        inner.wrong("rise_by_duty", "belongs to a receiver's temperature; write plus instead")
        return None
    _surplus(inner, "rise_by_duty", "plus")
    most = quantity("temperature difference", 0.0, 60.0, "a tank warms by 0 to 60 K")
    rise = inner.read("rise_by_duty", most, 0.0)
    shown = show_duration(defaults.RISE_TIME_S)
    because = "how fast a tank warms (estimate)"
    lag = inner.value("time_constant", _lag, defaults.RISE_TIME_S, shown, because)
    width = give_or_take(inner, OF_TEMPERATURE, None, defaults.RISE_GIVE_OR_TAKE_K, because)
    return RiseByDuty(station, rise, lag, width)


def _lag(raw: object) -> float:
    value = parse(raw, "duration")
    if not 1.0 <= value <= 86400.0:
        raise ValueError('a time constant is from 1 s to 1 day; write it like "30 min"')
    return value
