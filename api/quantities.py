"""People's units and times at the API's edge: what is sent becomes SI, what is shown has a unit."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from daemon.clock import parse_rfc3339
from daemon.moisture.description import WATER_KG_PER_M3
from daemon.site.types import Units
from daemon.unit_tables import Kind
from daemon.units import from_si, show_volume, to_si
from sensors.reading import Quantity

VolumeUnit = Literal["ml", "L", "oz", "gal"]
ShownIn = Literal["si", "site", "metric", "us"]

# A log outside these years is a typing error or a clock that was never set.
EARLIEST_US = parse_rfc3339("1970-01-01T00:00:00Z")
LATEST_US = parse_rfc3339("2200-01-01T00:00:00Z")

_KINDS: dict[Quantity, Kind] = {
    "temperature": "temperature",
    "relative_humidity": "fraction",
    "pressure": "pressure",
    "contact": "fraction",
    "dew_point": "temperature",
    "free_air_flow": "flow",
}
# the unit in SI, for metric people, for people with US gauges
_UNITS: dict[Quantity, tuple[str, str, str]] = {
    "temperature": ("K", "degC", "degF"),
    "relative_humidity": ("1", "%", "%"),
    "pressure": ("Pa", "bar", "psi"),
    "contact": ("1", "1", "1"),
    "dew_point": ("K", "degC", "degF"),
    "free_air_flow": ("m3/s", "L/min", "cfm"),
}


@dataclass(frozen=True, slots=True)
class Shown:
    """How a quantity is shown: the unit's name, and the way there from SI."""

    unit: str
    kind: Kind

    def from_si(self, value: float) -> float:
        return from_si(value, "" if self.unit == "1" else self.unit, self.kind)


def shown_in(quantity: Quantity, units: ShownIn, site_units: Units) -> Shown:
    """How to show a quantity in SI, in the site's units, or in a named system."""
    system = site_units if units == "site" else units
    unit = _UNITS[quantity][("si", "metric", "us").index(system)]
    return Shown(unit, _KINDS[quantity])


def si_unit(quantity: Quantity) -> str:
    """The name of a quantity's SI unit; 1 for a fraction or a contact."""
    return _UNITS[quantity][0]


def kg_from_volume(volume: float, unit: VolumeUnit) -> float:
    """The mass of a volume of water, kg."""
    return to_si(volume, unit, "volume") * WATER_KG_PER_M3


def volume_of(kg: float, unit: VolumeUnit) -> float:
    """The inverse of `kg_from_volume`."""
    return from_si(kg / WATER_KG_PER_M3, unit, "volume")


def volume_words(kg: float, units: Units) -> str:
    """A mass of water as a volume for people: "410 ml", "1.2 L", "14 oz"."""
    return show_volume(kg / WATER_KG_PER_M3, units)


def time_us(text: str) -> int:
    """Microseconds since 1970 UTC from an RFC 3339 time; ValueError says what to write."""
    try:
        moment = parse_rfc3339(text)
    except ValueError as error:
        raise ValueError(f"{error}; in an address + is written %2B") from None
    if not EARLIEST_US <= moment < LATEST_US:
        raise ValueError("it is outside the years 1970 to 2199; correct the year")
    return moment
