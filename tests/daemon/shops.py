"""Lines and records for the tests of the model: invented shops, small enough to read."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from daemon.clock import SECOND_US
from daemon.site.reader import parse_site
from daemon.site.types import Site
from sensors.reading import Reading, reading

BEGUN_US = 1_772_434_800_000_000  # 2026-03-02T07:00:00Z, a Monday
PERIOD_US = 10 * SECOND_US

SITE = """
[site]
id = "birch-works"
name = "Birch Works"

[hours]
mon = ["08:00-12:00", "13:00-17:30"]
tue = ["08:00-12:00", "13:00-17:30"]

[compressor]
free_air_delivery = { value = "150 L/min", give_or_take = "10 %" }
running = "motor.contact"
cut_in = "6 bar"
cut_out = "8 bar"

[[sensor]]
id = "intake-air"
driver = "bme280"
address = 0x76

[[sensor]]
id = "tank-gauge"
driver = "pressure-transducer"
address = 0x48
input = 0
range = "0-12 bar"

[[sensor]]
id = "pipe-end"
driver = "ds18b20"
serial = "28-00000a1b2c3d"

[[sensor]]
id = "motor"
driver = "contact"
chip = "/dev/gpiochip0"
line = 17

[[station]]
id = "intake"
kind = "intake"
temperature = "intake-air.temperature"
relative_humidity = "intake-air.relative_humidity"
pressure = "intake-air.pressure"

[[station]]
id = "tank"
kind = "receiver"
after = "intake"
volume = "100 L"
pressure = "tank-gauge.pressure"
trap = { capacity = "15 L", drain_at = "600 ml" }

[[station]]
id = "riser"
kind = "pipe"
after = "tank"
temperature = "pipe-end.temperature"
trap = { capacity = "300 ml", drain_at = "150 ml" }

[[station]]
id = "bowl"
kind = "coalescer"
after = "riser"
trap = { capacity = "120 ml", drain_at = "60 ml" }

[[station]]
id = "booth-regulator"
kind = "regulator"
after = "bowl"
set = "3 bar"

[[outlet]]
id = "spray-gun"
after = "booth-regulator"

[model]
members = 32
"""


def site(text: str = SITE) -> Site:
    """The site of a text, Birch Works by default."""
    return parse_site(text, "birch-works.toml")


def a_tick(shop: Site, now_us: int, values: dict[str, float]) -> list[Reading]:
    """Readings of one tick from SI values by channel."""
    return [reading(shop.channels[name], value, now_us) for name, value in values.items()]


def working(
    shop: Site, ticks: int, begun_us: int = BEGUN_US, humidity: float = 0.6
) -> Iterator[tuple[int, list[Reading]]]:
    """A compressor that cycles on its pressure switch while somebody uses 70 L/min."""
    gauge_pa, on = 6.2e5, True
    for number in range(ticks):
        now_us = begun_us + number * PERIOD_US
        yield (
            now_us,
            a_tick(
                shop,
                now_us,
                {
                    "intake-air.temperature": 293.15 + 2.0 * math.sin(number / 300.0),
                    "intake-air.relative_humidity": humidity + 0.05 * math.sin(number / 170.0),
                    "intake-air.pressure": 101_300.0 + 20.0 * math.sin(number / 50.0),
                    "tank-gauge.pressure": gauge_pa + 300.0 * math.sin(number * 1.7),
                    "pipe-end.temperature": 290.15 + 0.1 * math.sin(number / 20.0),
                    "motor.contact": float(on),
                },
            ),
        )
        gauge_pa += (150.0 * on - 70.0) / 60.0 * 10.0 / 100.0 * 1e5
        if not 6e5 <= gauge_pa <= 8e5:
            on = gauge_pa < 6e5


def flat(record: Sequence[tuple[int, list[Reading]]]) -> list[Reading]:
    """All readings of a record in order."""
    return [each for _, readings in record for each in readings]
