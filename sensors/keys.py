"""What the keys of a `[[sensor]]` table may say: TOML values to checked ones.

Every reader raises ValueError that says what to write instead.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass

from daemon import units

_ABS = re.compile(r"(.*?)\s*\babs\s*\Z", re.IGNORECASE | re.DOTALL)


@dataclass(frozen=True, slots=True)
class PressureRange:
    """What a transducer's signal spans, Pa."""

    lowest_pa: float
    highest_pa: float
    gauge: bool

    @property
    def span_pa(self) -> float:
        return self.highest_pa - self.lowest_pa


def whole(lowest: int, highest: int) -> Callable[[object], int]:
    """A whole number within limits."""

    def read(value: object) -> int:
        if isinstance(value, bool) or not isinstance(value, int) or not lowest <= value <= highest:
            raise ValueError(f"write a whole number from {lowest} to {highest}")
        return value

    return read


def number(lowest: float, highest: float) -> Callable[[object], float]:
    """A number within limits."""

    def read(value: object) -> float:
        good = isinstance(value, int | float) and not isinstance(value, bool)
        if not good or not lowest <= float(value) <= highest:  # type: ignore[arg-type]  # checked
            raise ValueError(f"write a number from {lowest:g} to {highest:g}")
        return float(value)  # type: ignore[arg-type]  # checked above

    return read


def address(*allowed: int) -> Callable[[object], int]:
    """An I2C address of a part that can have only these."""
    words = " or ".join(f"0x{one:02x}" for one in allowed)

    def read(value: object) -> int:
        if isinstance(value, bool) or not isinstance(value, int) or value not in allowed:
            raise ValueError(f"write {words}, without quotes")
        return value

    return read


def choice(*words: str) -> Callable[[object], str]:
    """One of a few words."""

    def read(value: object) -> str:
        if value not in words:
            raise ValueError("write " + " or ".join(f'"{word}"' for word in words))
        return str(value)

    return read


def text(pattern: str, remedy: str) -> Callable[[object], str]:
    """A text that matches a pattern as a whole."""
    compiled = re.compile(pattern)

    def read(value: object) -> str:
        if not isinstance(value, str) or compiled.fullmatch(value) is None:
            raise ValueError(remedy)
        return value

    return read


def optional(read: Callable[[object], object]) -> Callable[[object], object]:
    """The same, where leaving the key out means None."""
    return lambda value: None if value is None else read(value)


def percent(lowest: float, highest: float) -> Callable[[object], float]:
    """`"1.5 %"` as a fraction; the limits are fractions too."""

    def read(value: object) -> float:
        share = units.parse(value, "fraction")
        if not lowest <= share <= highest:
            raise ValueError(f'write a share from "{lowest:.2%}" to "{highest:.0%}", like "1.5 %"')
        return share

    return read


def duration(lowest_s: float, highest_s: float) -> Callable[[object], float]:
    """`"20 ms"` in seconds."""

    def read(value: object) -> float:
        seconds = units.parse(value, "duration")
        if not lowest_s <= seconds <= highest_s:
            raise ValueError(f"write a time of {lowest_s:g} to {highest_s:g} s")
        return seconds

    return read


def pressure_range(value: object) -> PressureRange:
    """`"0-12 bar"`, `"0-150 psi"`, `"0 to 10 bar abs"`; gauge unless it says `abs`."""
    match = _ABS.match(value) if isinstance(value, str) else None
    lowest_pa, highest_pa = units.parse_range(match[1] if match else value, "pressure")
    gauge = match is None
    if lowest_pa < (-101_325.0 if gauge else 0.0) or highest_pa > 1e8:
        raise ValueError("write a range that is not below a vacuum and not above 1000 bar")
    return PressureRange(lowest_pa, highest_pa, gauge)


@dataclass(frozen=True, slots=True)
class TemperatureRange:
    """What a transmitter's signal spans, K."""

    lowest_k: float
    highest_k: float

    @property
    def span_k(self) -> float:
        return self.highest_k - self.lowest_k


def temperature_range(value: object) -> TemperatureRange:
    """`"-60 to 20 degC"`."""
    lowest_k, highest_k = units.parse_range(value, "temperature")
    if lowest_k < 150.0 or highest_k > 500.0:
        raise ValueError("write a range within -123 and 227 degC")
    return TemperatureRange(lowest_k, highest_k)


def quantity(kind: units.Kind, lowest: float, highest: float) -> Callable[[object], float]:
    """A quantity with its unit, in SI, within limits (SI too)."""

    def read(value: object) -> float:
        found = units.parse(value, kind)
        if not lowest <= found <= highest:
            raise ValueError(f"write a {kind} from {lowest:g} to {highest:g} in SI units")
        return found

    return read


def yes_or_no(value: object) -> bool:
    """`true` or `false`."""
    if not isinstance(value, bool):
        raise ValueError("write true or false, without quotes")
    return value
