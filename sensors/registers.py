"""A register map: where a Modbus device keeps its quantities, and how they are coded.

In the site file:

    registers = { dew_point = { at = 0, type = "float32", unit = "degC" },
                  temperature = { at = 2, kind = "holding", type = "int16", scale = 0.1 } }
"""

from __future__ import annotations

import math
import struct
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, cast

from daemon import units
from sensors.modbus import Kind

QUANTITIES = ("dew_point", "temperature")
_TYPES = {"int16": (">h", 1), "uint16": (">H", 1), "int32": (">i", 2), "float32": (">f", 2)}
_DEFAULTS: dict[str, Any] = {
    "kind": "input",
    "type": "int16",
    "words": "high first",
    "scale": 1.0,
    "offset": 0.0,
    "unit": "degC",
}
_WORDS = {
    "kind": ("input", "holding"),
    "type": tuple(_TYPES),
    "words": ("high first", "low first"),
    "unit": ("degC", "degF", "K"),
}


@dataclass(frozen=True, slots=True)
class Register:
    """One quantity's place and coding: value = number x scale + offset, in the unit."""

    at: int  # as sent on the line: from 0 (a manual's "30001" is 0 of kind input)
    kind: Kind
    type: str
    words: str
    scale: float
    offset: float
    unit: str

    @property
    def count(self) -> int:
        return _TYPES[self.type][1]

    def decode_k(self, words: list[int]) -> float:
        """The temperature in K; NaN for a float that is none."""
        ordered = words if self.words == "high first" else words[::-1]
        (number,) = struct.unpack(_TYPES[self.type][0], struct.pack(f">{len(words)}H", *ordered))
        if not math.isfinite(number):
            return math.nan
        return units.to_si(number * self.scale + self.offset, self.unit, "temperature")

    def encode(self, temperature_k: float) -> list[int]:
        """The words that a device with this map would hold; the inverse of `decode_k`."""
        value = units.from_si(temperature_k, self.unit, "temperature")
        number = (value - self.offset) / self.scale
        code, count = _TYPES[self.type]
        packed = struct.pack(code, number if code == ">f" else round(number))
        words = list(struct.unpack(f">{count}H", packed))
        return words if self.words == "high first" else words[::-1]


def register_map(value: object) -> dict[str, Register]:
    """The map as the site file says it; ValueError with the first thing to correct."""
    if not isinstance(value, Mapping) or "dew_point" not in value:
        raise ValueError(
            'write the device\'s registers, like { dew_point = { at = 0, type = "float32" } }'
        )
    unknown = next((name for name in value if name not in QUANTITIES), None)
    if unknown is not None:
        raise ValueError(f'"{unknown}" is no quantity of this driver; write dew_point, temperature')
    return {name: _register(name, value[name]) for name in QUANTITIES if name in value}


def _register(name: str, value: object) -> Register:
    if not isinstance(value, Mapping):
        raise ValueError(f"{name}: write a table, like {{ at = 0 }}")
    unknown = next((key for key in value if key != "at" and key not in _DEFAULTS), None)
    if unknown is not None:
        raise ValueError(f'{name}: "{unknown}" is not known; write at, {", ".join(_DEFAULTS)}')
    at = value.get("at")
    if isinstance(at, bool) or not isinstance(at, int) or not 0 <= at <= 65535:
        raise ValueError(f"{name}: write at = a register number from 0 to 65535, as on the line")
    said = {**_DEFAULTS, **{key: value[key] for key in value if key != "at"}}
    for key, words in _WORDS.items():
        if said[key] not in words:
            raise ValueError(f"{name}: write {key} as one of " + ", ".join(f'"{w}"' for w in words))
    for key in ("scale", "offset"):
        if isinstance(said[key], bool) or not isinstance(said[key], int | float):
            raise ValueError(f"{name}: write {key} as a number")
    if not said["scale"]:
        raise ValueError(f"{name}: a scale of 0 would lose the value; write what the manual says")
    return Register(
        at,
        cast(Kind, said["kind"]),
        str(said["type"]),
        str(said["words"]),
        float(said["scale"]),
        float(said["offset"]),
        str(said["unit"]),
    )
