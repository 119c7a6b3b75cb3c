"""A site file after reading: typed, in SI, every default filled in and remembered as one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal, get_args

from daemon.alarms import Priority
from daemon.moisture.description import Fixed, Line
from daemon.site.defaults import SPECIFIC_POWER
from sensors.reading import Channel
from sensors.registry import SensorConfig

Units = Literal["metric", "us"]
DAY_NAMES = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")


@dataclass(frozen=True, slots=True)
class Hours:
    """When the shop works, in its own time zone."""

    # seven tuples, Monday first, of (open, close) in minutes after local midnight, in order
    spans: tuple[tuple[tuple[int, int], ...], ...]
    holidays: frozenset[str]  # "2026-12-25"
    always_open: bool


@dataclass(frozen=True, slots=True)
class Cup:
    """How drained water is measured. Fractions, and kg for what is added each time."""

    reads_low_by: float = 0.05
    give_or_take: float = 0.05  # persistent, 95 % half-width, fraction
    each_time: float = 0.05  # fraction
    each_time_kg: float = 0.005


ReminderTime = Literal["shift start", "break", "shift end"]
REMINDER_TIMES: tuple[ReminderTime, ...] = get_args(ReminderTime)


@dataclass(frozen=True, slots=True)
class Limits:
    """What a plant may take before an alarm asks for a look. Fractions."""

    duty: float = 0.75  # of working hours
    leak: float = 0.10  # of the delivered air


@dataclass(frozen=True, slots=True)
class Costs:
    """What compressed air costs."""

    kwh_price: float | None = None  # None: nobody said
    currency: str = ""
    specific_power: Fixed = SPECIFIC_POWER  # kW for a m3/min of free air


@dataclass(frozen=True, slots=True)
class Keeping:
    """What the database keeps."""

    readings_s: float | None = 2 * 31_557_600.0  # None: for ever


@dataclass(frozen=True, slots=True)
class OutletSettings:
    """What a person asks of an outlet, beside its place on the line."""

    id: str
    surroundings: str  # the sensor in the air around hose and surface, "" if none
    work: str  # a profile's name
    line_margin_k: float | None
    surface_margin_k: float


@dataclass(frozen=True, slots=True)
class Mqtt:
    """The broker to tell."""

    host: str
    port: int
    user: str = ""
    password: str = field(default="", repr=False)
    tls: bool = False
    ca_file: str = ""
    prefix: str = "dripleg"
    password_file: str = ""  # read when connecting, never while the site file is parsed


@dataclass(frozen=True, slots=True)
class Api:
    """Where the API listens."""

    host: str = "127.0.0.1"
    port: int = 8080
    open_reading: bool = False  # without a key, on an address that others can reach


SignalKind = Literal["lamp", "buzzer"]
SignalPattern = Literal["blink", "steady"]


@dataclass(frozen=True, slots=True)
class Signal:
    """A lamp or a buzzer on a GPIO line, for a shop without a board."""

    kind: SignalKind = "lamp"
    chip: str = "/dev/gpiochip0"
    line: int = 25
    active_high: bool = True  # the line's level that switches it on
    priorities: tuple[Priority, ...] = ("medium", "high")
    pattern: SignalPattern = "blink"

    @property
    def place(self) -> str:
        """The line, in the words of the sensors' lines."""
        return f"{self.chip} line {self.line}"


@dataclass(frozen=True, slots=True)
class DefaultUsed:
    """One value that nobody said: where, what is used, and why that."""

    table: str  # 'station "tank"'
    key: str
    value: str  # in people's units
    because: str


@dataclass(frozen=True, slots=True)
class Site:
    """Everything a site file says."""

    path: str
    id: str
    name: str
    timezone: str
    units: Units
    sample_every_us: int
    hours: Hours
    cup: Cup
    sensors: tuple[SensorConfig, ...]
    channels: Mapping[str, Channel]  # every channel that the sensors give, by name
    line: Line
    outlets: tuple[OutletSettings, ...]
    mqtt: Mqtt | None
    api: Api
    defaults: tuple[DefaultUsed, ...] = ()
    without_effect: tuple[str, ...] = ()  # keys that are checked but change nothing yet, with why
    remarks: tuple[str, ...] = ()  # what a practitioner would say about this line
    limits: Limits = Limits()
    costs: Costs = Costs()
    signal: Signal | None = None
    keeping: Keeping = Keeping()
    reminders: tuple[ReminderTime, ...] = REMINDER_TIMES

    @property
    def traps(self) -> tuple[str, ...]:
        """The traps' names in the order the air meets them."""
        return tuple(station.id for station in self.line.stations if station.trap is not None)
