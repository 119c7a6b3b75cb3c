"""Reads what a station says beyond its place: dryers, rated flows, coolants and ice."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

from daemon.moisture.description import (
    Compressor,
    Desiccant,
    Fixed,
    Measured,
    Power,
    Refrigerated,
    Share,
    Source,
    StationKind,
)
from daemon.site import defaults
from daemon.site.defaults import Usual
from daemon.site.names import Names
from daemon.site.sources import TEMPERATURE, Rules, read_source
from daemon.site.table import Table
from daemon.site.values import choice, flag
from daemon.site.widths import OF_FLOW, OF_MASS, OF_TEMPERATURE, read_fixed, read_share
from daemon.units import parse, show_difference, show_flow, show_temperature

DRYERS: tuple[StationKind, ...] = ("refrigerated", "desiccant")
# Which kinds of station each key belongs to.
BELONGS: dict[str, tuple[StationKind, ...]] = {
    "rated_flow": ("separator", "coalescer", "cooler", "refrigerated", "desiccant"),
    "dew_point": DRYERS,
    "powered": DRYERS,
    "off_when_closed": DRYERS,
    "in_service": DRYERS,
    "around": ("refrigerated",),
    "bed": ("desiccant",),
    "mass": ("desiccant",),
    "holds": ("desiccant",),
    "used_at_start": ("desiccant",),
    "purge": ("desiccant",),
    "approach": ("cooler",),
    "coolant": ("cooler",),
    "ice": ("cooler",),
}
KEYS = tuple(BELONGS)
OUTSIDE = "no station of the line says it"  # how warm a room or a coolant is
FLOW_LIMITS_M3_S = (1e-3 / 60, 1000.0 / 60)


@dataclass(frozen=True, slots=True)
class FittingDraft:
    """What a station's own keys say of it."""

    temperature: Source | None = None  # a cooler's, by its coolant
    approach: Fixed | None = None  # a cooler's above the room's, where no coolant is said
    rated_flow: Fixed | None = None  # of a separator and the like
    ice: Fixed | None = None
    dryer: Refrigerated | Desiccant | None = None
    rating_assumed: bool = False  # a dryer whose rated flow nobody said
    around: Measured | Fixed | None = None


def read_fittings(table: Table, kind: StationKind | None, names: Names) -> FittingDraft:
    """What the keys of `KEYS` say; those of other kinds have been told and taken out."""
    rated = read_fixed(table, "rated_flow", _flow, OF_FLOW, defaults.RATED_BECAUSE)
    if kind == "cooler":
        return replace(_cooled(table, names), rated_flow=rated)
    if kind == "refrigerated":
        dryer = Refrigerated(
            rated or defaults.UNRATED,
            _dew_point(table, defaults.REFRIGERATED),
            _power(table, names),
        )
        return FittingDraft(dryer=dryer, rating_assumed=rated is None, around=_around(table, names))
    if kind == "desiccant":
        return _desiccant(table, rated, names)
    return FittingDraft(rated_flow=rated)


def with_rating(table: Table, draft: FittingDraft, compressor: Compressor) -> FittingDraft:
    """A dryer whose rated flow nobody said has one that suits the compressor."""
    if not draft.rating_assumed or draft.dryer is None:
        return draft
    times, width = defaults.RATED_TO_DELIVERED.value, defaults.RATED_TO_DELIVERED.give_or_take
    delivered = compressor.delivered.value
    rated = Fixed(times * delivered, width * delivered)
    if not table.said("rated_flow"):
        shown = show_flow(rated.value, table.notes.units)
        half = show_flow(rated.give_or_take, table.notes.units)
        because = f"{times:g} times what the compressor delivers; its type plate says better"
        table.default("rated_flow", f"{shown} give or take {half}", because)
    return replace(draft, dryer=replace(draft.dryer, rated_flow=rated), rating_assumed=False)


# --- dryers ----------------------------------------------------------------------------------


def _power(table: Table, names: Names) -> Power:
    contact = table.read("powered", _contact(names), None)
    return Power(
        contact=contact,
        off_when_closed=table.value(
            "off_when_closed", flag, False, "false", "left on overnight, unless said"
        ),
        in_service=table.value("in_service", flag, True, "true", "air goes through it"),
    )


def _contact(names: Names) -> Callable[[object], str]:
    def read(raw: object) -> str:
        if not isinstance(raw, str):
            raise ValueError('must be a contact\'s channel in quotes, like "dryer-on.contact"')
        return names.channel(raw, "contact").name

    return read


def _dew_point(table: Table, usual: Usual) -> Fixed:
    lowest, highest = usual.limits

    def literal(raw: object) -> Fixed:
        value = parse(raw, "temperature")
        if not lowest <= value <= highest:
            ends = (show_temperature(end, table.notes.units) for end in usual.limits)
            raise ValueError(
                f"is no pressure dew point of such a dryer: {' to '.join(ends)}, at line pressure"
            )
        return Fixed(value, usual.value.give_or_take)

    if not table.said("dew_point"):
        shown = show_temperature(usual.value.value, table.notes.units)
        width = show_difference(usual.value.give_or_take, table.notes.units)
        table.default("dew_point", f"{shown} give or take {width}", usual.because)
    found = read_fixed(table, "dew_point", literal, OF_TEMPERATURE, defaults.SAID_BECAUSE)
    return found or usual.value


def _around(table: Table, names: Names) -> Measured | Fixed | None:
    rules = Rules(0.0, like=False, unlike=OUTSIDE)
    source = read_source(table, "around", TEMPERATURE, rules, names)
    if not table.said("around"):
        table.default("around", "as at the intake", "the air around the dryer")
    return source if isinstance(source, Measured | Fixed) else None


