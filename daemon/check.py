"""What `dripleg check` says of a site file: the line as understood, and what is only assumed.

Written for a tired person in a shop: plain words, in line order, under 100 columns.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass

from daemon.addresses import url_host
from daemon.check_reach import keys_words, signal_words
from daemon.moisture.description import (
    WATER_KG_PER_M3,
    Fixed,
    Line,
    Outlet,
    Source,
    Station,
    Trap,
)
from daemon.moisture.flow import is_gauged, shows_pump_ups
from daemon.moisture.margin import SLAB_GIVE_OR_TAKE_K, SLAB_K
from daemon.site.default_tables import defaults_table
from daemon.site.fitting_words import drain_words, station_words
from daemon.site.keeping import kept_words
from daemon.site.sensor_words import sensor_words
from daemon.site.types import DAY_NAMES, DefaultUsed, Hours, OutletSettings, Site
from daemon.site.words import source_words
from daemon.units import (
    show_difference,
    show_duration,
    show_flow,
    show_percent,
    show_pressure,
    show_volume,
)
from daemon.work import PROFILES
from sensors.registry import DRIVERS, SensorConfig

__all__ = ["Section", "defaults_table", "explain", "render", "sections"]

WIDTH = 96
_NAME = 20  # columns of a value's name
_BECAUSE = 50  # the column at which a default's reason begins
_ZONE = (
    "No Pi, sensor, cable, button or phone in the booth or near its openings unless rated for "
    "that zone: ask whoever zoned it"
)
_RULES = {
    "us": " (29 CFR 1910.107).",
    "metric": " (the local rules for explosive atmospheres).",
}
_CAUTIONS = (
    "The compressor starts by itself: isolate and lock it before touching belts or fittings. "
    "Discharge pipes burn.",
    "Never drill, weld or plug a receiver; no valve between it and its safety valve. Sensors go "
    "into a depressurised tee and are rated above the safety valve's setting.",
    "Crack a drain valve slowly, eyes and ears protected, the hose end held and never towards "
    "skin. Vent before unscrewing a bowl.",
    "The motor contact is an isolated auxiliary contact, fitted by an electrician.",
    "Condensate is oily: to a separator or a waste carrier, never to the drain.",
    "Does anybody breathe this air? Then stop: dripleg is not for breathing air, which has its "
    "own tests (EN 12021; Grade D).",
    "What dripleg says is an estimate of water only. It replaces no opening of the drain, no "
    "inspection of a pressure vessel, and not the paint maker's sheet.",
)


@dataclass(frozen=True, slots=True)
class Section:
    """A part of the explanation; a part without lines is left out."""

    title: str
    lines: tuple[str, ...]


def explain(site: Site) -> str:
    """All that the site file was taken to mean."""
    return render(sections(site))


def sections(site: Site) -> list[Section]:
    """The parts of the explanation in their order. What sensors read now may be put between."""
    return [
        Section(f"{site.name} ({site.id})", tuple(_shop(site))),
        Section("The line, in the order in which the air meets it", tuple(_line(site))),
        Section("The compressor", tuple(_compressor(site))),
        Section("Sensors", tuple(_sensors(site))),
        Section("Not said, so taken to be (write the key to say otherwise)", _assumed(site)),
        Section("Give or take not said, so taken to be", _widths(site)),
        Section("Checked, but without effect as yet", _items(site.without_effect)),
        Section("Remarks", _items(site.remarks)),
        Section("Cautions", _items((_ZONE + _RULES[site.units], *_CAUTIONS))),
    ]


def render(parts: Sequence[Section]) -> str:
    """Sections as text, titles underlined."""
    blocks = [
        "\n".join([part.title, "-" * len(part.title), *part.lines]) for part in parts if part.lines
    ]
    return "\n\n".join(blocks) + "\n"


# --- the shop --------------------------------------------------------------------------------


def _shop(site: Site) -> Iterator[str]:
    yield from _row("site file", site.path)
    yield from _row("time zone", site.timezone)
    yield from _row("units", site.units)
    yield from _row("sensors are read", f"every {show_duration(site.sample_every_us / 1e6)}")
    for number, text in enumerate(_hours(site.hours)):
        yield from _row("" if number else "open", text)
    if site.mqtt is not None:
        secured = ", over TLS" if site.mqtt.tls else ""
        yield from _row("broker", f"{site.mqtt.host} port {site.mqtt.port}{secured}")
    else:
        yield from _row("broker", "none: nothing is told over MQTT")
    yield from _row("readings are kept", kept_words(site.keeping))
    yield from _row("pages and API", f"http://{url_host(site.api.host)}:{site.api.port}/")
    yield from _row("keys", keys_words(site))
    if site.signal is not None:
        yield from _row(site.signal.kind, signal_words(site.signal))


def _hours(hours: Hours) -> Iterator[str]:
    if hours.always_open:
        yield "always"
        return
    for day, spans in zip(DAY_NAMES, hours.spans, strict=True):
        if spans:
            yield f"{day} " + ", ".join(f"{_clock(a)}-{_clock(b)}" for a, b in spans)
    if hours.holidays:
        yield f"not on {', '.join(sorted(hours.holidays))}"


def _clock(minutes: int) -> str:
    return f"{minutes // 60:02d}:{minutes % 60:02d}"


# --- the line --------------------------------------------------------------------------------


def _line(site: Site) -> Iterator[str]:
    for station in site.line.stations:
        after = f", after {station.after}" if station.after else ""
        yield f"{station.id} ({station.kind}{after})"
        yield from _station(site, station)
        for outlet in site.line.outlets:
            if outlet.after == station.id:
                yield f"{outlet.id} (outlet, after {station.id})"
                yield from _row("share", f"{show_percent(outlet.share)} of the air used")
                settings = next(each for each in site.outlets if each.id == outlet.id)
                yield from _outlet(site, outlet, settings)


def _station(site: Site, station: Station) -> Iterator[str]:
    def source(key: str, value: Source) -> Iterator[str]:
        text = source_words(site, key, value, barometer=station.kind == "intake")
        yield from _row(key.replace("_", " "), text + _mark(site, f'station "{station.id}"', key))

    yield from source("temperature", station.temperature)
    if station.relative_humidity is not None:
        yield from source("relative_humidity", station.relative_humidity)
    if station.kind == "regulator" and isinstance(station.pressure, Fixed):
        yield from source("set", station.pressure)
    else:
        yield from source("pressure", station.pressure)
    if station.volume is not None:
        width = show_volume(station.volume.give_or_take, site.units)
        text = f"{show_volume(station.volume.value, site.units)}, give or take {width}"
        yield from _row("volume", text + _mark(site, f'station "{station.id}"', "volume"))
    for what, words in station_words(station, site.units):
        yield from _row(what, words)
    for what, words in sensor_words(site, station):
        yield from _row(what, words)
    if station.trap is not None:
        yield from _trap(site, station.trap)
    elif station.kind in ("receiver", "separator", "coalescer"):
        yield from _row("trap", "none")


def _trap(site: Site, trap: Trap) -> Iterator[str]:
    def volume(kg: float) -> str:
        return show_volume(kg / WATER_KG_PER_M3, site.units)

    every = {"never": "", "working day": ", every working day"}
    drained = every.get(trap.drain_every, f", every {trap.drain_every.removeprefix('1 ')}")
    yield from _row(
        "trap", f"holds {volume(trap.capacity.value)}; due at {volume(trap.drain_at_kg)}"
    )
    by_itself = drain_words(trap, site.units)
    yield from _row("drain", f"{trap.drain}{drained}{': ' if by_itself else ''}{by_itself}")
    keeps = show_percent(trap.separation.value)
    width = show_percent(trap.separation.give_or_take)
    yield from _row("keeps", f"{keeps} of the liquid that comes, give or take {width}")
    if trap.heel_kg or trap.holds_at_start_kg:
        start = volume(trap.holds_at_start_kg)
        yield from _row(
            "water in it", f"{start} at the start; a drain leaves {volume(trap.heel_kg)}"
        )


def _outlet(site: Site, outlet: Outlet, settings: OutletSettings) -> Iterator[str]:
    if settings.work:
        yield from _row("work", settings.work)
    if settings.surroundings:
        yield from _row("air around it", f"sensor {settings.surroundings}")
    slab = f"sensor {outlet.slab.channel}" if outlet.slab is not None else _slab_guess(site)
    yield from _row("coldest under it", slab)
    if outlet.surface is not None:
        yield from _row("surface", f"sensor {outlet.surface.channel}")
    profile = PROFILES[settings.work]
    said = settings.line_margin_k
    by_work = f" (for {settings.work} work)" if settings.work else " (not said)"
    line = show_difference(profile.line_margin_k if said is None else said, site.units)
    asked = f"line {line}{by_work if said is None else ''}"
    if profile.surface_rule:
        asked += f", surface {show_difference(settings.surface_margin_k, site.units)}"
    yield from _row("margins asked for", asked)


def _slab_guess(site: Site) -> str:
    below, width = (show_difference(each, site.units) for each in (-SLAB_K, SLAB_GIVE_OR_TAKE_K))
    return f"{below} below the air around, give or take {width} (not said)"


# --- the compressor and the sensors ----------------------------------------------------------


def _unwatched(line: Line) -> str:
    """When a compressor without a contact is taken to make air."""
    if not is_gauged(line):
        return "nobody sees when: neither a contact nor the tank's pressure says so"
    if not shows_pump_ups(line):
        return "nobody sees when: no contact says so, and readings are too far apart"
    return "while the tank's pressure rises: no contact says so"


def _compressor(site: Site) -> Iterator[str]:
    compressor = site.line.compressor
    delivered, width = (
        show_flow(value, site.units)
        for value in (compressor.delivered.value, compressor.delivered.give_or_take)
    )
    mark = _mark(site, "compressor", "free_air_delivery")
    yield from _row("delivers", f"{delivered} of free air, give or take {width}{mark}")
    if compressor.flow_meter is not None:
        yield from _row("measured by", f"{compressor.flow_meter.channel}, while it speaks")
    if compressor.running is None:
        yield from _row("makes air", _unwatched(site.line))
    else:
        mark = _mark(site, "compressor", "running")
        yield from _row("makes air", f"while {compressor.running} is closed{mark}")
    starts, stops = (
        show_pressure(each.value, site.units, gauge=True)
        for each in (compressor.cut_in, compressor.cut_out)
    )
    mark = _mark(site, "compressor", "cut_in") or _mark(site, "compressor", "cut_out")
    yield from _row("pressure switch", f"starts at {starts}, stops at {stops} gauge{mark}")
    night = "off" if compressor.off_when_closed else "left on"
    mark = _mark(site, "compressor", "off_when_closed")
    yield from _row("when closed", f"{night} outside working hours{mark}")


def _sensors(site: Site) -> Iterator[str]:
    if not site.sensors:
        yield "  none"
    for config in site.sensors:
        yield from _row(config.id, f"{config.driver} at {'; '.join(_places(config))}")
        for channel in site.channels.values():
            if channel.sensor == config.id:
                yield from _row("", channel.name)


def _places(config: SensorConfig) -> tuple[str, ...]:
    driver = DRIVERS.get(config.driver)
    return driver.occupies(config) if driver is not None else ("an unknown place",)


# --- what is assumed -------------------------------------------------------------------------


def _assumed(site: Site) -> tuple[str, ...]:
    """Every default with its reason, by table."""
    return _by_table(each for each in site.defaults if not each.key.endswith("give_or_take"))


def _widths(site: Site) -> tuple[str, ...]:
    """What values are worth that are said without a give_or_take."""
    found = [each for each in site.defaults if each.key.endswith(".give_or_take")]
    lines: list[str] = []
    for table in dict.fromkeys(each.table for each in found):
        worth = [
            f"{each.key.removesuffix('.give_or_take')} {each.value}"
            for each in found
            if each.table == table
        ]
        lines += textwrap.wrap(
            f"[{table}] {', '.join(worth)}", WIDTH, initial_indent="  ", subsequent_indent="    "
        )
    return tuple(lines)


def _by_table(found: Iterable[DefaultUsed]) -> tuple[str, ...]:
    tables: dict[str, list[DefaultUsed]] = {}
    for each in found:
        tables.setdefault(each.table, []).append(each)
    lines: list[str] = []
    for table, rows in tables.items():
        lines.append(f"[{table}]")
        for each in rows:
            lines += _default(each)
    return tuple(lines)


def _default(each: DefaultUsed) -> list[str]:
    text = f"  {each.key} = {each.value}" if each.key else f"  {each.value}"
    because = textwrap.wrap(each.because, WIDTH - _BECAUSE) or [""]
    if len(text) < _BECAUSE - 1:
        text = f"{text:<{_BECAUSE}}{because.pop(0)}".rstrip()
    return [text, *(" " * _BECAUSE + line for line in because)]


def _mark(site: Site, table: str, key: str) -> str:
    """ " (not said)" behind a value that is a default."""
    found = any(each.table == table and each.key == key for each in site.defaults)
    return " (not said)" if found else ""


def _row(name: str, text: str) -> list[str]:
    head = f"  {name:<{_NAME - 2}}"
    return textwrap.wrap(
        text,
        WIDTH,
        initial_indent=head + (" " if len(head) > _NAME else ""),
        subsequent_indent=" " * _NAME,
        break_long_words=False,
        break_on_hyphens=False,
    )


def _items(sentences: Sequence[str]) -> tuple[str, ...]:
    lines: list[str] = []
    for sentence in sentences:
        lines += textwrap.wrap(
            sentence,
            WIDTH,
            initial_indent="  - ",
            subsequent_indent="    ",
            break_long_words=False,
            break_on_hyphens=False,
        )
    return tuple(lines)
