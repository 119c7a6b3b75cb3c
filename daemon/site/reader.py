"""Reads a site file: all of it, and all of its problems at once."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import replace
from pathlib import Path

import sensors.drivers  # noqa: F401  # fills DRIVERS
from daemon.errors import Problem, SiteError
from daemon.moisture.description import Compressor, Line
from daemon.site.assume import Assumptions, complete_line, station_of
from daemon.site.calendar import HOURS_KEYS, read_hours
from daemon.site.compressor import COMPRESSOR_KEYS, choose_running, read_compressor
from daemon.site.keeping import STORE_KEYS, read_store
from daemon.site.limits import tell_rising_pressures, tell_set_pressures
from daemon.site.names import Names
from daemon.site.notes import Notes, nearest
from daemon.site.outlets import OUTLET_KEYS, finish_outlets, read_outlets, settings_of
from daemon.site.parts import read_sensors
from daemon.site.plant import (
    COSTS_KEYS,
    REMINDERS_KEYS,
    read_costs,
    read_limits,
    read_reminders,
)
from daemon.site.remarks import remarks
from daemon.site.sections import (
    API_KEYS,
    CUP_KEYS,
    MODEL_KEYS,
    MQTT_KEYS,
    SITE_KEYS,
    read_api,
    read_cup,
    read_model,
    read_mqtt,
    read_site_table,
)
from daemon.site.shape import tell_circular_rules, tell_loops
from daemon.site.signal import SIGNAL_KEYS, read_signal
from daemon.site.stations import STATION_KEYS, Draft, open_stations, read_stations
from daemon.site.table import Table
from daemon.site.trap_sensors import read_trap_sensors
from daemon.site.types import Site
from sensors.registry import DRIVERS, Driver

TABLES = (
    "site", "hours", "compressor", "costs", "reminders", "cup", "model", "store", "mqtt", "api",
    "signal",
)  # fmt: skip
LISTS = ("sensor", "station", "outlet")
_LINE = re.compile(r"\(at line (\d+), column (\d+)\)\Z")


def read_site(path: str | Path) -> Site:
    """The site that a file describes. SiteError lists everything that is wrong with it."""
    try:
        data = Path(path).read_bytes()
    except OSError as error:
        remedy = f"the site file cannot be read ({error.strerror}); name one that exists"
        raise SiteError(str(path), [Problem("file", "", "", remedy)]) from None
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        remedy = "this line has a sign that is not UTF-8; save the file as UTF-8"
        raise SiteError(str(path), [Problem(f"line {line}", "", "", remedy)]) from None
    return parse_site(text, str(path))


def parse_site(text: str, path: str, drivers: Mapping[str, Driver] = DRIVERS) -> Site:
    """The site that a text describes; `path` is for messages and for other files' folders."""
    document = _document(text, path)
    notes = Notes(elsewhere=_elsewhere(drivers))
    raw = _top_level(notes, document)
    site = _Reading(notes, raw, path, drivers).site()
    if notes.problems or site is None:
        raise SiteError(path, notes.problems)
    return site


def _elsewhere(drivers: Mapping[str, Driver]) -> dict[str, Sequence[str]]:
    """The keys of every table, by how its header is written."""
    own = [key.name for driver in drivers.values() for key in driver.keys]
    return {
        "[site]": SITE_KEYS,
        "[hours]": HOURS_KEYS,
        "[compressor]": COMPRESSOR_KEYS,
        "[costs]": COSTS_KEYS,
        "[reminders]": REMINDERS_KEYS,
        "[cup]": CUP_KEYS,
        "[model]": MODEL_KEYS,
        "[store]": STORE_KEYS,
        "[api]": API_KEYS,
        "[mqtt]": MQTT_KEYS,
        "[signal]": SIGNAL_KEYS,
        "[[station]]": STATION_KEYS,
        "[[outlet]]": OUTLET_KEYS,
        "[[sensor]]": ("id", "driver", *own),
    }


def _document(text: str, path: str) -> dict[str, object]:
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        message = str(error)
        match = _LINE.search(message)
        line = int(match[1]) if match else text.count("\n") + 1
        column = f" (column {match[2]})" if match else ""
        what = message[: match.start()].strip() if match else message
        lines = text.splitlines()
        found = lines[line - 1].strip() if 0 < line <= len(lines) else ""
        remedy = f"not TOML: {what}{column}; correct this line, the rest is checked after that"
        raise SiteError(path, [Problem(f"line {line}", "", found[:80], remedy)]) from None


def _top_level(notes: Notes, document: Mapping[str, object]) -> dict[str, object]:
    """The tables by their right names; what is unknown is told."""
    known = (*TABLES, *LISTS)
    found: dict[str, object] = {name: document[name] for name in known if name in document}
    loose = {k: v for k, v in document.items() if k not in known and not _is_table(v)}
    _tell_loose(notes, loose, found)
    for name, raw in document.items():
        if name in known or name in loose:
            continue
        meant = nearest(name, known)
        brackets = f"[[{meant}]]" if meant in LISTS else f"[{meant}]"
        end = f"did you mean {brackets}?" if meant else f"known: {', '.join(known)}"
        notes.problem(name, "", None, f"there is no such table; {end}")
        if isinstance(raw, list) and meant in LISTS:
            already = found.get(meant, [])
            found[meant] = [*(already if isinstance(already, list) else []), *raw]
        elif meant:
            found.setdefault(meant, raw)
        else:
            for each in raw if isinstance(raw, list) else [raw]:
                notes.lost(each.get("id") if isinstance(each, dict) else None)
    return found


