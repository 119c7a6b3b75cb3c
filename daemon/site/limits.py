"""Checks pressures along the line: air never gains pressure on its way."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from daemon.moisture.description import Compressor, Fixed, Like
from daemon.site import defaults
from daemon.site.shape import upstream
from daemon.site.stations import Draft
from daemon.site.table import Table
from daemon.units import show_pressure


def tell_set_pressures(drafts: Sequence[Draft], switch: Table, compressor: Compressor) -> None:
    """Tell every regulator that is set above the highest pressure that its station can see."""
    if not switch.ok("cut_in", "cut_out"):
        return
    by_id = {draft.id: draft for draft in drafts}
    for draft in drafts:
        before = by_id.get(draft.after or "")
        if draft.set_pressure is None or before is None or not draft.table.ok("set", "after"):
            continue
        limit_pa, where = _highest(before, by_id, compressor)
        if draft.set_pressure.value <= limit_pa or where is None:
            continue
        units = draft.table.notes.units
        draft.table.wrong(
            "set",
            f"is above what can reach it: {where} is at most "
            f"{show_pressure(limit_pa, units, gauge=True)}; write a lower pressure, "
            "or correct the one before it",
        )


def tell_rising_pressures(drafts: Sequence[Draft]) -> None:
    """Tell every station that is said to stand above the pressure of one before it."""
    by_id = {draft.id: draft for draft in drafts}
    for draft in drafts:
        rule = draft.pressure
        if not isinstance(rule, Like) or rule.plus <= 0.0 or not draft.table.ok("pressure"):
            continue
        above = by_id.get(rule.station)
        if above is not None and not above.is_intake and above in upstream(draft, by_id):
            draft.table.wrong(
                "pressure",
                f'air loses pressure on its way, so it is lower than at "{above.id}"; '
                'write a minus, like plus = "-0.1 bar"',
            )


def _highest(
    draft: Draft, by_id: Mapping[str, Draft], compressor: Compressor
) -> tuple[float, str | None]:
    """The highest gauge pressure at a station and what sets it; None: not knowable yet."""
    stops = max(compressor.cut_in, compressor.cut_out, key=lambda each: each.value)
    limit_pa, where = stops.value + stops.give_or_take, "cut_out"
    path = [draft, *upstream(draft, by_id)]
    if not path[-1].is_intake or any(not each.table.ok("pressure", "set") for each in path):
        return limit_pa, None
    for each in path:
        found_pa = _said(each, by_id)
        if found_pa is not None and found_pa < limit_pa:
            limit_pa, where = found_pa, each.id
    return limit_pa, where


def _said(draft: Draft, by_id: Mapping[str, Draft]) -> float | None:
    """The highest pressure that a station's own literal or rule allows, gauge."""
    plus_pa = 0.0
    seen: set[str] = set()
    while isinstance(draft.pressure, Like) and draft.id not in seen:
        seen.add(draft.id)
        plus_pa += draft.pressure.plus + draft.pressure.give_or_take
        if draft.pressure.station not in by_id:
            return None
        draft = by_id[draft.pressure.station]
    if draft.is_intake or not isinstance(draft.pressure, Fixed):
        return None
    atmosphere_pa = 0.0 if draft.pressure.gauge else defaults.BAROMETER.value
    return draft.pressure.value + draft.pressure.give_or_take - atmosphere_pa + plus_pa
