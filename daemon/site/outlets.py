"""Reads the `[[outlet]]` tables: where hoses connect, and what is done there."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from daemon.moisture.description import Measured, Outlet
from daemon.site import defaults
from daemon.site.ids import label, read_id
from daemon.site.names import Names
from daemon.site.notes import Notes, suggestion
from daemon.site.shape import ends
from daemon.site.stations import Draft
from daemon.site.table import Table
from daemon.site.types import OutletSettings
from daemon.site.values import choice, identifier, quantity, text
from daemon.units import parse, show_difference, show_percent
from sensors.reading import Quantity

OUTLET_KEYS = (
    "id", "after", "share", "surroundings", "slab", "surface", "work", "line_margin",
    "surface_margin",
)  # fmt: skip
SHARES_MAY_MISS = 0.002  # three times 0.333: taken for a whole


@dataclass(frozen=True, slots=True)
class OutletSources:
    """The sensors at an outlet."""

    air_temperature: Measured | None = None
    air_humidity: Measured | None = None
    slab: Measured | None = None
    surface: Measured | None = None


@dataclass(slots=True)
class OutletDraft:
    """An outlet on its way."""

    table: Table
    id: str
    after: str | None
    share: float | None
    settings: OutletSettings
    sources: OutletSources


def read_outlets(notes: Notes, raws: Sequence[object], names: Names) -> list[OutletDraft]:
    """What every table says."""
    taken: list[str] = []
    drafts = []
    for number, raw in enumerate(raws, 1):
        required = {"after": choice(names.stations, "station"), "id": identifier}
        table = Table(notes, label("outlet", number, raw), raw, OUTLET_KEYS, required=required)
        name = read_id(table, "outlet", taken, lambda tables, asked: False)
        drafts.append(_draft(table, name, names))
    return drafts


def _draft(table: Table, name: str, names: Names) -> OutletDraft:
    after = table.read("after", names.station, None)
    if "after" not in table.values and table.ok("after"):
        known = f"; known: {', '.join(names.stations)}" if names.stations else ""
        table.wrong("after", f"hangs nowhere; write the station it comes after{known}")
    share = table.read("share", _share, None)
    surroundings = table.read("surroundings", _sensor(names), "")
    margin = quantity("temperature difference", 0.0, 50.0, "from 0 to 50 K")
    return OutletDraft(
        table,
        name,
        after,
        share,
        OutletSettings(
            id=name,
            surroundings=surroundings,
            work=table.read("work", _work, ""),
            line_margin_k=table.read("line_margin", margin, None),
            surface_margin_k=table.value(
                "surface_margin",
                margin,
                defaults.SURFACE_MARGIN_K,
                show_difference(defaults.SURFACE_MARGIN_K, table.notes.units),
                "as in ISO 8502-4",
            ),
        ),
        OutletSources(
            air_temperature=_measured(names, surroundings, "temperature"),
            air_humidity=_measured(names, surroundings, "relative_humidity"),
            slab=table.read("slab", _temperature(names), None),
            surface=table.read("surface", _temperature(names), None),
        ),
    )


def _tell_in_line(names: Names, sensor: str) -> None:
    if sensor in names.in_line:
        raise ValueError("sits in the line's own air; name a sensor that is in the shop's")


def _measured(names: Names, sensor: str, quantity: Quantity) -> Measured | None:
    channel = names.of(sensor, quantity) if sensor else None
    if channel is None:
        return None
    return Measured(channel.name, channel.give_or_take, channel.gauge)


def _temperature(names: Names) -> Callable[[object], Measured]:
    def read(raw: object) -> Measured:
        if not names.is_channel(text(raw)):
            raise ValueError('is measured or left out: name a channel, like "floor.temperature"')
        channel = names.channel(text(raw), "temperature")
        _tell_in_line(names, channel.sensor)
        return Measured(channel.name, channel.give_or_take, channel.gauge)

    return read


def _share(raw: object) -> float:
    value = parse(raw, "fraction")
    if not 0.0 < value <= 1.0:
        raise ValueError("is a share of the air used: more than 0, and 1 (100 %) at most")
    return value


def _sensor(names: Names) -> Callable[[object], str]:
    def read(raw: object) -> str:
        found = names.sensor(text(raw), "the one in the air around hose and surface")
        if found in names.broken_sensors:
            return found
        if not (names.of(found, "temperature") and names.of(found, "relative_humidity")):
            raise ValueError("gives no temperature and relative humidity; name a sensor that does")
        _tell_in_line(names, found)
        return found

    return read


def _work(raw: object) -> str:
    name = text(raw)
    if name.lower().startswith("breath"):
        raise ValueError(defaults.BREATHING)
    if name not in defaults.WORKS:
        raise ValueError(f"is no kind of work known here{suggestion(name, defaults.WORKS)}")
    return name


def finish_outlets(
    notes: Notes, drafts: Sequence[OutletDraft], stations: Sequence[Draft]
) -> list[Outlet]:
    """The outlets with their shares; one at the line's end where the file has none."""
    _tell_outlets_at_intake(drafts, stations)
    if not drafts:
        return _line_end(notes, stations)
    shares = _shares(notes, drafts)
    return [
        Outlet(
            draft.id,
            draft.after or "",
            share,
            air_temperature=draft.sources.air_temperature,
            air_humidity=draft.sources.air_humidity,
            slab=draft.sources.slab,
            surface=draft.sources.surface,
        )
        for draft, share in zip(drafts, shares, strict=True)
    ]


