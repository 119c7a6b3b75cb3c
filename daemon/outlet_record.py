"""What is carried from tick to tick of one outlet."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from daemon.alarms import Condition
from daemon.moisture.ensemble import Array

HOURS_KEPT = 48


@dataclass(frozen=True, slots=True)
class GaugeHeld:
    """A painter's gauge reading while it speaks.

    What it told stands per member: a *correction* to the margin that sensors give, else the
    *surface*'s temperature, else (where nobody measures the air) the *margin* itself.
    """

    read_us: int
    until_us: int
    spread_k: float
    tells: Literal["correction", "surface", "margin"]
    values: Array  # (members,), K
    contradicts: bool = False  # it cannot be true together with the sensors


def no_past() -> Array:
    """Before any full hour."""
    return np.full((HOURS_KEPT, 2), np.nan)


@dataclass(frozen=True, slots=True)
class OutletRecord:
    """Blotter and gauge, the alarms' last look, and the air around in the last two days."""

    clean_us: int = -1  # the last clean blotter, -1 never
    water_us: int = -1  # a blotter with water, and no clean one since
    oil_us: int = -1  # the same with oil
    gauge: GaugeHeld | None = None
    looked_us: int = -1  # when the margins were last looked at for the alarms
    line: Condition = "between"  # what was found then
    surface: Condition = "between"
    # air temperature, K, and humidity ratio at the full hours, row (hours since 1970) % 48; NaN
    # where they were not known
    past: Array = field(default_factory=no_past)
