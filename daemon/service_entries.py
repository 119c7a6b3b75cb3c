"""What can be said of a part: which service entries a station takes, and why not another. Pure."""

from __future__ import annotations

from collections.abc import Mapping

from daemon.journal import Serviced
from daemon.moisture.description import Measured, Station
from daemon.moisture.dew_sensors import channels_of
from daemon.moisture.drains import SELF_EMPTYING
from daemon.site.types import Site

WITH_ELEMENT = ("separator", "coalescer", "refrigerated", "desiccant")
KIND_WORDS = {
    "intake": "where the compressor breathes",
    "receiver": "tank",
    "cooler": "cooler",
    "pipe": "pipe with a drip leg",
    "separator": "water separator",
    "coalescer": "coalescing filter",
    "regulator": "regulator",
    "refrigerated": "refrigerated dryer",
    "desiccant": "desiccant dryer",
}


def entries_of(site: Site, station: Station) -> tuple[Serviced, ...]:
    """What can be said of a station's parts, the likeliest first."""
    found: list[Serviced] = []
    if station.kind in WITH_ELEMENT or station.ice is not None:
        found.append("element changed")
    if station.trap is not None and station.trap.drain in SELF_EMPTYING:
        found.append("drain seen working")
    if station.id == site.line.stations[0].id:
        found.append("compressor serviced")
    if sensors_of(station):
        found.append("sensor replaced")
    return tuple(found)


def sensors_of(station: Station) -> tuple[str, ...]:
    """The sensors that speak of a station."""
    sources = (station.temperature, station.pressure, station.relative_humidity, station.around)
    channels = [each.channel for each in sources if isinstance(each, Measured)]
    if station.measured_dew_point is not None:
        channels += channels_of(station.measured_dew_point)
    if station.trap is not None:
        channels += [each.channel for each in station.trap.floats]
    names: Mapping[str, None] = dict.fromkeys(name.rpartition(".")[0] for name in channels)
    return tuple(names)


def why_not(site: Site, what: Serviced, station: Station, sensor: str = "") -> str:
    """Why this cannot be said of a station, and what can; "" when it can.

    `sensor` is the one that was replaced. One that speaks of no station (a motor's contact, a
    hose's slab) may be noted at any.
    """
    if what == "sensor replaced":
        if sensor not in (known := [each.id for each in site.sensors]):
            named = f'no sensor has the id "{sensor[:40]}"' if sensor else "say which sensor"
            return f"{named} (known: {', '.join(known) or 'none'})"
        theirs = [each.id for each in site.line.stations if sensor in sensors_of(each)]
        if not theirs or station.id in theirs:
            return ""
        reason = f"{sensor} does not speak of it (of {' and '.join(theirs)} it does)"
    elif what in entries_of(site, station):
        return ""
    else:
        reason = _lacks(site, what, station)
    kind = KIND_WORDS[station.kind]
    kind = kind if station.kind == "intake" else f"a {kind}"
    return f"{station.id} is {kind}, and {reason}. {_takes(site, station)}"


def _lacks(site: Site, what: Serviced, station: Station) -> str:
    if what == "element changed":
        return "has no element, cartridge or ice to change"
    if what == "compressor serviced":
        return f"not where the compressor stands: say it of {site.line.stations[0].id}"
    if station.trap is None:
        return "has no drain"
    if station.trap.drain == "none":
        return "its trap has no drain valve"
    return "its drain does not empty itself: record a drain when you open it"


def _takes(site: Site, station: Station) -> str:
    known = [f'"{each}"' for each in entries_of(site, station)]
    return f"It takes {' and '.join(known)}" if known else "It takes no such entry"