def settings_of(drafts: Sequence[OutletDraft], outlets: Sequence[Outlet]) -> list[OutletSettings]:
    """What is asked of each outlet, also of one that nobody declared."""
    if drafts:
        return [draft.settings for draft in drafts]
    return [OutletSettings(each.id, "", "", None, defaults.SURFACE_MARGIN_K) for each in outlets]


def _tell_outlets_at_intake(drafts: Sequence[OutletDraft], stations: Sequence[Draft]) -> None:
    intakes = {draft.id for draft in stations if draft.is_intake}
    for draft in drafts:
        if draft.after in intakes and draft.table.ok("after"):
            draft.table.wrong(
                "after", "the intake is before the compressor; an outlet hangs on the line after it"
            )


def _line_end(notes: Notes, stations: Sequence[Draft]) -> list[Outlet]:
    last = ends(stations)
    if len(last) > 1 and notes.shape_known():
        notes.problem(
            "outlet",
            "",
            None,
            f"the line has more than one end ({', '.join(each.id for each in last)}); write an "
            "[[outlet]] with id and after for every place where a hose connects",
        )
    if not last:
        return []
    notes.default(
        'outlet "line-end"', "after", f'"{last[0].id}"', "no outlet is declared; the line's end"
    )
    return [Outlet("line-end", last[0].id, 1.0)]


def _shares(notes: Notes, drafts: Sequence[OutletDraft]) -> list[float]:
    """Each outlet's share; those that say none have equal parts of what is left."""
    said = [draft.share for draft in drafts if draft.share is not None]
    unsaid = [draft for draft in drafts if not draft.table.said("share")]
    total = sum(said)
    if not all(draft.table.ok("share") for draft in drafts):
        return [draft.share or 0.0 for draft in drafts]
    if unsaid and total >= 1.0:
        _tell_shares(drafts, total, f"which leaves nothing for {_ids(unsaid)}")
    elif not unsaid and abs(total - 1.0) > SHARES_MAY_MISS:
        _tell_shares(drafts, total, "but the shares of all outlets are 1 (100 %) together")
    rest = (1.0 - total) / len(unsaid) if unsaid else 0.0
    for draft in unsaid:
        alone = len(drafts) == 1
        because = "the only outlet" if alone else "an equal part of what the others leave"
        draft.table.default("share", show_percent(rest), because)
    whole = 1.0 if unsaid else (total or 1.0)
    return [rest if draft.share is None else draft.share / whole for draft in drafts]


def _tell_shares(drafts: Sequence[OutletDraft], total: float, why: str) -> None:
    said = [draft for draft in drafts if draft.share is not None]
    said[-1].table.wrong(
        "share",
        f"the shares said are {show_percent(total)} together, {why}; correct them, "
        "or leave share out for equal parts",
    )


def _ids(drafts: Sequence[OutletDraft]) -> str:
    return ", ".join(draft.id for draft in drafts)
