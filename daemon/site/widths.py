"""Reads how wide a value is, and the values that no sensor gives: literals and shares."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from daemon.moisture.description import Fixed, Share
from daemon.site.table import Table
from daemon.unit_tables import EXAMPLES, Kind
from daemon.units import (
    People,
    parse,
    show_difference,
    show_flow,
    show_mass,
    show_percent,
    show_pressure_difference,
    show_volume,
)


@dataclass(frozen=True, slots=True)
class Width:
    """How the give_or_take of one kind of value is written and shown."""

    kind: Kind
    show: Callable[[float, People], str]
    percent_of_value: bool  # whether "10 %" means a share of the value
    widest: float  # beyond it, it is a mistake


OF_TEMPERATURE = Width("temperature difference", show_difference, False, 60.0)
OF_PRESSURE = Width("pressure difference", show_pressure_difference, True, 16e5)
OF_FRACTION = Width("fraction", lambda value, _: show_percent(value), False, 1.0)
OF_VOLUME = Width("volume", show_volume, True, 100.0)
OF_FLOW = Width("flow", show_flow, True, 1000.0 / 60)
OF_MASS = Width("mass", show_mass, True, 1000.0)


def give_or_take(
    inner: Table, width: Width, value: float | None, default: float, because: str
) -> float:
    """The half-width that a table says, in its unit or as a share of a known value."""
    if not inner.said("give_or_take") and because:
        inner.default("give_or_take", width.show(default, inner.notes.units), because)
    return inner.read("give_or_take", lambda raw: half_width(raw, width, value), default)


def half_width(raw: object, width: Width, value: float | None) -> float:
    """A give_or_take in SI. "10 %" is a share of `value`, where one is known ahead.

    Of what is itself a fraction (a humidity, a separation) per cents are points.
    """
    if width.kind != "fraction" and isinstance(raw, str) and raw.strip().endswith("%"):
        share = parse(raw, "fraction")
        if value is None or not width.percent_of_value:
            raise ValueError(f"a share says nothing here; write it like {EXAMPLES[width.kind]}")
        if share > 1.0:
            raise ValueError("is more than the value itself; at most 100 %")
        half = share * abs(value)
    else:
        half = parse(raw, width.kind)
    if half < 0:
        raise ValueError("a give or take is a half-width: it cannot be negative")
    if half > width.widest or (width.kind in ("volume", "flow", "mass") and value and half > value):
        raise ValueError("is wider than anything that could be; write how far off it may be")
    return half


def read_share(table: Table, key: str, default: Share, because: str) -> Share:
    """A fraction drawn between 0 and 1: 0.7, "70 %", or a table with value and give_or_take."""
    if not table.said(key):
        table.default(key, share_text(default), because)
        return default
    raw = table.values.get(key)
    if not isinstance(raw, dict):
        shown = show_percent(default.give_or_take)
        value = table.read(key, _fraction, None)
        if value is None:
            return default
        table.default(f"{key}.give_or_take", shown, because)
        share = Share(value, default.give_or_take)
    else:
        inner = table.sub(key, ("value", "give_or_take"))
        value = inner.value("value", _fraction, default.value, show_percent(default.value), because)
        width = give_or_take(inner, OF_FRACTION, None, default.give_or_take, because)
        share = Share(value, width)
        if inner.broken:
            table.broken.add(key)
            return default
    if share.value in (0.0, 1.0) and share.give_or_take > 0:
        table.wrong(key, _at_an_end(share.value))
        return default
    return share


def share_text(share: Share) -> str:
    """ "0.7 give or take 0.25"."""
    return f"{share.value:g} give or take {share.give_or_take:g}"


def _fraction(raw: object) -> float:
    value = parse(raw, "fraction")
    if not 0.0 <= value <= 1.0:
        raise ValueError('is a share: from 0 to 1 (or "0 %" to "100 %")')
    return value


def _at_an_end(value: float) -> str:
    near = 0.02 if value == 0.0 else 0.98
    return (
        f"exactly {value:g} leaves no room for a give or take; write {near}, "
        f"or {{ value = {value:g}, give_or_take = 0 }} if it is certain"
    )


def read_fixed(
    table: Table, key: str, literal: Callable[[object], Fixed], width: Width, because: str
) -> Fixed | None:
    """A value that no sensor gives: a literal, or a table with value and give_or_take.

    None when it is absent or wrong.
    """
    raw = table.values.get(key)
    if raw is None:
        return None
    if not isinstance(raw, dict):
        fixed = table.read(key, literal, None)
        if fixed is not None:
            shown = width.show(fixed.give_or_take, table.notes.units)
            table.default(f"{key}.give_or_take", shown, because)
        return fixed
    inner = table.sub(key, ("value", "give_or_take"))
    if not inner.said("value"):
        if not inner.broken:
            table.wrong(key, 'says no value; write { value = "...", give_or_take = "..." }')
        table.broken.add(key)
        return None
    fixed = inner.read("value", literal, None)
    if fixed is None or inner.broken:
        table.broken.add(key)
        return None
    half = give_or_take(inner, width, fixed.value, fixed.give_or_take, because)
    if inner.broken:
        table.broken.add(key)
        return None
    return Fixed(fixed.value, half, fixed.gauge)
