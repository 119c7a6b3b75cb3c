"""What a station of a kind is taken to be where nothing better is known. SI; practice, no source.

The site file's defaults are made of this, and so is what stands in for a sensor that falls silent.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from daemon.moisture.description import Fixed, StationKind

ROOM = Fixed(293.15, 10.0)  # K, a shop's air
HUMIDITY = Fixed(0.50, 0.30)  # its relative humidity
BAROMETER = Fixed(101_300.0, 3_000.0)  # Pa, weather at sea level
RISE_K, RISE_TIME_S = 20.0, 1800.0  # of a tank at full duty
LIKE_PRESSURE_PA = 5_000.0  # half-width of a pressure that is like another


@dataclass(frozen=True, slots=True)
class UsualTemperature:
    """A value of its own, or like another place plus a difference; a 95 % half-width."""

    like: Literal["", "intake", "before", "duty"]  # "duty": the intake's plus a rise by duty
    plus_k: float
    give_or_take_k: float
    because: str


SAME_AIR = UsualTemperature("before", 0.0, 1.0, "small, close to the station before it")

TEMPERATURES: Mapping[StationKind, UsualTemperature] = {
    "intake": UsualTemperature(
        "", 0.0, ROOM.give_or_take, "a shop's air when nobody measures it (practice)"
    ),
    "receiver": UsualTemperature(
        "duty", RISE_K, 8.0, "a tank warms while its compressor works (estimate)"
    ),
    "cooler": UsualTemperature("intake", 8.0, 5.0, "a cooler stays some kelvin above its room"),
    "pipe": UsualTemperature("intake", 0.0, 4.0, "a pipe takes the temperature of its room"),
    "separator": SAME_AIR,
    "coalescer": SAME_AIR,
    "regulator": SAME_AIR,
    "refrigerated": UsualTemperature(
        "before", 0.0, 3.0, "its outlet is warmed up again by its inlet"
    ),
    "desiccant": SAME_AIR,
}
