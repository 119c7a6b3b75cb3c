"""Quantities as people write them, into SI; and SI shown in the units on people's gauges.

A pressure is what a gauge shows (above the atmosphere) unless it says `abs`. A difference of
temperatures is its own kind: "5 degF" as a difference is 2.78 K.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from daemon.errors import UnitError
from daemon.unit_tables import EXAMPLES, SPELLINGS, UNITS, Kind

__all__ = [
    "Kind",
    "People",
    "Pressure",
    "canonical_unit",
    "from_si",
    "parse",
    "parse_pressure",
    "parse_range",
    "recorded_from_si",
    "recorded_many_to_si",
    "recorded_to_si",
    "recorded_units",
    "show_barometer",
    "show_difference",
    "show_duration",
    "show_flow",
    "show_mass",
    "show_percent",
    "show_pressure",
    "show_pressure_difference",
    "show_temperature",
    "show_volume",
    "to_si",
    "units_of",
]

People = Literal["metric", "us"]
Values = npt.NDArray[np.float64]

_NUMBER = r"[+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?"
_QUANTITY = re.compile(rf"({_NUMBER})\s*(.*)\Z", re.DOTALL)
_RANGE = re.compile(rf"({_NUMBER})\s*(?:-|to|\.\.)\s*({_NUMBER})\s*(.*)\Z", re.DOTALL)
_REFERENCE = re.compile(
    r"(.*?)\s*(?:\(\s*(abs|absolute|a|gauge|g)\s*\)|(abs|absolute|gauge))\Z", re.IGNORECASE
)
_SHORT_REFERENCE = re.compile(r"(bar|psi|kPa|MPa|hPa|mbar)\s*([ag])\Z", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Pressure:
    """A pressure as it was written."""

    value_pa: float
    gauge: bool  # above the atmosphere, whether it said so or said nothing
    said: bool  # whether it said "abs" or "gauge" itself


def parse(text: object, kind: Kind) -> float:
    """The SI value of what a person wrote, e.g. `parse("60 gal", "volume")` in m3.

    A bare number is taken for a fraction only. For pressures see `parse_pressure`: this takes
    pressure differences. Raises UnitError with what was found, what was expected and an example.
    """
    if kind == "pressure":
        raise TypeError("gauge or absolute matters: use parse_pressure")
    number, unit = _split(text, kind)
    return _to_si(text, number, unit, kind)


def parse_pressure(text: object) -> Pressure:
    """A pressure and what it is measured from: the atmosphere unless it says "abs"."""
    number, unit = _split(text, "pressure")
    unit, reference = _split_reference(unit)
    value_pa = _to_si(text, number, unit, "pressure")
    return Pressure(value_pa, gauge=reference != "abs", said=reference != "")


def parse_range(text: object, kind: Kind) -> tuple[float, float]:
    """Both ends in SI of "0-12 bar", "0 to 175 psi" or "-1..10 bar"; the lower one first.

    Pressures are as the words in the range say: use this for a part's own scale, where gauge or
    absolute is said elsewhere ("abs" and "gauge" in the text are refused).
    """
    match = _RANGE.match(_clean(text)) if isinstance(text, str) else None
    if match is None:
        example = EXAMPLES[kind].split('"')[1]
        raise UnitError(f'{_quoted(text)} is not a range; write it like "0-{example}"')
    low, high = (_to_si(text, float(end), match[3], kind) for end in match.groups()[:2])
    if not low < high:
        raise UnitError(f"{_quoted(text)}: a range begins with its lower end and has a width")
    return low, high


def canonical_unit(unit: str, kind: Kind) -> str | None:
    """The one name of a unit however it is spelled; None when it is no unit of that kind."""
    unit = " ".join(unit.replace("³", "3").replace("^3", "3").split())
    names = UNITS[kind]
    if unit in names:
        return unit
    if unit.lower() == "mpa":  # "mPa" would be a thousandth of a pascal: never guessed
        return "MPa" if unit == "MPA" and "MPa" in names else None
    spelled = SPELLINGS.get(unit.lower().replace("º", "°"))
    if spelled is None and "/" in unit:
        spelled = _spelled_flow(unit)
    if spelled is not None:
        return spelled if spelled in names else None
    return next((name for name in names if name.lower() == unit.lower()), None)


def to_si(value: float, unit: str, kind: Kind) -> float:
    """A number in a named unit (its one name, as in `units_of`) to SI; gauge stays gauge."""
    times, over, before = UNITS[kind][unit]
    return (value + before) * times / over


def from_si(value: float, unit: str, kind: Kind) -> float:
    """The inverse of `to_si`."""
    times, over, before = UNITS[kind][unit]
    return value * over / times - before


def units_of(kind: Kind) -> tuple[str, ...]:
    """The names of a kind's units."""
    return tuple(UNITS[kind])


def _quoted(text: object) -> str:
    if isinstance(text, bool):
        return "true" if text else "false"
    return f'"{text}"' if isinstance(text, str) else str(text)


def _clean(text: str) -> str:
    return text.replace("\u2212", "-").replace("\u00a0", " ").strip()


