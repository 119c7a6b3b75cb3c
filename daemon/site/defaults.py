"""What is assumed where the site file says nothing, with the reason. SI throughout.

"Practice" is common practice, no source: starting values, to be calibrated by measured drains.
The tables in the documents are generated from here.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from daemon.moisture.description import Fixed, Share, StationKind
from daemon.moisture.kinds import (
    BAROMETER,
    HUMIDITY,
    LIKE_PRESSURE_PA,
    RISE_TIME_S,
    ROOM,
    SAME_AIR,
    TEMPERATURES,
    UsualTemperature,
)

__all__ = [
    "BAROMETER",
    "HUMIDITY",
    "LIKE_PRESSURE_PA",
    "RISE_TIME_S",
    "ROOM",
    "SAME_AIR",
    "UsualTemperature",
]

RISE_GIVE_OR_TAKE_K = TEMPERATURES["receiver"].give_or_take_k

ROOM_BECAUSE = TEMPERATURES["intake"].because
HUMIDITY_BECAUSE = "air when nobody measures it (practice)"
BAROMETER_BECAUSE = "weather at sea level; higher up say the pressure there"

CUT_IN_PA = 6e5
CUT_OUT_PA = 8e5
CUT_BECAUSE = "a common switch setting (practice)"
DELIVERED = Fixed(150e-3 / 60, 75e-3 / 60)  # m3/s
DELIVERED_BECAUSE = "a small workshop compressor (practice); the type plate says better"
OF_DISPLACEMENT = Share(0.65, 0.15)  # of a displacement, what is delivered as free air (practice)

DUTY_LIMIT_BECAUSE = "piston compressors are made to rest a quarter of the time (practice)"
LEAK_LIMIT_BECAUSE = "a tight plant loses less (practice)"
SPECIFIC_POWER = Fixed(6.5, 1.625)  # kW for a m3/min of free air
SPECIFIC_POWER_BECAUSE = "a compressor of common size (practice)"

VOLUME = Fixed(0.1, 0.05)  # m3
VOLUME_BECAUSE = "a small workshop tank; its type plate says better"

# What a number is worth when its give_or_take is not said: 95 % half-widths.
GIVE_OR_TAKE_K = 2.0
GIVE_OR_TAKE_PA = 20_000.0
GIVE_OR_TAKE_BAROMETER_PA = 1_000.0
GIVE_OR_TAKE_HUMIDITY = 0.10
GIVE_OR_TAKE_SHARES: Mapping[str, float] = {  # of the value
    "volume": 0.05,
    "capacity": 0.10,
    "free_air_delivery": 0.10,
    "set": 0.05,
    "opens_at": 0.30,
    "passes": 0.30,
    "rated_flow": 0.10,
    "mass": 0.05,
    "ice": 0.10,
}
SAID_BECAUSE = "what a value that is only said is worth (practice)"
CLOSES_AT_GIVE_OR_TAKE = 0.10  # of a float switch's level, filled with a jug (practice)

# How far a temperature or a pressure may be from plausible before it is taken for a mistake.
TEMPERATURE_LIMITS_K = (213.15, 373.15)
LINE_PRESSURE_LIMITS_PA = (0.0, 16e5)  # gauge
BAROMETER_LIMITS_PA = (50_000.0, 110_000.0)


@dataclass(frozen=True, slots=True)
class TrapDefault:
    """A trap that is there although its table is short or missing."""

    always: bool  # also when the file does not name it
    capacity_m3: float  # 0: a share of the volume
    capacity_of_volume: float
    drain_at: float  # of the capacity
    separation: Share
    because: str


@dataclass(frozen=True, slots=True)
class KindDefault:
    """All that a kind of station assumes."""

    temperature: UsualTemperature
    pressure: Literal["barometer", "switch", "before", "set"]
    trap: TrapDefault | None


CAPACITY_GIVE_OR_TAKE = 0.10

KINDS: Mapping[StationKind, KindDefault] = {
    "intake": KindDefault(TEMPERATURES["intake"], "barometer", None),
    "receiver": KindDefault(
        TEMPERATURES["receiver"],
        "switch",
        TrapDefault(True, 0.0, 0.15, 0.04, Share(0.7, 0.25), "a tank lets most liquid settle"),
    ),
    "cooler": KindDefault(
        TEMPERATURES["cooler"],
        "before",
        TrapDefault(False, 150e-6, 0.0, 0.5, Share(0.3, 0.3), "a coil without a separator"),
    ),
    "pipe": KindDefault(
        TEMPERATURES["pipe"],
        "before",
        TrapDefault(False, 300e-6, 0.0, 0.5, Share(0.6, 0.3), "take-off from the top of the main"),
    ),
    "separator": KindDefault(
        SAME_AIR,
        "before",
        TrapDefault(True, 150e-6, 0.0, 0.5, Share(0.85, 0.1), "a water separator"),
    ),
    "coalescer": KindDefault(
        SAME_AIR,
        "before",
        TrapDefault(True, 120e-6, 0.0, 0.5, Share(0.97, 0.03), "within its rated flow"),
    ),
    "regulator": KindDefault(SAME_AIR, "set", None),
    "refrigerated": KindDefault(
        TEMPERATURES["refrigerated"],
        "before",
        TrapDefault(True, 100e-6, 0.0, 0.5, Share(0.97, 0.03), "a dryer's own separator"),
    ),
    "desiccant": KindDefault(SAME_AIR, "before", None),
}
TAKE_OFF_BOTTOM = Share(0.1, 0.1)
TAKE_OFF_BOTTOM_BECAUSE = "take-off from the bottom of the main"
COOLER_WITH_SEPARATOR = Share(0.85, 0.1)
COOLER_WITH_SEPARATOR_BECAUSE = "a cooler with a separator"


@dataclass(frozen=True, slots=True)
class Usual:
    """A figure of a dryer, and what it may be said to be."""

    value: Fixed
    limits: tuple[float, float]
    because: str


REFRIGERATED = Usual(
    Fixed(276.15, 2.0), (274.15, 288.15), "the usual pressure dew point of a refrigerated dryer"
)
TWIN = Usual(Fixed(233.15, 10.0), (183.15, 283.15), "the usual one of heatless twin beds")
CARTRIDGE = Usual(
    Fixed(243.15, 10.0), (183.15, 283.15), "a cartridge that has charge left (practice)"
)
RATED_TO_DELIVERED = Fixed(1.5, 0.45)  # a dryer's rated flow to what the compressor delivers
UNRATED = Fixed(0.01, 0.003)  # m3/s, until the compressor is known
RATED_BECAUSE = "makers' ratings differ by that much (practice)"
PURGE = Share(0.175, 0.05)
PURGE_BECAUSE = "heatless beds blow off 15-20 % of the rated flow (practice)"
SILICA = Share(0.12, 0.05)
SILICA_BECAUSE = "of its mass, silica gel (practice)"
APPROACH, ICE_APPROACH, ICE_K = Fixed(5.0, 3.0), Fixed(3.0, 2.0), 273.15
APPROACH_BECAUSE = "how near air comes to what cools it (practice)"

# Profiles of work that the painter's page will know. Breathing is refused, with a reason.
WORKS = ("solvent-borne", "waterborne", "two-component", "powder", "blasting")
BREATHING = (
    "dripleg is not for breathing air: it sees water, not oil, carbon monoxide or dust. Breathing "
    "air has its own tests (EN 12021; Grade D). Name what is sprayed or blasted instead: "
    + ", ".join(WORKS)
)
SURFACE_MARGIN_K = 3.0