def _desiccant(table: Table, rated: Fixed | None, names: Names) -> FittingDraft:
    cartridge = table.said("mass") or table.said("holds") or table.said("used_at_start")
    usual = "cartridge" if cartridge else "twin"
    because = "it has a mass" if cartridge else 'twin beds that dry each other; else "cartridge"'
    bed = table.value(
        "bed", choice(("twin", "cartridge"), "kind of bed"), usual, f'"{usual}"', because
    )
    other = ("purge", "rated_flow") if bed == "cartridge" else ("mass", "holds", "used_at_start")
    for key in other:
        if table.said(key) and table.ok(key, "bed"):
            table.wrong(key, f"says nothing of a desiccant with {bed} beds; take it out")
    power = _power(table, names)
    if bed == "twin":
        dew_point = _dew_point(table, defaults.TWIN)
        purge = read_share(table, "purge", defaults.PURGE, defaults.PURGE_BECAUSE)
        dryer = Desiccant(dew_point, rated_flow=rated or defaults.UNRATED, purge=purge, power=power)
        return FittingDraft(dryer=dryer, rating_assumed=rated is None)
    dew_point = _dew_point(table, defaults.CARTRIDGE)
    holds = _holds(table)
    used = table.read("used_at_start", _used, 0.0)
    dryer = Desiccant(dew_point, holds=holds, held_at_start_kg=used * holds.value, power=power)
    return FittingDraft(dryer=dryer)


def _holds(table: Table) -> Fixed:
    """The water that a cartridge takes up: a share of its mass, both with their widths."""
    if not table.said("mass") and table.ok("bed"):
        table.wrong("mass", 'how much desiccant is in the cartridge? write e.g. mass = "1.5 kg"')
    because = defaults.SAID_BECAUSE
    mass = read_fixed(table, "mass", _mass("mass"), OF_MASS, because) or Fixed(1.0, 0.1)
    share: Share = read_share(table, "holds", defaults.SILICA, defaults.SILICA_BECAUSE)
    held = mass.value * share.value
    return Fixed(held, math.hypot(mass.value * share.give_or_take, share.value * mass.give_or_take))


def _used(raw: object) -> float:
    value = parse(raw, "fraction")
    if not 0.0 <= value <= 1.0:
        raise ValueError('is a share of what it takes up: from 0 (new) to 1 (spent), like "30 %"')
    return value


# --- coolers ---------------------------------------------------------------------------------


def _cooled(table: Table, names: Names) -> FittingDraft:
    """The temperature of air that leaves a cooler: its coolant's plus the approach."""
    coolant = read_source(
        table, "coolant", TEMPERATURE, Rules(0.0, like=False, unlike=OUTSIDE), names
    )
    ice = read_fixed(table, "ice", _mass("ice"), OF_MASS, defaults.SAID_BECAUSE)
    if not any(table.said(key) for key in ("approach", "coolant", "ice")):
        return FittingDraft()
    if table.said("ice") and table.said("coolant") and table.ok("ice", "coolant"):
        table.wrong(
            "coolant", "says twice what cools it: the ice is at 0 degC; take one of them out"
        )
    if table.said("temperature") and table.ok("temperature", "approach", "coolant", "ice"):
        table.wrong(
            "temperature",
            "is said twice: the coolant (or the room) and the approach make it; take it out, or "
            "take out approach, coolant and ice",
        )
    usual = defaults.ICE_APPROACH if table.said("ice") else defaults.APPROACH
    if not table.said("approach"):
        shown, width = (
            show_difference(each, table.notes.units) for each in (usual.value, usual.give_or_take)
        )
        table.default("approach", f"{shown} give or take {width}", defaults.APPROACH_BECAUSE)
    because = defaults.APPROACH_BECAUSE
    approach = read_fixed(table, "approach", _approach, OF_TEMPERATURE, because) or usual
    return FittingDraft(temperature=_outlet(table, approach, coolant), approach=approach, ice=ice)


def _outlet(table: Table, approach: Fixed, coolant: Source | None) -> Source | None:
    """The outlet's temperature; None where the room cools it."""
    if table.said("ice"):
        return Fixed(defaults.ICE_K + approach.value, approach.give_or_take)
    if isinstance(coolant, Measured):
        return replace(coolant, plus=approach.value, plus_give_or_take=approach.give_or_take)
    if isinstance(coolant, Fixed):
        width = math.hypot(coolant.give_or_take, approach.give_or_take)
        return Fixed(coolant.value + approach.value, width)
    return None


def _approach(raw: object) -> Fixed:
    value = parse(raw, "temperature difference")
    if not 0.0 <= value <= 60.0:
        raise ValueError("is no approach of a cooler: 0 to 60 K (0 to 108 degF)")
    return Fixed(value, defaults.APPROACH.give_or_take)


# --- figures ---------------------------------------------------------------------------------


def _flow(raw: object) -> Fixed:
    value = parse(raw, "flow")
    lowest, highest = FLOW_LIMITS_M3_S
    if not lowest <= value <= highest:
        raise ValueError("is no rated flow: 1 L/min to 1000 m3/min (0.04 to 35300 cfm) of free air")
    return Fixed(value, value * defaults.GIVE_OR_TAKE_SHARES["rated_flow"])


def _mass(key: str) -> Callable[[object], Fixed]:
    def read(raw: object) -> Fixed:
        value = parse(raw, "mass")
        if not 0.01 <= value <= 1000.0:
            raise ValueError("is no such mass: 10 g to 1000 kg (0.02 to 2200 lb)")
        return Fixed(value, value * defaults.GIVE_OR_TAKE_SHARES[key])

    return read