def _is_table(raw: object) -> bool:
    return isinstance(raw, dict) or (
        isinstance(raw, list) and bool(raw) and all(isinstance(each, dict) for each in raw)
    )


def _tell_loose(notes: Notes, loose: dict[str, object], found: dict[str, object]) -> None:
    """Keys before the first table: one mistake, and most often [site] is what is missing."""
    if not loose:
        return
    home = next((name for name in notes.elsewhere if set(loose) <= set(notes.elsewhere[name])), "")
    end = f"write {home} above them" if home else "put each into its table"
    key = next(iter(loose)) if len(loose) == 1 else ""
    notes.problem(
        "file",
        key,
        loose[key] if key else None,
        f"{', '.join(loose)} before the first table; {end}",
    )
    if home == "[site]":
        found.setdefault("site", loose)


class _Reading:
    """One reading of one file."""

    def __init__(
        self, notes: Notes, raw: Mapping[str, object], path: str, drivers: Mapping[str, Driver]
    ) -> None:
        self.notes, self.raw, self.path, self.drivers = notes, raw, path, drivers
        self.names = Names()
        self.straight = True  # no circle in what hangs on what

    def site(self) -> Site | None:
        """The site; None when there are problems."""
        notes, raw, names = self.notes, self.raw, self.names
        basics = read_site_table(notes, raw.get("site", {}))
        hours = read_hours(notes, raw.get("hours"))
        sensors = read_sensors(notes, self._list("sensor"), self.drivers, names)
        stations = open_stations(notes, self._list("station"), names)
        self._name_added(stations)
        table, compressor = read_compressor(notes, raw.get("compressor"), names)
        limits = read_limits(table)
        costs = read_costs(notes, raw.get("costs"))
        reminders = read_reminders(notes, raw.get("reminders"))
        drafts = self._drafts(stations)
        read_trap_sensors(notes, sensors, drafts, names)
        outlets = read_outlets(notes, self._list("outlet"), names)
        cup = read_cup(notes, raw.get("cup", {}))
        members, seed = read_model(notes, raw.get("model", {}))
        keeping = read_store(notes, raw.get("store"))
        mqtt = read_mqtt(notes, raw.get("mqtt"), Path(self.path).parent)
        api = read_api(notes, raw.get("api", {}))
        signal = read_signal(notes, raw.get("signal"), sensors)
        notes.settle_unknown({"sensor": names.sensors, "station": names.stations, "outlet": ()})
        compressor = self._complete(drafts, table, compressor)
        ends = finish_outlets(notes, outlets, drafts)
        if notes.problems:
            return None
        site = Site(
            path=self.path,
            id=basics.id,
            name=basics.name,
            timezone=basics.timezone,
            units=basics.units,
            sample_every_us=round(basics.sample_every_s * 1e6),
            hours=hours,
            cup=cup,
            sensors=sensors,
            channels=dict(names.channels),
            line=Line(
                stations=tuple(station_of(draft) for draft in drafts),
                outlets=tuple(ends),
                compressor=compressor,
                period_s=basics.sample_every_s,
                members=members,
                seed=seed,
            ),
            outlets=tuple(settings_of(outlets, ends)),
            mqtt=mqtt,
            api=api,
            defaults=tuple(notes.defaults),
            without_effect=tuple(notes.without_effect),
            limits=limits,
            costs=costs,
            signal=signal,
            keeping=keeping,
            reminders=reminders,
        )
        said = remarks(site, names, loaded_contact=table.said("loaded"))
        return replace(site, remarks=said)

    def _drafts(self, tables: Sequence[Table]) -> list[Draft]:
        """The stations as they are said, in the air's order, with those that must be there."""
        drafts = read_stations(tables, self.names)
        self.straight = tell_loops(drafts)
        known = len(drafts) == len(tables) and all(draft.kind for draft in drafts)
        return complete_line(self.notes, drafts, all_known=known)

    def _complete(self, drafts: list[Draft], table: Table, compressor: Compressor) -> Compressor:
        """Fill in what is not said, then check what only the whole line shows."""
        Assumptions(self.notes, drafts, self.names, compressor).fill()
        running = choose_running(table, compressor, self.names)
        if self.straight:
            tell_circular_rules(drafts)
            tell_rising_pressures(drafts)
            tell_set_pressures(drafts, table, compressor)
        return replace(compressor, running=running)

    def _list(self, name: str) -> list[object]:
        raw = self.raw.get(name, [])
        if isinstance(raw, list):
            return raw
        self.notes.problem(
            name, "", None, f"is a list of tables; write [[{name}]], twice bracketed"
        )
        return [raw] if isinstance(raw, dict) else []

    def _name_added(self, tables: Sequence[Table]) -> None:
        """Stations that are added where the file has none: others may name them already."""
        kinds = [table.values.get("kind") for table in tables]
        if "intake" not in kinds and "intake" not in self.names.stations:
            self.names.stations.insert(0, "intake")
        if kinds in ([], ["intake"]) and "tank" not in self.names.stations:
            self.names.stations.append("tank")
