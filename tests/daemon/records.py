"""Recorded files for tests, and a shop in which nothing is uncertain."""

from __future__ import annotations

import csv
from collections.abc import Iterable, Mapping
from pathlib import Path

from daemon.clock import format_rfc3339
from daemon.site.reader import parse_site
from daemon.site.types import Site
from daemon.units import recorded_from_si
from sensors.reading import Reading

# Every width is nought: but for each round's own error in what a trap holds, whose median is none,
# all members are alike, and plain arithmetic can check them. Invented.
EXACT = """
[site]
id = "elm-row"
name = "Elm Row Joinery"
sample_every = "{sample_every}"

[compressor]
free_air_delivery = {{ value = "{delivery}", give_or_take = "0 %" }}
running = "motor.contact"
cut_in = "6 bar"
cut_out = "8 bar"

[[sensor]]
id = "intake-air"
driver = "bme280"
address = 0x76

[[sensor]]
id = "motor"
driver = "contact"
chip = "/dev/gpiochip0"
line = 17

[[station]]
id = "intake"
kind = "intake"
temperature = {{ channel = "intake-air.temperature", give_or_take = "0 K" }}
relative_humidity = {{ channel = "intake-air.relative_humidity", give_or_take = "0 %" }}
pressure = {{ channel = "intake-air.pressure", give_or_take = "0 bar" }}

[[station]]
id = "tank"
kind = "receiver"
after = "intake"
volume = {{ value = "{volume}", give_or_take = "0 %" }}
temperature = {{ value = "{cooled_to}", give_or_take = "0 K" }}
pressure = {{ value = "{pressure}", give_or_take = "0 bar" }}
trap = {{ capacity = {{ value = "{capacity}", give_or_take = "0 %" }}, drain_at = "{drain_at}", \
separation = {{ value = 1.0, give_or_take = 0 }}, holds_at_start = "{holds_at_start}" }}

[[outlet]]
id = "hose"
after = "tank"

[model]
members = 16
"""
_SAID = {
    "sample_every": "10 s",
    "delivery": "150 L/min",
    "volume": "100 L",
    "capacity": "50 L",
    "cooled_to": "20 degC",
    "pressure": "8 bar",
    "drain_at": "600 ml",
    "holds_at_start": "0 ml",
}


def exact_text(**said: str) -> str:
    """The site file of Elm Row, with some things said otherwise."""
    return EXACT.format(**(_SAID | said))


def exact(**said: str) -> Site:
    """Elm Row, with some things said otherwise."""
    return parse_site(exact_text(**said), "elm-row.toml")


def write_readings(path: Path, site: Site, readings: Iterable[Reading]) -> None:
    """Readings as a recorded file, in their order."""
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(["time", "channel", "value", "unit"])
        for each in readings:
            channel = site.channels[each.channel]
            value, unit = recorded_from_si(each.value, channel.quantity, gauge=channel.gauge)
            writer.writerow([format_rfc3339(each.time_us), each.channel, repr(value), unit])


def rows(path: Path) -> list[Mapping[str, str]]:
    """The rows of a file that was written."""
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))
