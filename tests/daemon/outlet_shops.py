"""An invented shop with sensors at its spray gun, and records in which little changes."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from daemon.clock import HOUR_US
from daemon.site.types import Site
from sensors.reading import Reading
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, a_tick, site

AROUND = """
[[sensor]]
id = "booth-air"
driver = "bme280"
address = 0x77

[[sensor]]
id = "panel"
driver = "mlx90614"

[[sensor]]
id = "floor"
driver = "ds18b20"
serial = "28-00000c3d4e5f"

[[station]]
id = "intake"
"""
GUN = 'after = "booth-regulator"\n'
AT_GUN = 'surroundings = "booth-air"\nslab = "floor.temperature"\nsurface = "panel.temperature"\n'
DRY_BOWL = 'trap = { capacity = "120 ml", drain_at = "60 ml", separation = 0.999 }\n'

STILL: Mapping[str, float] = {
    "intake-air.temperature": 293.15,
    "intake-air.relative_humidity": 0.6,
    "intake-air.pressure": 101_300.0,
    "tank-gauge.pressure": 7.0e5,
    "pipe-end.temperature": 291.15,
    "booth-air.temperature": 294.15,
    "booth-air.relative_humidity": 0.5,
    "booth-air.pressure": 101_300.0,
    "panel.temperature": 293.15,
    "floor.temperature": 291.15,
    "motor.contact": 1.0,
}


def site_text(
    at_gun: str = AT_GUN, work: str = "solvent-borne", set_bar: float = 2.0, more: str = ""
) -> str:
    """Birch Works with a nearly perfect coalescer, so that dry air is possible at all."""
    text = SITE.replace('\n[[station]]\nid = "intake"\n', AROUND, 1)
    text = text.replace('trap = { capacity = "120 ml", drain_at = "60 ml" }\n', DRY_BOWL)
    text = text.replace('set = "3 bar"', f'set = "{set_bar} bar"')
    said = f'{at_gun}work = "{work}"\n' if work else at_gun
    return text.replace(GUN, GUN + said + more)


def a_shop(
    at_gun: str = AT_GUN, work: str = "solvent-borne", set_bar: float = 2.0, more: str = ""
) -> Site:
    """The site of that text."""
    return site(site_text(at_gun, work, set_bar, more))


def still(
    shop: Site, hours: float = 1.0, begun_us: int = BEGUN_US, **changed: float
) -> Iterator[Reading]:
    """A compressor that runs, a pressure that stands, and air around that stays as it is.

    `changed`: other values by channel, its dots and dashes written as underlines.
    """
    values = dict(STILL)
    names = {name.replace("-", "_").replace(".", "_"): name for name in values}
    for name, value in changed.items():
        values[names[name]] = value
    known = {name: value for name, value in values.items() if name in shop.channels}
    for number in range(round(hours * HOUR_US / PERIOD_US) + 1):
        yield from a_tick(shop, begun_us + number * PERIOD_US, known)
