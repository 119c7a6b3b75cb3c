"""Reads a station's trap: what collects liquid there, and how it is drained."""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import cast

from daemon.moisture.description import (
    WATER_KG_PER_M3,
    DrainKind,
    Fixed,
    Share,
    StationKind,
    Trap,
)
from daemon.site import defaults, self_drains
from daemon.site.defaults import TrapDefault
from daemon.site.table import Table
from daemon.site.values import choice
from daemon.site.widths import OF_VOLUME, read_fixed, read_share
from daemon.units import parse, show_percent, show_volume

TRAP_KEYS = (
    "drain", "drain_every", "capacity", "drain_at", "separation", "heel", "holds_at_start",
    "float_switch",
    *self_drains.KEYS,
)  # fmt: skip
DRAINS: tuple[DrainKind, ...] = ("petcock", "float", "timer", "level", "pressure-off", "none")
CAPACITY_LIMIT_M3 = 2.0

_EVERY = re.compile(r"(\d+(?:\.\d+)?)\s*(h|hours?|days?|weeks?)\Z")
_EVERY_S = {"h": 3600.0, "d": 86400.0, "w": 604800.0}


def read_trap(
    table: Table, kind: StationKind, volume: Fixed | None, separation: tuple[Share, str] | None
) -> Trap | None:
    """The trap of a station, None where there is none.

    `volume` is a receiver's; `separation` is what the station's own keys make of the kind's.
    """
    usual = defaults.KINDS[kind].trap
    raw = table.values.get("trap")
    if usual is None:
        if raw is not None and raw != "none":
            table.wrong("trap", _no_trap(kind))
        return None
    if raw == "none" or (raw is None and not usual.always):
        return None
    if raw is not None and not isinstance(raw, dict):
        table.wrong("trap", 'write trap = "none", or a table, like { capacity = "300 ml" }')
        return None
    if raw is None:
        table.default("trap", "a petcock", f'a {kind} has a drain; write trap = "none" if not')
    inner = table.sub("trap", TRAP_KEYS)
    trap = _trap(inner, kind, usual, volume, separation or (usual.separation, usual.because))
    table.broken.update(["trap"] if not inner.ok(*TRAP_KEYS) else [])
    return trap


def _no_trap(kind: StationKind) -> str:
    if kind == "regulator":
        return (
            "a regulator keeps no water; describe its bowl as a station of kind separator or "
            "coalescer before it"
        )
    return f"there is no water to keep at the {kind}; take it out"


def _trap(
    inner: Table,
    kind: StationKind,
    usual: TrapDefault,
    volume: Fixed | None,
    separation: tuple[Share, str],
) -> Trap:
    drain = _drain(inner)
    every, every_s = _drain_every(inner, kind, drain)
    capacity_m3 = _capacity(inner, usual, volume)
    drain_at_m3 = _drain_at(inner, usual, capacity_m3)
    held = {key: _held(inner, key, capacity_m3.value) for key in ("heel", "holds_at_start")}
    if inner.ok("heel", "drain_at") and held["heel"] >= drain_at_m3:
        limit = show_volume(drain_at_m3, inner.notes.units)
        inner.wrong("heel", f"is left behind by a drain, so it lies below drain_at, {limit}")
    return Trap(
        drain=drain,
        capacity=Fixed(
            capacity_m3.value * WATER_KG_PER_M3, capacity_m3.give_or_take * WATER_KG_PER_M3
        ),
        drain_at_kg=drain_at_m3 * WATER_KG_PER_M3,
        separation=read_share(inner, "separation", *separation),
        heel_kg=held["heel"] * WATER_KG_PER_M3,
        holds_at_start_kg=held["holds_at_start"] * WATER_KG_PER_M3,
        drain_every=every,
        every_s=every_s,
        emptying=self_drains.read_emptying(inner, drain, capacity_m3.value, drain_at_m3),
    )


def _drain(inner: Table) -> DrainKind:
    drain = inner.value(
        "drain",
        choice(DRAINS, "kind of drain"),
        "petcock",
        '"petcock"',
        "what a drain is, unless said",
    )
    return cast(DrainKind, drain)