def _split(text: object, kind: Kind) -> tuple[float, str]:
    """The number and the rest of a quantity as written."""
    example = EXAMPLES[kind]
    if isinstance(text, bool) or not isinstance(text, str | int | float):
        raise UnitError(f"{_quoted(text)} is not a {kind}; write it like {example}")
    if not isinstance(text, str):
        if kind != "fraction":
            raise UnitError(f"{text} has no unit; a {kind} is written in quotes, like {example}")
        return _finite(text, float(text)), ""
    if not text.strip():
        raise UnitError(f"nothing is written where a {kind} belongs; write it like {example}")
    match = _QUANTITY.match(_clean(text))
    if match is None:
        raise UnitError(
            f"{_quoted(text)} does not begin with a number; write a {kind} like {example}"
        )
    if match[2].startswith(","):
        raise UnitError(
            f"{_quoted(text)} has a comma in its number; "
            f"write decimals with a point and thousands without a sign, like {example}"
        )
    return _finite(text, float(match[1])), match[2].strip()


def _finite(text: object, number: float) -> float:
    if not math.isfinite(number):
        raise UnitError(f"{_quoted(text)} is not a finite number")
    return number


def _to_si(text: object, number: float, unit: str, kind: Kind) -> float:
    name = canonical_unit(unit, kind)
    if name is None:
        raise UnitError(_wrong_unit(text, unit, kind))
    return _finite(text, to_si(number, name, kind))


def _wrong_unit(text: object, unit: str, kind: Kind) -> str:
    """What to say about a unit that does not fit."""
    if not unit:
        return f"{_quoted(text)} has no unit; write a {kind} like {EXAMPLES[kind]}"
    if unit.lower() in ("scfm", "nl/min", "nm3/h", "sl/min", "slpm"):
        return (
            f'{_quoted(text)}: "{unit}" means different volumes to different makers; '
            f"write the free air drawn in, like {EXAMPLES['flow']}"
        )
    bare, reference = _split_reference(unit)
    if reference and canonical_unit(bare, kind) and kind != "pressure":
        return f'{_quoted(text)} is a {kind}, which has no "{reference}"; leave that word out'
    for other in UNITS:
        if canonical_unit(bare, other) is not None and other != "pressure difference":
            return f"{_quoted(text)} is a {other}, but a {kind} belongs here, like {EXAMPLES[kind]}"
    known = ", ".join(name for name in UNITS[kind] if name)
    return f'{_quoted(text)}: "{unit}" is not a unit of {kind}; known are {known}'


def _spelled_flow(unit: str) -> str | None:
    """A flow's name from its parts: "litres/hour" is not one, "l/minute" is L/min."""
    volume, _, time = unit.partition("/")
    return f"{canonical_unit(volume.strip(), 'volume')}/{canonical_unit(time.strip(), 'duration')}"


def _split_reference(unit: str) -> tuple[str, str]:
    """A pressure's unit without its "abs" or "gauge", and which of them it said ("" neither)."""
    match = _SHORT_REFERENCE.match(unit)
    if match is None:
        match = _REFERENCE.match(unit)
    if match is None:
        return unit, ""
    word = next(group for group in match.groups()[1:] if group)
    return match[1].strip(), "abs" if word.lower().startswith("a") else "gauge"


# --- shown to people ---------------------------------------------------------------------------


def show_temperature(temperature_k: float, people: People) -> str:
    """ "20.0 degC" or "68.0 degF"."""
    return _shown(temperature_k, "degF" if people == "us" else "degC", "temperature", decimals=1)


def show_difference(difference_k: float, people: People) -> str:
    """A difference of temperatures: "3 K" or "5.4 degF"."""
    unit = "degF" if people == "us" else "K"
    return _shown(difference_k, unit, "temperature difference", decimals=1)


def show_pressure(pressure_pa: float, people: People, *, gauge: bool) -> str:
    """ "8 bar" or "116 psi" as a gauge shows it; "9.01 bar abs" when it is absolute."""
    unit, decimals = ("psi", 1) if people == "us" else ("bar", 2)
    return _shown(pressure_pa, unit, "pressure", decimals) + ("" if gauge else " abs")


def show_barometer(pressure_pa: float, people: People) -> str:
    """The atmosphere's own pressure or a small part of it: "1013 hPa" or "29.92 inHg"."""
    unit, decimals = ("inHg", 2) if people == "us" else ("hPa", 0)
    return _shown(pressure_pa, unit, "pressure", decimals)


def show_pressure_difference(difference_pa: float, people: People) -> str:
    """ "0.05 bar" or "0.7 psi"."""
    unit, decimals = ("psi", 1) if people == "us" else ("bar", 2)
    return _shown(difference_pa, unit, "pressure difference", decimals)


def show_volume(volume_m3: float, people: People) -> str:
    """Three figures: "410 ml", "15 L", "13.9 oz", "60 gal"."""
    small, large, limit_m3 = ("oz", "gal", 1.9e-3) if people == "us" else ("ml", "L", 1e-3)
    return _figures(volume_m3, small if abs(volume_m3) < limit_m3 else large, "volume")


