"""Reads the sensors that belong to a trap: float switches, and buttons beside it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace

from daemon.moisture.description import WATER_KG_PER_M3, Fixed, FloatSwitch
from daemon.site import defaults
from daemon.site.names import Names
from daemon.site.notes import Notes, Unknown
from daemon.site.stations import Draft
from daemon.site.table import Table
from daemon.site.values import quantity
from daemon.units import show_volume
from sensors.registry import SensorConfig

KEY = "float_switch"
LEVEL = "closes_at"
_level = quantity("volume", 1e-6, 1.0, "what the trap holds when it closes: 1 ml to 1000 L")


def read_trap_sensors(
    notes: Notes, configs: Sequence[SensorConfig], stations: Sequence[Draft], names: Names
) -> None:
    """Give each trap its float switches, and tell every sensor whose trap is not there or too small
    for it."""
    by_id = {config.id: config for config in configs}
    floats: dict[str, list[FloatSwitch]] = {}
    for config in configs:
        station = _station_of(notes, config, stations, names)
        if station is not None and LEVEL in config.settings:
            _tell_level(notes, config, station)
            floats.setdefault(station.id, []).append(_float(f"{config.id}.contact", config))
    for station in stations:
        said = _said(station, names, by_id)
        if said is not None:
            mine = floats.setdefault(station.id, [])
            mine += [] if said.channel in [each.channel for each in mine] else [said]
        if station.trap is not None and station.id in floats:
            station.trap = replace(station.trap, floats=tuple(floats[station.id]))


def _float(channel: str, config: SensorConfig) -> FloatSwitch:
    return FloatSwitch(channel, _kg(float(config.settings[LEVEL])))


def _kg(level_m3: float) -> Fixed:
    level_kg = level_m3 * WATER_KG_PER_M3
    return Fixed(level_kg, level_kg * defaults.CLOSES_AT_GIVE_OR_TAKE)


def _station_of(
    notes: Notes, config: SensorConfig, stations: Sequence[Draft], names: Names
) -> Draft | None:
    """The station whose trap a sensor's own table names; what is wrong with that is told."""
    trap = config.settings.get("trap")
    if trap is None:
        return None
    where = f'sensor "{config.id}"'
    if trap not in names.stations:
        try:
            names.station(trap)
        except Unknown as unknown:
            notes.unknown(unknown, where, "trap", trap)
        return None
    station = next((each for each in stations if each.id == trap), None)
    if station is None or station.kind is None or not station.table.ok("trap"):
        return None
    if station.trap is None:
        traps = [each.id for each in stations if each.trap is not None]
        end = f"; traps are at {', '.join(traps)}" if traps else ""
        notes.problem(where, "trap", trap, f"this station has no trap{end}")
        return None
    return station


def _tell_level(notes: Notes, config: SensorConfig, station: Draft) -> None:
    level_m3 = config.settings[LEVEL]
    remedy = _too_high(level_m3, station, notes)
    if remedy:
        shown = show_volume(level_m3, notes.units)
        notes.problem(f'sensor "{config.id}"', LEVEL, shown, remedy)


def _too_high(level_m3: float, station: Draft, notes: Notes) -> str:
    assert station.trap is not None
    capacity_m3 = station.trap.capacity.value / WATER_KG_PER_M3
    if level_m3 <= capacity_m3:
        return ""
    limit = show_volume(capacity_m3, notes.units)
    return f"is above the trap's capacity, {limit}; correct one of the two"


# ---- what a trap's own table says ----


def _said(station: Draft, names: Names, configs: Mapping[str, SensorConfig]) -> FloatSwitch | None:
    """The float switch that a trap's table names; None when there is none, or it is wrong."""
    raw = station.table.values.get("trap")
    if not isinstance(raw, dict) or KEY not in raw or station.trap is None:
        return None
    inner = station.table.sub("trap", list(raw))
    if isinstance(raw[KEY], dict):
        return _with_level(inner, station, names)
    return inner.read(KEY, lambda name: _by_driver(name, station, names, configs), None)


def _with_level(inner: Table, station: Draft, names: Names) -> FloatSwitch | None:
    """Any contact, its level said here: { channel = "...", closes_at = "80 ml" }."""
    table = inner.sub(KEY, ("channel", LEVEL))
    missing = [key for key in ("channel", LEVEL) if not table.said(key)]
    if missing and not table.broken:
        inner.wrong(KEY, f"does not say {' and '.join(missing)}; write {_EXAMPLE}")
        return None
    channel = table.read("channel", lambda name: _contact(name, names), "")
    level_m3 = table.read(LEVEL, _level, 0.0)
    remedy = _too_high(level_m3, station, table.notes)
    if table.ok(LEVEL) and remedy:
        table.wrong(LEVEL, remedy)
    return None if table.broken else FloatSwitch(channel, _kg(level_m3))


_EXAMPLE = '{ channel = "tank-float.contact", closes_at = "80 ml" }'


def _contact(name: object, names: Names) -> str:
    if not isinstance(name, str):
        raise ValueError('must be a channel in quotes, like "tank-float.contact"')
    return names.channel(name, "contact").name


def _by_driver(
    name: object, station: Draft, names: Names, configs: Mapping[str, SensorConfig]
) -> FloatSwitch:
    """A float-switch, whose own table says at which level it closes."""
    channel = _contact(name, names)
    config = configs[channel.rpartition(".")[0]]
    if LEVEL not in config.settings:
        raise ValueError(f"does not say at which level it closes; write {_EXAMPLE}")
    if config.settings["trap"] != station.id:
        raise ValueError(f'belongs to the trap of "{config.settings["trap"]}" by its own table')
    return _float(channel, config)


def buttons(configs: Sequence[SensorConfig]) -> Iterator[tuple[str, str]]:
    """The channel and the trap of every "drained" button."""
    for config in configs:
        if config.driver == "drained-button":
            yield f"{config.id}.contact", str(config.settings["trap"])
