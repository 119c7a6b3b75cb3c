"""Reads the `[[sensor]]` tables against the drivers' own keys."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from daemon.site.ids import label, read_id
from daemon.site.names import Names
from daemon.site.notes import Explains, Notes, nearest, suggestion, written
from daemon.site.table import Table
from daemon.site.values import choice, identifier, text
from sensors.registry import REQUIRED, Driver, SensorConfig

BLED_FROM_LINE = ("vented-cell",)  # drivers whose part sits in the line's air, not the shop's


def read_sensors(
    notes: Notes, tables: list[object], drivers: Mapping[str, Driver], names: Names
) -> tuple[SensorConfig, ...]:
    """Every sensor that could be read; its channels are put into `names`."""
    found = []
    occupied: dict[str, str] = {}
    for number, raw in enumerate(tables, 1):
        config = _sensor(notes, number, raw, drivers, names)
        if config is not None:
            found.append(config)
            _occupy(notes, config, drivers[config.driver], occupied)
    return tuple(found)


def _sensor(
    notes: Notes, number: int, raw: object, drivers: Mapping[str, Driver], names: Names
) -> SensorConfig | None:
    where = label("sensor", number, raw)
    driver = _driver(raw, drivers)
    # Of an unknown driver every key may be right: only the driver is told.
    own = (
        [key.name for key in driver.keys] if driver else list(raw if isinstance(raw, dict) else ())
    )
    required: dict[str, Callable[[object], object]] = {"driver": choice(list(drivers), "driver")}
    for key in driver.keys if driver else ():
        if key.default is REQUIRED:
            required[key.name] = key.read
    required["id"] = identifier
    known = list(dict.fromkeys(["id", "driver", *own]))
    table = Table(notes, where, raw, known, required=required)
    name = read_id(table, "sensor", names.sensors, _gives(table, driver))
    if driver is None:
        _no_driver(table, drivers)
    settings = _settings(table, driver) if driver else None
    if not name or driver is None or table.broken or settings is None:
        names.broken_sensors.add(name)
        return None
    config = SensorConfig(name, driver.name, settings, said=frozenset(table.values))
    for clashing, remedy in driver.clashes(config):
        table.wrong(clashing, remedy)
    if table.broken:
        names.broken_sensors.add(name)
        return None
    _introduce(config, driver, names)
    return config


def _introduce(config: SensorConfig, driver: Driver, names: Names) -> None:
    """Make a sensor's channels known, and what it is there for if its own table says so."""
    for channel in driver.channels(config):
        names.channels[channel.name] = channel
    if driver.name in BLED_FROM_LINE:
        names.in_line.add(config.id)
    if "trap" in config.settings:
        names.used_sensors.add(config.id)


def _gives(table: Table, driver: Driver | None) -> Explains:
    """Whether a sensor could be the one of which some quantities are asked elsewhere."""

    def explains(_: set[str], asked: set[str]) -> bool:
        if driver is None or not table.ok(*(key.name for key in driver.keys)):
            return True
        settings = {key.name: table.values.get(key.name, key.default) for key in driver.keys}
        read = {
            key.name: key.read(settings[key.name])
            for key in driver.keys
            if key.name in table.values
        }
        config = SensorConfig("it", driver.name, settings | read)
        return asked <= {channel.quantity for channel in driver.channels(config)}

    return explains


def _driver(raw: object, drivers: Mapping[str, Driver]) -> Driver | None:
    """The driver that a table names, also under a misspelt key."""
    if not isinstance(raw, dict):
        return None
    name = raw.get("driver")
    if "driver" not in raw:  # perhaps under another key: then a value tells
        name = next((value for value in raw.values() if value in drivers), None)
    return drivers.get(name) if isinstance(name, str) else None


def _no_driver(table: Table, drivers: Mapping[str, Driver]) -> None:
    known = ", ".join(sorted(drivers))
    if "driver" not in table.values:
        if table.ok("driver"):
            table.wrong("driver", f"a sensor needs a driver; known: {known}")
        return
    name = table.read("driver", text, "")
    if name:
        close = nearest(name, drivers)
        end = suggestion(name, sorted(drivers)) + (f" (known: {known})" if close else "")
        table.wrong("driver", f"there is no such driver{end}")


def _settings(table: Table, driver: Driver) -> dict[str, Any] | None:
    """Every key of the driver, defaults filled in; None when one is wrong."""
    settings: dict[str, Any] = {}
    for key in driver.keys:
        if key.name not in table.values and key.default is REQUIRED:
            if table.ok(key.name):
                meaning = f" ({key.meaning})" if key.meaning else ""
                table.wrong(key.name, f"{driver.name} needs this key{meaning}")
            continue
        if key.name not in table.values and table.ok(key.name) and key.default is not None:
            table.default(
                key.name,
                written(key.default, key.name),
                key.meaning or f"{driver.name}'s own default",
            )
        settings[key.name] = table.read(key.name, key.read, key.default)
    return settings if table.ok(*(key.name for key in driver.keys)) else None


def _occupy(notes: Notes, config: SensorConfig, driver: Driver, occupied: dict[str, str]) -> None:
    """Tell what two sensors would share; once for a pair."""
    for place in driver.occupies(config):
        other = next((occupied[each] for each in occupied if _overlap(place, each)), None)
        occupied.setdefault(place, config.id)
        if other is not None:
            notes.problem(
                f'sensor "{config.id}"',
                "",
                None,
                f'{place} is taken by sensor "{other}" already; '
                "a part answers to one sensor only, so correct one of the two",
            )
            return


def _overlap(one: str, other: str) -> bool:
    """Whether two places are one, or one is inside the other ("bus 1 address 0x48 input 2")."""
    return one == other or one.startswith(f"{other} ") or other.startswith(f"{one} ")
