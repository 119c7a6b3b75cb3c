"""A line as the model understands it: stations in order, their sources, traps and outlets.

All values SI: K, Pa, m3, kg of water (1 kg is taken as 1 L), s. A `give_or_take` is a 95 %
half-width (k = 2) in the unit of its value. The site file's parser builds these; nothing here reads
a file.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

WATER_KG_PER_M3 = 1000.0  # liquid water; 0.2 % at 20 degC, far below any cup's error
ML_PER_KG = 1e6 / WATER_KG_PER_M3

StationKind = Literal[
    "intake",
    "receiver",
    "cooler",
    "pipe",
    "separator",
    "coalescer",
    "regulator",
    "refrigerated",
    "desiccant",
]
DrainKind = Literal["petcock", "float", "timer", "level", "pressure-off", "none"]


@dataclass(frozen=True, slots=True)
class Fixed:
    """A value that a person or a default states: `"8 bar"`."""

    value: float
    give_or_take: float
    gauge: bool = False  # a pressure above the atmosphere that the intake's barometer measures


@dataclass(frozen=True, slots=True)
class Measured:
    """A sensor's channel. `give_or_take` is the site file's, or the data sheet's."""

    channel: str
    give_or_take: float
    gauge: bool = False
    plus: float = 0.0  # the place is so much above what the sensor measures: a cooler's approach
    plus_give_or_take: float = 0.0


@dataclass(frozen=True, slots=True)
class Like:
    """As another station, plus a difference."""

    station: str
    plus: float
    give_or_take: float


@dataclass(frozen=True, slots=True)
class RiseByDuty:
    """As another station, plus a rise that follows the compressor's duty with a first-order lag."""

    station: str
    rise: float  # K at duty 1
    time_constant_s: float
    give_or_take: float  # K, of the whole


Source = Fixed | Measured | Like | RiseByDuty


@dataclass(frozen=True, slots=True)
class VentedCell:
    """A humidity sensor in air that bleeds from the line to the atmosphere."""

    temperature: Measured
    relative_humidity: Measured  # over liquid water
    pressure: Measured  # in the cell, absolute


@dataclass(frozen=True, slots=True)
class FloatSwitch:
    """A float in a trap, closed at and above a level."""

    channel: str
    level: Fixed  # kg


@dataclass(frozen=True, slots=True)
class Share:
    """A fraction between 0 and 1, drawn on the logit scale about its value."""

    value: float
    give_or_take: float


@dataclass(frozen=True, slots=True)
class Emptying:
    """How a drain empties itself while it works. What its kind does not need is left alone."""

    opens_at: Fixed  # kg: what the trap holds when a float or a level drain opens
    closes_at_kg: float  # what it leaves when it closes again
    passes: Fixed  # kg/s of water while it is open
    period_s: float = 0.0  # a timer's: from one blow to the next
    open_s: float = 0.0  # and how long one lasts


@dataclass(frozen=True, slots=True)
class Trap:
    """Somewhere liquid collects, with a drain. Its name is its station's id."""

    drain: DrainKind
    capacity: Fixed  # kg; beyond it liquid goes on down the line
    drain_at_kg: float
    separation: Share  # of the liquid that arrives or forms here, what stays here
    heel_kg: float = 0.0  # what a drain leaves behind
    holds_at_start_kg: float = 0.0
    drain_every: str = "never"  # "working day", "12 h", "3 days" ...: never, or as `every_s` says
    every_s: float = 0.0  # for "12 h" and the like; 0 for "working day" and "never"
    emptying: Emptying | None = None  # of a drain that empties itself; None: as its kind usually is
    floats: tuple[FloatSwitch, ...] = ()


@dataclass(frozen=True, slots=True)
class Power:
    """Whether a dryer runs. Where nothing says so, it does."""

    contact: str | None = None  # a contact channel, closed while it runs
    off_when_closed: bool = False  # it is switched off while the shop is closed
    in_service: bool = True  # False: bypassed, and no more than a pipe


@dataclass(frozen=True, slots=True)
class Refrigerated:
    """A refrigerated dryer, rated at 7 bar gauge, 35 degC in, 25 degC around and +3 degC."""

    rated_flow: Fixed  # m3/s of free air
    dew_point: Fixed  # K: the pressure dew point that it is set to and keeps while not overloaded
    power: Power = Power()


@dataclass(frozen=True, slots=True)
class Desiccant:
    """A desiccant dryer: a cartridge that fills up, or twin beds that dry each other in turn."""

    dew_point: Fixed  # K, the pressure dew point while charge is left
    holds: Fixed | None = None  # kg of water that a cartridge takes up; None: heatless twin beds
    held_at_start_kg: float = 0.0
    rated_flow: Fixed | None = None  # m3/s of free air; twin beds need it
    purge: Share = Share(0.0, 0.0)  # of the rated flow, what twin beds blow off
    power: Power = Power()


@dataclass(frozen=True, slots=True)
class Station:
    """One place along the line."""

    id: str
    kind: StationKind
    after: str  # the id of the station upstream, "" for the intake
    temperature: Source
    pressure: Source
    relative_humidity: Source | None = None  # the intake's
    volume: Fixed | None = None  # m3, a receiver's
    trap: Trap | None = None
    evaporated: Share = Share(0.5, 0.4)  # of arriving liquid, what may evaporate into dry air
    dryer: Refrigerated | Desiccant | None = None
    rated_flow: Fixed | None = None  # m3/s of free air: beyond it less is separated
    ice: Fixed | None = None  # kg in the bath that cools this place at the start
    around: Measured | Fixed | None = None  # K, the air around a dryer; None: as at the intake
    measured_dew_point: Measured | VentedCell | None = None  # of the air that leaves


@dataclass(frozen=True, slots=True)
class Outlet:
    """Where a hose connects."""

    id: str
    after: str  # a station's id
    share: float  # of the air used; the shares of a line add up to 1
    air_temperature: Measured | None = None  # of the air around hose and surface
    air_humidity: Measured | None = None  # its relative humidity
    slab: Measured | None = None  # the coldest thing that the hose lies on
    surface: Measured | None = None  # what is sprayed or blasted

    @property
    def sources(self) -> tuple[Measured, ...]:
        """The channels that are read for this outlet alone."""
        every = (self.air_temperature, self.air_humidity, self.slab, self.surface)
        return tuple(source for source in every if source is not None)


@dataclass(frozen=True, slots=True)
class Compressor:
    """What the compressor gives while it runs."""

    delivered: Fixed  # m3/s of free air at intake conditions
    running: str | None  # a contact channel: air is made while on (`loaded` before `running`)
    cut_in: Fixed  # Pa gauge
    cut_out: Fixed  # Pa gauge
    off_when_closed: bool
    flow_meter: Measured | None = None  # of the air made, m3/s at 20 degC, 1 bar, dry


@dataclass(frozen=True, slots=True)
class Line:
    """All the model knows of a shop's air line. A station stands after the one it hangs on."""

    stations: tuple[Station, ...]
    outlets: tuple[Outlet, ...]
    compressor: Compressor
    period_s: float  # sampling period; a value is stale after three
    members: int = 128
    seed: int = 1
