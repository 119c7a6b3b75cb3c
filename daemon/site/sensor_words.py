"""A station's measured dew point, its trap's float switches and its button, in words."""

from __future__ import annotations

from collections.abc import Iterator

from daemon.moisture.description import WATER_KG_PER_M3, Measured, Station, VentedCell
from daemon.site.trap_sensors import buttons
from daemon.site.types import Site
from daemon.units import show_difference, show_percent, show_volume


def sensor_words(site: Site, station: Station) -> Iterator[tuple[str, str]]:
    """(what, words) of each."""
    match station.measured_dew_point:
        case Measured(channel=channel, give_or_take=width):
            shown = show_difference(width, site.units)
            yield "measured dew point", f"sensor {channel}, give or take {shown}"
        case VentedCell(relative_humidity=humidity):
            cell = humidity.channel.rpartition(".")[0]
            shown = show_percent(humidity.give_or_take)
            yield (
                "measured dew point",
                f"vented cell {cell}, give or take {shown} of humidity: dry air is only known to "
                "be below something",
            )
    if station.trap is None:
        return
    for one in station.trap.floats:
        level, about = (
            show_volume(kg / WATER_KG_PER_M3, site.units)
            for kg in (one.level.value, one.level.give_or_take)
        )
        yield "float switch", f"{one.channel} closes at {level}, give or take {about}"
    for channel, trap in buttons(site.sensors):
        if trap == station.id:
            yield "drained button", f"{channel}: a press says that it was emptied"
