"""Reads the `[[station]]` tables as they are written, before anything is assumed."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import cast

from daemon.moisture.description import (
    Fixed,
    Measured,
    Share,
    Source,
    StationKind,
    Trap,
    VentedCell,
)
from daemon.site import defaults, fittings, measured_points
from daemon.site.fittings import FittingDraft, read_fittings
from daemon.site.ids import label, read_id
from daemon.site.measured_points import read_measured_dew_point
from daemon.site.names import Names
from daemon.site.notes import Explains, Notes
from daemon.site.sources import (
    BAROMETER,
    HUMIDITY,
    PRESSURE,
    TEMPERATURE,
    Rules,
    gauge_pressure,
    read_source,
)
from daemon.site.table import Table
from daemon.site.traps import read_trap
from daemon.site.values import choice, flag, identifier
from daemon.site.widths import OF_PRESSURE, OF_VOLUME, read_fixed
from daemon.units import parse, show_volume

STATION_KEYS = (
    "id", "kind", "after", "temperature", "pressure", "relative_humidity", "volume", "set",
    "take_off", "separator", "trap", measured_points.KEY, *fittings.KEYS,
)  # fmt: skip
KINDS = tuple(defaults.KINDS)
_ONLY_AT: dict[str, tuple[StationKind, ...]] = {
    "relative_humidity": ("intake",),
    "volume": ("receiver",),
    "set": ("regulator",),
    "take_off": ("pipe",),
    "separator": ("cooler",),
    **fittings.BELONGS,
}
# What people call things, and what to write.
_OTHER_WORDS = {
    "tank": "receiver",
    "air-tank": "receiver",
    "aftercooler": "cooler",
    "radiator": "cooler",
    "drip-leg": "pipe",
    "dripleg": "pipe",
    "hose": "pipe",
    "filter": "coalescer or separator: say which of the two it is",
    "dryer": "refrigerated or desiccant: say which of the two it is",
    "cartridge": "desiccant, with its mass",
    "ice-bath": "cooler, with its ice",
    "compressor": "a [compressor] table: it is no station",
}


@dataclass(slots=True)
class Draft:
    """A station on its way: what the file says of it; None where it says nothing (or wrongly)."""

    table: Table
    id: str
    kind: StationKind | None
    after: str | None
    temperature: Source | None = None
    pressure: Source | None = None
    relative_humidity: Source | None = None
    volume: Fixed | None = None
    trap: Trap | None = None
    set_pressure: Fixed | None = None
    measured_dew_point: Measured | VentedCell | None = None
    fittings: FittingDraft = field(default_factory=FittingDraft)

    @property
    def is_intake(self) -> bool:
        return self.kind == "intake"


def open_stations(notes: Notes, raws: Sequence[object], names: Names) -> list[Table]:
    """The tables, with every id put into `names` so that stations may name later ones."""
    tables = []
    ids = [raw["id"] for raw in raws if isinstance(raw, dict) and isinstance(raw.get("id"), str)]
    labels = [label("station", number, raw) for number, raw in enumerate(raws, 1)]
    for number, (where, raw) in enumerate(zip(labels, raws, strict=True), 1):
        table = Table(notes, where, raw, STATION_KEYS, required=_required(raw, ids))
        onward = labels[number] if number < len(labels) else "outlet"
        if not read_id(table, "station", names.stations, _explains(onward)):
            table.values["id"] = ""  # checked like the others, then left out
        tables.append(table)
    return tables


def _required(raw: object, ids: Sequence[str]) -> dict[str, Callable[[object], object]]:
    """The keys that a station must have, with what tells that a value could be theirs."""
    found: dict[str, Callable[[object], object]] = {"kind": choice(KINDS, "kind of station")}
    table = raw if isinstance(raw, dict) else {}
    kinds = [table["kind"]] if "kind" in table else list(table.values())
    if "intake" not in kinds:
        found["after"] = choice(ids, "station")
    if "regulator" in kinds:
        found["set"] = gauge_pressure
    return found | {"id": identifier}


def _explains(onward: str) -> Explains:
    """Whether the next table of the file, or an outlet, names what could be this station."""
    return lambda tables, _: any(table.startswith((onward, "outlet")) for table in tables)


def read_stations(tables: Sequence[Table], names: Names) -> list[Draft]:
    """What every table says. A station that has no id of its own is checked, but left out."""
    drafts = [_draft(table, names) for table in tables]
    _tell_second_intake(drafts)
    return [draft for draft in drafts if draft.id]


def _draft(table: Table, names: Names) -> Draft:
    raw_id = table.values.get("id")
    kind = _kind(table)
    draft = Draft(table, raw_id if isinstance(raw_id, str) else "", kind, None)
    draft.after = _after(table, draft, names)
    _tell_misplaced(table, kind)
    _read_sources(table, draft, names)
    draft.measured_dew_point = read_measured_dew_point(table, names)
    draft.fittings = read_fittings(table, kind, names)
    draft.temperature = draft.fittings.temperature or draft.temperature
    volume = read_fixed(table, "volume", _volume, OF_VOLUME, defaults.SAID_BECAUSE)
    if kind == "receiver":
        draft.volume = _volume_or_default(table, volume)
    if kind == "regulator":
        draft.set_pressure = _set(table)
    separation = _separation(table, kind)
    if kind is not None:
        draft.trap = read_trap(table, kind, draft.volume, separation)
    return draft


def _kind(table: Table) -> StationKind | None:
    raw = table.values.get("kind")
    if raw is None:
        if table.ok("kind"):
            table.wrong("kind", f"a station needs a kind; known: {', '.join(KINDS)}")
        return None
    other = _OTHER_WORDS.get(raw.lower()) if isinstance(raw, str) else None
    if other is not None:
        table.wrong("kind", f"is no kind of station; write {other}")
        return None
    return cast(StationKind | None, table.read("kind", choice(KINDS, "kind of station"), None))


def _after(table: Table, draft: Draft, names: Names) -> str | None:
    if draft.is_intake:
        if "after" in table.values:
            table.wrong("after", "the line begins at the intake: it hangs on nothing; take it out")
        return ""
    if "after" not in table.values:
        if table.ok("after") and draft.kind is not None:
            others = [name for name in names.stations if name != draft.id]
            known = f"; known: {', '.join(others)}" if others else ""
            table.wrong("after", f"hangs nowhere; write the station it comes after{known}")
        return None
    return table.read("after", names.station, None)


def _tell_misplaced(table: Table, kind: StationKind | None) -> None:
    for key, places in _ONLY_AT.items():
        if kind is not None and key in table.values and kind not in places and table.ok(key):
            place = " or ".join(places)
            table.wrong(key, f"belongs to a station of kind {place}, not {kind}; take it out")
            del table.values[key]


def _read_sources(table: Table, draft: Draft, names: Names) -> None:
    intake = draft.is_intake
    usual = defaults.KINDS[draft.kind].temperature if draft.kind else defaults.SAME_AIR
    air = Rules(
        usual.give_or_take_k, like=not intake, rise_by_duty=draft.kind in ("receiver", None)
    )
    line = Rules(defaults.LIKE_PRESSURE_PA, like=not intake)
    pressure = BAROMETER if intake else PRESSURE
    draft.temperature = read_source(table, "temperature", TEMPERATURE, air, names)
    if draft.kind is not None:  # gauge or barometer: that depends on the kind
        draft.pressure = read_source(table, "pressure", pressure, line, names)
    draft.relative_humidity = read_source(
        table, "relative_humidity", HUMIDITY, Rules(0.0, False), names
    )


def _volume(raw: object) -> Fixed:
    value = parse(raw, "volume")
    if not 1e-3 <= value <= 100.0:
        raise ValueError("is no tank's volume: 1 L to 100 m3 (0.3 to 26400 gal)")
    return Fixed(value, value * defaults.GIVE_OR_TAKE_SHARES["volume"])


def _volume_or_default(table: Table, volume: Fixed | None) -> Fixed:
    usual = defaults.VOLUME
    if not table.said("volume"):
        shown, width = (
            show_volume(each, table.notes.units) for each in (usual.value, usual.give_or_take)
        )
        table.default("volume", f"{shown} give or take {width}", defaults.VOLUME_BECAUSE)
    return volume or usual


def _set(table: Table) -> Fixed | None:
    if not table.said("set"):
        table.wrong("set", 'a regulator needs its set pressure; write e.g. set = "3 bar"')
        return None

    def literal(raw: object) -> Fixed:
        pressure = gauge_pressure(raw)
        width = pressure.value * defaults.GIVE_OR_TAKE_SHARES["set"]
        return Fixed(pressure.value, width, gauge=True)

    return read_fixed(table, "set", literal, OF_PRESSURE, "what a regulator holds (practice)")


def _separation(table: Table, kind: StationKind | None) -> tuple[Share, str] | None:
    """What `take_off` or `separator` make of the kind's separation."""
    take_off = table.read("take_off", choice(("top", "bottom"), "side of the main"), "top")
    separator = table.read("separator", flag, False)
    if kind == "pipe" and take_off == "bottom":
        return defaults.TAKE_OFF_BOTTOM, defaults.TAKE_OFF_BOTTOM_BECAUSE
    if kind == "cooler" and separator:
        return defaults.COOLER_WITH_SEPARATOR, defaults.COOLER_WITH_SEPARATOR_BECAUSE
    return None


def _tell_second_intake(drafts: Sequence[Draft]) -> None:
    intakes = [draft for draft in drafts if draft.is_intake]
    for second in intakes[1:]:
        if second.id:
            second.table.wrong(
                "kind",
                f'the line begins at one intake, and "{intakes[0].id}" is it; '
                "describe another compressor's line in a site file of its own",
            )
