"""Site files of virtual shops: from a fully fitted rig down to the smallest. All are invented."""

from __future__ import annotations

from dataclasses import fields, is_dataclass, replace
from typing import Any, Literal

import numpy as np

from daemon.site.reader import parse_site
from daemon.site.types import Site

Rig = Literal["full", "tank sensor", "no pipe sensor", "smallest"]
RIGS: tuple[Rig, ...] = ("full", "tank sensor", "no pipe sensor", "smallest")
OFTEN = (0.4, 0.2, 0.2, 0.2)  # how often each is drawn
TRAPS = ("tank", "riser", "bowl")

_HEAD = """
[site]
id = "virtual"
name = "Virtual Works"
sample_every = "{period} s"

[hours]
mon = ["08:00-12:00", "13:00-17:30"]
tue = ["08:00-12:00", "13:00-17:30"]
wed = ["08:00-12:00", "13:00-17:30"]
thu = ["08:00-12:00", "13:00-17:30"]
fri = ["08:00-12:00", "13:00-17:30"]
sat = ["08:00-12:00", "13:00-17:30"]

[compressor]
free_air_delivery = {{ value = "{delivered} L/min", give_or_take = "10 %" }}
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
"""
_GAUGE = """
[[sensor]]
id = "tank-gauge"
driver = "pressure-transducer"
address = 0x48
input = 0
range = "0-12 bar"
"""
_THERMOMETER = """
[[sensor]]
id = "{name}"
driver = "ds18b20"
serial = "28-0000000000{number:02d}"
"""
_LINE = """
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
volume = "{volume} L"
{tank}

[[station]]
id = "riser"
kind = "pipe"
after = "tank"
{riser}
trap = {{ capacity = "{leg} ml", drain_at = "{leg_at} ml" }}

[[station]]
id = "bowl"
kind = "{bowl}"
after = "riser"
trap = {{ capacity = "{cup} ml", drain_at = "{cup_at} ml" }}

[[station]]
id = "booth-regulator"
kind = "regulator"
after = "bowl"
set = "3 bar"

[[outlet]]
id = "spray-gun"
after = "booth-regulator"

[model]
seed = {seed}
"""


def site_text(rig: Rig, random: np.random.Generator, seed: int, every_s: int) -> str:
    """A site file for one shop: sizes that a shop might have, the rig's sensors."""
    delivered = int(random.choice([120, 150, 200, 300]))
    scale = delivered / 150
    gauge, tank_probe, riser_probe = rig != "smallest", rig == "tank sensor", rig in RIGS[:2]
    tank = 'pressure = "tank-gauge.pressure"\n' if gauge else ""
    tank += 'temperature = "tank-end.temperature"' if tank_probe else ""
    leg, cup = round(500 * scale), round(250 * scale)
    parts = [_HEAD, _GAUGE if gauge else ""]
    parts += [_THERMOMETER.format(name="tank-end", number=1)] if tank_probe else []
    parts += [_THERMOMETER.format(name="pipe-end", number=2)] if riser_probe else []
    parts[0] = parts[0].format(period=every_s, delivered=delivered)
    line = _LINE.format(
        volume=int(random.choice([90, 100, 150, 200])),
        tank=tank,
        riser='temperature = "pipe-end.temperature"' if riser_probe else "",
        leg=leg,
        leg_at=leg // 2,
        bowl=str(random.choice(["coalescer", "separator"])),
        cup=cup,
        cup_at=cup // 2,
        seed=seed,
    )
    return "".join(parts) + line


def site_of(rig: Rig, random: np.random.Generator, seed: int, every_s: int) -> Site:
    """The same, as the ordinary reader understands it."""
    return parse_site(site_text(rig, random, seed, every_s), "virtual-works.toml")


def certain(site: Site) -> Site:
    """The same shop with every give_or_take 0: its values are what is so.

    All members then believe nearly the same, so that a few of them do.
    """
    found: Site = _without_widths(site)
    return replace(found, line=replace(found.line, members=8))


def _without_widths(part: Any) -> Any:
    if isinstance(part, tuple):
        return tuple(_without_widths(each) for each in part)
    if not is_dataclass(part) or isinstance(part, type):
        return part
    changed = {each.name: _without_widths(getattr(part, each.name)) for each in fields(part)}
    if "give_or_take" in changed:
        changed["give_or_take"] = 0.0
    return replace(part, **changed)
