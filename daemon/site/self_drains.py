"""Reads how a drain empties itself: when it opens and closes, how often, and what it passes."""

from __future__ import annotations

from collections.abc import Callable

from daemon.moisture import drains
from daemon.moisture.description import WATER_KG_PER_M3, DrainKind, Emptying, Fixed
from daemon.site import defaults
from daemon.site.table import Table
from daemon.site.values import quantity
from daemon.site.widths import OF_FLOW, OF_VOLUME, read_fixed
from daemon.units import parse, show_duration, show_flow, show_volume

# Which kinds of drain each key belongs to.
BELONGS: dict[str, tuple[DrainKind, ...]] = {
    "opens_at": ("float", "level"),
    "closes_at": ("level",),
    "blows_every": ("timer",),
    "blows_for": ("timer",),
    "passes": ("float", "timer", "level"),
}
KEYS = tuple(BELONGS)
OPENS_BELOW_DRAIN_AT = 0.6  # of drain_at, at most, where nobody says at what level it opens
USUAL = "what such a drain does (estimate)"


def read_emptying(
    inner: Table, drain: DrainKind, capacity_m3: float, drain_at_m3: float
) -> Emptying | None:
    """How the drain of a trap works; None for one that does nothing by itself."""
    for key, kinds in BELONGS.items():
        if key in inner.values and drain not in kinds and inner.ok("drain"):
            one_of = " or ".join(kinds)
            inner.wrong(key, f"belongs to a drain of kind {one_of}, not {drain}; take it out")
    if drain in drains.LEFT_ALONE:
        return None
    usual = drains.usual(drain, capacity_m3 * WATER_KG_PER_M3)
    opens_at, closes_at_kg = usual.opens_at, usual.closes_at_kg
    if drain in BELONGS["opens_at"]:
        opens_at = _opens_at(inner, usual.opens_at, capacity_m3, drain_at_m3)
    if drain == "level":
        closes_at_kg = _closes_at(inner, min(closes_at_kg, 0.5 * opens_at.value), opens_at)
    period_s, open_s = _times(inner) if drain == "timer" else (0.0, 0.0)
    passes = usual.passes
    if drain in BELONGS["passes"]:
        passes = _passes(inner, usual.passes)
    return Emptying(opens_at, closes_at_kg, passes, period_s, open_s)


def _opens_at(inner: Table, usual: Fixed, capacity_m3: float, drain_at_m3: float) -> Fixed:
    most = OPENS_BELOW_DRAIN_AT * drain_at_m3 * WATER_KG_PER_M3
    default = usual if usual.value <= most else Fixed(most, most / 3.0)
    limit = show_volume(drain_at_m3, inner.notes.units)

    def literal(raw: object) -> Fixed:
        value = parse(raw, "volume")
        if not 0.0 < value <= capacity_m3:
            raise ValueError("is no level in this trap: more than 0, and its capacity at most")
        return Fixed(value, value * defaults.GIVE_OR_TAKE_SHARES["opens_at"])

    if not inner.said("opens_at"):
        shown, width = (
            show_volume(each / WATER_KG_PER_M3, inner.notes.units)
            for each in (default.value, default.give_or_take)
        )
        inner.default("opens_at", f"{shown} give or take {width}", USUAL)
    found = read_fixed(inner, "opens_at", literal, OF_VOLUME, defaults.SAID_BECAUSE)
    if found is None:
        return default
    if found.value >= drain_at_m3 and inner.ok("opens_at", "drain_at"):
        inner.wrong(
            "opens_at",
            f"is where a working drain opens, so it lies below drain_at, {limit}: a drain would "
            "always be due",
        )
    return Fixed(found.value * WATER_KG_PER_M3, found.give_or_take * WATER_KG_PER_M3)


def _closes_at(inner: Table, default_kg: float, opens_at: Fixed) -> float:
    opens_m3 = opens_at.value / WATER_KG_PER_M3

    def read(raw: object) -> float:
        value = parse(raw, "volume")
        if not 0.0 <= value < opens_m3:
            shown = show_volume(opens_m3, inner.notes.units)
            raise ValueError(f"lies from nothing to below opens_at, {shown}")
        return value

    default_m3 = default_kg / WATER_KG_PER_M3
    shown = show_volume(default_m3, inner.notes.units)
    return inner.value("closes_at", read, default_m3, shown, USUAL) * WATER_KG_PER_M3


def _times(inner: Table) -> tuple[float, float]:
    period_s = inner.value(
        "blows_every",
        quantity("duration", 10.0, 7 * 86400.0, "a timer blows every 10 s to every week"),
        drains.TIMER_PERIOD_S,
        show_duration(drains.TIMER_PERIOD_S),
        "a common setting (practice)",
    )
    open_s = inner.value(
        "blows_for",
        _shorter_than(period_s),
        min(drains.TIMER_OPEN_S, period_s / 2.0),
        show_duration(min(drains.TIMER_OPEN_S, period_s / 2.0)),
        "a common setting (practice)",
    )
    return period_s, open_s


def _shorter_than(period_s: float) -> Callable[[object], float]:
    def read(raw: object) -> float:
        value = parse(raw, "duration")
        if not 0.1 <= value < period_s:
            raise ValueError(
                f"is how long one blow lasts: 0.1 s to less than blows_every, "
                f"{show_duration(period_s)}"
            )
        return value

    return read


def _passes(inner: Table, usual: Fixed) -> Fixed:
    def literal(raw: object) -> Fixed:
        value = parse(raw, "flow")
        if not 0.0 < value <= 0.1:
            raise ValueError(
                'is a flow of water: more than 0, 6000 L/min at most, like "0.2 L/min"'
            )
        return Fixed(value, value * defaults.GIVE_OR_TAKE_SHARES["passes"])

    if not inner.said("passes"):
        shown, width = (
            show_flow(each / WATER_KG_PER_M3, inner.notes.units)
            for each in (usual.value, usual.give_or_take)
        )
        inner.default("passes", f"{shown} give or take {width} of water", USUAL)
    found = read_fixed(inner, "passes", literal, OF_FLOW, defaults.SAID_BECAUSE)
    if found is None:
        return usual
    return Fixed(found.value * WATER_KG_PER_M3, found.give_or_take * WATER_KG_PER_M3)
