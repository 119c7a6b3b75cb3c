"""What a practitioner would say about a line's dryers, baths and drains. Common practice."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from daemon.moisture.description import Desiccant, Station
from daemon.moisture.drains import STUCK_A_YEAR
from daemon.site.types import Site
from daemon.units import show_percent


def fitting_remarks(site: Site) -> Iterator[str]:
    """Remarks in the line's order."""
    by_id = {station.id: station for station in site.line.stations}
    for station in site.line.stations:
        yield from _dryer(station, by_id)
        yield from _drain(station)


def is_dried(station: Station, by_id: Mapping[str, Station]) -> bool:
    """Whether a dryer in service stands at or before a station."""
    return any(
        each.dryer is not None and each.dryer.power.in_service for each in _path(station, by_id)
    )


def _dryer(station: Station, by_id: Mapping[str, Station]) -> Iterator[str]:
    dryer = station.dryer
    if dryer is None:
        return
    if not dryer.power.in_service:
        yield f"{station.id} is out of service: it is taken for a pipe."
        return
    if dryer.power.contact is None:
        yield (
            f"Nothing says whether {station.id} runs, and switched off it dries nothing: wire a "
            'contact that closes while it does, as powered = "...".'
        )
    before = list(_path(station, by_id))[1:]
    if any(each.kind == "regulator" for each in before):
        yield (
            f"{station.id} hangs behind a regulator: at a low pressure it can take less, and more "
            "water comes with each litre. It belongs before the regulator."
        )
    if isinstance(dryer, Desiccant) and before[0].kind not in ("coalescer", "refrigerated"):
        yield (
            f"Drops that reach {station.id} spend it and spoil its beads: a coalescer belongs "
            "right before it."
        )


def _drain(station: Station) -> Iterator[str]:
    trap = station.trap
    if trap is None:
        return
    if station.kind == "refrigerated":
        yield (
            f"If the drain of {station.id} does not pass, wet air leaves it at a good dew-point "
            "display: look at the drain, not at the display."
        )
    if trap.drain in ("float", "timer", "level"):
        yield (
            f"The water in {station.id} is reckoned for a drain that works. "
            f"{show_percent(STUCK_A_YEAR)} of such drains stick within a year: see it work now "
            "and then, and record that it did."
        )


def _path(station: Station, by_id: Mapping[str, Station]) -> Iterator[Station]:
    """A station and all before it, nearest first."""
    at = station.id
    while at:
        yield by_id[at]
        at = by_id[at].after
