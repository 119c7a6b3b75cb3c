"""Reads the `[compressor]` table."""

from __future__ import annotations

import math
from collections.abc import Callable

from daemon.moisture.description import Compressor, Fixed, Measured
from daemon.site import defaults
from daemon.site.names import Names
from daemon.site.notes import Notes
from daemon.site.plant import LIMIT_KEYS
from daemon.site.sources import gauge_pressure
from daemon.site.table import Table
from daemon.site.values import flag
from daemon.site.widths import OF_FLOW, OF_PRESSURE, read_fixed
from daemon.units import parse, show_flow, show_pressure

COMPRESSOR_KEYS = (
    "free_air_delivery", "displacement", "running", "loaded", "cut_in", "cut_out",
    "off_when_closed", "flow_meter", *LIMIT_KEYS,
)  # fmt: skip
FLOW_LIMITS_M3_S = (1e-3 / 60, 100.0 / 60)  # 1 L/min to 100 m3/min


def read_compressor(notes: Notes, raw: object, names: Names) -> tuple[Table, Compressor]:
    """The compressor; `running` is None unless the file says a contact."""
    table = Table(notes, "compressor", {} if raw is None else raw, COMPRESSOR_KEYS)
    running = table.read("running", _contact(names), None)
    loaded = table.read("loaded", _contact(names), None)
    compressor = Compressor(
        delivered=_delivered(table),
        running=loaded or running,
        cut_in=_switch(table, "cut_in", defaults.CUT_IN_PA),
        cut_out=_switch(table, "cut_out", defaults.CUT_OUT_PA),
        off_when_closed=table.value(
            "off_when_closed", flag, True, "true", "switched off overnight (practice): is it?"
        ),
        flow_meter=table.read("flow_meter", _meter(names), None),
    )
    if table.ok("cut_in", "cut_out") and compressor.cut_in.value >= compressor.cut_out.value:
        _tell_switch(table, compressor)
    return table, compressor


def choose_running(table: Table, compressor: Compressor, names: Names) -> str | None:
    """The contact that says when air is made: as said, or the only one that nobody else uses."""
    if table.said("running") or table.said("loaded"):
        return compressor.running
    free = [f"{sensor}.contact" for sensor in names.free("contact")]
    if len(free) > 1:
        table.wrong(
            "running",
            f"two or more contacts could be the compressor's: {', '.join(free)}; write "
            f'running = "{free[0]}" or another, or running = "none"',
        )
        return None
    if not free:
        return None
    names.used_channels.add(free[0])
    table.default("running", f'"{free[0]}"', "the only contact that nothing else uses")
    return free[0]


def _contact(names: Names) -> Callable[[object], str | None]:
    def read(raw: object) -> str | None:
        if not isinstance(raw, str):
            raise ValueError('must be a contact\'s channel in quotes, like "motor.contact"')
        return None if raw == "none" else names.channel(raw, "contact").name

    return read


def _meter(names: Names) -> Callable[[object], Measured]:
    def read(raw: object) -> Measured:
        if not isinstance(raw, str):
            raise ValueError('must be a meter\'s channel in quotes, like "meter.free_air_flow"')
        channel = names.channel(raw, "free_air_flow")
        return Measured(channel.name, channel.give_or_take)

    return read


def _flow(raw: object) -> float:
    value = parse(raw, "flow")
    lowest, highest = FLOW_LIMITS_M3_S
    if not lowest <= value <= highest:
        raise ValueError("is no compressor's flow: 1 L/min to 100 m3/min (0.04 to 3530 cfm)")
    return value


def _free_air(raw: object) -> Fixed:
    value = _flow(raw)
    return Fixed(value, value * defaults.GIVE_OR_TAKE_SHARES["free_air_delivery"])


def _delivered(table: Table) -> Fixed:
    if table.said("free_air_delivery") and table.said("displacement"):
        if table.ok("free_air_delivery", "displacement"):
            table.wrong(
                "displacement",
                "says the flow twice; keep free_air_delivery, the truer figure of the two",
            )
        return defaults.DELIVERED
    if table.said("displacement"):
        return _from_displacement(table)
    if not table.said("free_air_delivery"):
        shown, width = (
            show_flow(value, table.notes.units)
            for value in (defaults.DELIVERED.value, defaults.DELIVERED.give_or_take)
        )
        table.default(
            "free_air_delivery", f"{shown} give or take {width}", defaults.DELIVERED_BECAUSE
        )
    because = "of an ISO 1217 figure (practice)"
    return read_fixed(table, "free_air_delivery", _free_air, OF_FLOW, because) or defaults.DELIVERED


def _from_displacement(table: Table) -> Fixed:
    """Delivered is 0.65 +- 0.15 of the displacement; the figure's own width adds to that."""
    raw = table.values.get("displacement")
    if isinstance(raw, dict):
        swept = read_fixed(table, "displacement", lambda each: Fixed(_flow(each), 0.0), OF_FLOW, "")
    else:
        value = table.read("displacement", _flow, None)
        swept = None if value is None else Fixed(value, 0.0)
    if swept is None:
        return defaults.DELIVERED
    share = defaults.OF_DISPLACEMENT
    delivered = Fixed(
        share.value * swept.value,
        math.hypot(share.give_or_take * swept.value, share.value * swept.give_or_take),
    )
    shown, width = (
        show_flow(value, table.notes.units) for value in (delivered.value, delivered.give_or_take)
    )
    table.default(
        "free_air_delivery",
        f"{shown} give or take {width}",
        f"{share.value:g} give or take {share.give_or_take:g} of the displacement (practice)",
    )
    return delivered


def _switch(table: Table, key: str, default_pa: float) -> Fixed:
    default = Fixed(default_pa, defaults.GIVE_OR_TAKE_PA, gauge=True)
    if not table.said(key):
        shown = show_pressure(default_pa, table.notes.units, gauge=True)
        table.default(key, shown, defaults.CUT_BECAUSE)
    return read_fixed(table, key, gauge_pressure, OF_PRESSURE, defaults.SAID_BECAUSE) or default


def _tell_switch(table: Table, compressor: Compressor) -> None:
    cut_in, cut_out = (
        show_pressure(each.value, table.notes.units, gauge=True)
        for each in (compressor.cut_in, compressor.cut_out)
    )
    key, other = ("cut_in", "cut_out") if table.said("cut_in") else ("cut_out", "cut_in")
    by_default = "" if table.said(other) else " (a default)"
    table.notes.problem(  # both can be read: neither is broken for what depends on it
        table.where,
        key,
        table.values.get(key),
        f"the compressor starts at cut_in and stops at cut_out, so cut_in lies below; "
        f"here cut_in is {cut_in} and cut_out {cut_out}: correct {key}, or say {other}{by_default}",
    )