def _drain_every(inner: Table, kind: StationKind, drain: DrainKind) -> tuple[str, float]:
    daily = kind == "receiver" and drain == "petcock"
    usual = "working day" if daily else "never"
    because = "a steel tank rusts: drain it daily" if daily else "when it is full enough"
    return inner.value("drain_every", _every, (usual, 0.0), f'"{usual}"', because)


def _every(raw: object) -> tuple[str, float]:
    """ "working day", "never", "week", "12 h", "3 days": as it is called, and in seconds."""
    remedy = 'write "working day", "never", "week", or a time like "12 h" or "3 days"'
    if not isinstance(raw, str):
        raise ValueError(remedy)
    words = " ".join(raw.lower().split())
    if words in ("working day", "never"):
        return words, 0.0
    match = _EVERY.match({"week": "1 week", "day": "1 day"}.get(words, words))
    if match is None:
        raise ValueError(remedy)
    seconds = float(match[1]) * _EVERY_S[match[2][0]]
    if not 3600.0 <= seconds <= 366 * 86400.0:
        raise ValueError(f"is from 1 h to a year; {remedy}")
    return words, seconds


def _capacity(inner: Table, usual: TrapDefault, volume: Fixed | None) -> Fixed:
    share = usual.capacity_of_volume
    if share and volume is not None:
        value_m3 = share * volume.value
        because = f"{show_percent(share)} of the tank's volume"
    else:
        value_m3 = usual.capacity_m3 or share * defaults.VOLUME.value
        because = "a usual size; measure or look it up"
    default = Fixed(value_m3, value_m3 * defaults.CAPACITY_GIVE_OR_TAKE)
    if not inner.said("capacity"):
        inner.default("capacity", show_volume(value_m3, inner.notes.units), because)
    because = defaults.SAID_BECAUSE
    found = read_fixed(inner, "capacity", _capacity_literal, OF_VOLUME, because)
    if found and volume and inner.ok("capacity") and found.value > volume.value:
        inner.wrong(
            "capacity",
            f"is more than the tank's volume, {show_volume(volume.value, inner.notes.units)}",
        )
    return found or default


def _capacity_literal(raw: object) -> Fixed:
    value = parse(raw, "volume")
    if not 0.0 < value <= CAPACITY_LIMIT_M3:
        raise ValueError("is no capacity of a trap: more than 0, and 2 m3 (528 gal) at most")
    return Fixed(value, value * defaults.GIVE_OR_TAKE_SHARES["capacity"])


def _volume_up_to(limit_m3: float, limit: str, lowest: str) -> Callable[[object], float]:
    def read(raw: object) -> float:
        value = parse(raw, "volume")
        if value < 0.0 or (value == 0.0 and lowest):
            raise ValueError(lowest or "a volume cannot be negative")
        if value > limit_m3:
            raise ValueError(f"is above the trap's capacity, {limit}; write a smaller volume")
        return value

    return read


def _limit(inner: Table, capacity_m3: float) -> tuple[float, str]:
    """The capacity as a limit for other keys; none while it is wrong itself."""
    if not inner.ok("capacity"):
        return float("inf"), ""
    by_default = "" if inner.said("capacity") else " (a default: say capacity)"
    return capacity_m3, show_volume(capacity_m3, inner.notes.units) + by_default


def _drain_at(inner: Table, usual: TrapDefault, capacity: Fixed) -> float:
    default = usual.drain_at * capacity.value
    lowest = "must be more than nothing, or the drain would always be due"
    return inner.value(
        "drain_at",
        _volume_up_to(*_limit(inner, capacity.value), lowest),
        default,
        show_volume(default, inner.notes.units),
        f"{show_percent(usual.drain_at)} of the capacity",
    )


def _held(inner: Table, key: str, capacity_m3: float) -> float:
    return inner.read(key, _volume_up_to(*_limit(inner, capacity_m3), ""), 0.0)
