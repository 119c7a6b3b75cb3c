"""The drivers that a site file can name: their keys, their channels, and how to open one.

The site file's parser asks this registry what a `[[sensor]]` table may say; the daemon asks it to
open the part. A driver module adds itself here and imports no hardware library when it is imported.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, Protocol

from sensors.reading import Channel, Sensor

REQUIRED = object()  # the default of a key that must be said


@dataclass(frozen=True, slots=True)
class Key:
    """One key of a driver's `[[sensor]]` table."""

    name: str
    read: Callable[[object], Any]  # the TOML value to a checked one; ValueError with what to write
    default: Any = REQUIRED
    meaning: str = ""  # one line, for the documents and for `dripleg check`


@dataclass(frozen=True, slots=True)
class SensorConfig:
    """A checked `[[sensor]]` table."""

    id: str
    driver: str
    settings: Mapping[str, Any]  # every key of the driver, defaults filled in
    said: frozenset[str] = frozenset()  # the keys that the file itself gave


class Hardware(Protocol):
    """Where drivers find their buses and lines; the emulated shop has the same shape."""

    def i2c(self, bus: int) -> Any: ...

    def one_wire_root(self) -> str: ...

    def lines(self, chip: str) -> Any: ...

    def modbus(self, port: Any) -> Any:
        """The `sensors.modbus.RegisterReader` of a serial line or a TCP host."""
        ...

    def inbox(self) -> Any:
        """The `sensors.inbox.Inbox` that the MQTT client fills."""
        ...

    def wait(self, seconds: float) -> None:
        """Let a part work that long. Emulated parts have finished without any real waiting."""
        ...


@dataclass(frozen=True, slots=True)
class Driver:
    """A kind of part."""

    name: str
    summary: str
    keys: tuple[Key, ...]
    channels: Callable[[SensorConfig], tuple[Channel, ...]]
    # what no two sensors may share, as words for a message: ("bus 1 address 0x76",)
    occupies: Callable[[SensorConfig], tuple[str, ...]]
    # the thread that reads it: sensors that name the same bus share one
    bus: Callable[[SensorConfig], str]
    open: Callable[[SensorConfig, Hardware], Sensor]
    # a read takes longer than a tick may wait: its readings come with a later tick
    slow: bool = False
    # keys that are each right but do not go together: (key, what to write instead)
    clashes: Callable[[SensorConfig], tuple[tuple[str, str], ...]] = lambda config: ()


DRIVERS: dict[str, Driver] = {}


def register(driver: Driver) -> Driver:
    """Make a driver known by its name."""
    DRIVERS[driver.name] = driver
    return driver
