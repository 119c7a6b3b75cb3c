"""Checks the sensors that belong to a trap: float switches and buttons beside it."""

from __future__ import annotations

from collections.abc import Sequence

from daemon.moisture.description import WATER_KG_PER_M3
from daemon.site.names import Names
from daemon.site.notes import Notes, Unknown
from daemon.site.stations import Draft
from daemon.units import show_volume
from sensors.registry import SensorConfig


def tell_traps(
    notes: Notes, configs: Sequence[SensorConfig], stations: Sequence[Draft], names: Names
) -> None:
    """Tell every sensor that belongs to a trap that is not there or is too small for it."""
    by_id = {station.id: station for station in stations}
    for config in configs:
        trap = config.settings.get("trap")
        if trap is None:
            continue
        where = f'sensor "{config.id}"'
        if trap not in names.stations:
            try:
                names.station(trap)
            except Unknown as unknown:
                notes.unknown(unknown, where, "trap", trap)
            continue
        station = by_id.get(trap)
        if station is None or station.kind is None or not station.table.ok("trap"):
            continue
        if station.trap is None:
            traps = [each.id for each in stations if each.trap is not None]
            end = f"; traps are at {', '.join(traps)}" if traps else ""
            notes.problem(where, "trap", trap, f"this station has no trap{end}")
            continue
        closes_at_m3 = config.settings.get("closes_at", 0.0)
        if closes_at_m3 * WATER_KG_PER_M3 > station.trap.capacity.value:
            limit = show_volume(station.trap.capacity.value / WATER_KG_PER_M3, notes.units)
            remedy = f"is above the trap's capacity, {limit}; correct one of the two"
            shown = show_volume(closes_at_m3, notes.units)
            notes.problem(where, "closes_at", shown, remedy)