def show_flow(flow_m3_s: float, people: People) -> str:
    """Three figures: "150 L/min" or "5.3 cfm"."""
    return _figures(flow_m3_s, "cfm" if people == "us" else "L/min", "flow")


def show_mass(mass_kg: float, people: People) -> str:
    """Three figures: "1.5 kg" or "3.31 lb"."""
    return _figures(mass_kg, "lb" if people == "us" else "kg", "mass")


def show_duration(duration_s: float) -> str:
    """In the largest unit that it has a whole number of, at most days: "10 s", "30 min"."""
    for unit, size_s in (("days", 86400), ("h", 3600), ("min", 60)):
        if duration_s >= size_s and duration_s % size_s == 0:
            text = f"{duration_s / size_s:g} {unit}"
            return "1 day" if text == "1 days" else text
    return f"{duration_s:g} s"


def show_percent(fraction: float) -> str:
    """Three figures: "50 %"."""
    return f"{_plain(float(f'{fraction * 100:.3g}'))} %"


def _plain(value: float) -> str:
    """Without an exponent, without trailing zeros, and never "-0"."""
    text = f"{value:f}".rstrip("0").rstrip(".")
    return "0" if text == "-0" else text


def _shown(value: float, unit: str, kind: Kind, decimals: int) -> str:
    return f"{_plain(round(from_si(value, unit, kind), decimals))} {unit}"


def _figures(value: float, unit: str, kind: Kind) -> str:
    return f"{_plain(float(f'{from_si(value, unit, kind):.3g}'))} {unit}"


# --- recorded readings -------------------------------------------------------------------------

_RECORDED: dict[str, tuple[str, ...]] = {
    "temperature": ("degC", "degF", "K"),
    "dew_point": ("degC", "degF", "K"),
    "relative_humidity": ("%",),
    "pressure": ("bar", "psi", "kPa", "Pa", "barg", "psig", "bara", "psia"),
    "contact": ("",),
    "free_air_flow": ("L/min", "L/s", "cfm", "m3/h", "m3/min", "m3/s"),
}
_RECORDED_KIND: dict[str, Kind] = {
    "temperature": "temperature",
    "dew_point": "temperature",
    "relative_humidity": "fraction",
    "pressure": "pressure",
    "free_air_flow": "flow",
}


def recorded_units(quantity: str) -> tuple[str, ...]:
    """The units that a recorded reading of a channel's quantity may have; "" for contacts."""
    return _RECORDED[quantity]


def recorded_to_si(value: float, unit: str, quantity: str, *, gauge: bool) -> float:
    """A recorded value in SI as its channel gives it (a gauge channel's pressure stays gauge).

    `quantity` and `gauge` are the channel's. A plain "bar" is what the channel is by itself;
    "barg" and "bara" say which they are, and must then be the same as the channel's: between the
    two stands the barometer's pressure of that moment, which one row does not know. UnitError.
    """
    if unit not in _RECORDED[quantity]:
        known = ", ".join(name or "an empty unit" for name in _RECORDED[quantity])
        raise UnitError(f'unit "{unit}" does not fit a {_words(quantity)}; expected {known}')
    if quantity == "contact":
        if value not in (0.0, 1.0):
            raise UnitError(f"{value:g} is not a contact's state; expected 1 (closed) or 0 (open)")
        return value
    if quantity == "pressure" and unit[:3] in ("bar", "psi") and len(unit) == 4:
        if (unit[3] == "g") != gauge:
            raise UnitError(_other_reference(value, unit, gauge))
        unit = unit[:3]
    return to_si(value, unit, _RECORDED_KIND[quantity])


def recorded_many_to_si(values: Values, unit: str, quantity: str) -> Values:
    """The same for an array of values, in a unit that is the channel's own; contacts are left as
    they are."""
    if quantity == "contact":
        return values
    if quantity == "pressure" and unit[:3] in ("bar", "psi"):
        unit = unit[:3]
    times, over, before = UNITS[_RECORDED_KIND[quantity]][unit]
    return (values + before) * times / over


def recorded_from_si(value: float, quantity: str, *, gauge: bool) -> tuple[float, str]:
    """A channel's SI value as a recorded number and unit; `recorded_to_si` reads it back."""
    if quantity == "contact":
        return value, ""
    unit = _RECORDED[quantity][0]
    number = from_si(value, unit, _RECORDED_KIND[quantity])
    if quantity == "pressure":
        unit = "barg" if gauge else "bara"
    return number, unit


def _words(quantity: str) -> str:
    return quantity.replace("_", " ") + (" reading" if quantity != "contact" else "")


def _other_reference(value: float, unit: str, gauge: bool) -> str:
    found, channel = ("absolute", "gauge") if gauge else ("gauge", "absolute")
    mine = unit[:3] + ("g" if gauge else "a")
    step = "take the barometer's pressure at that time off" if gauge else "add the barometer's"
    return (
        f"{value:g} {unit} is {found}, but the channel is {channel}: "
        f"{step} and write it in {mine} (a standard atmosphere would be off by up to 6 %)"
    )
