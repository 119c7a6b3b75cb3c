"""Invented shops of many kinds, and records of them in which all sorts of things happen."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from daemon.clock import HOUR_US, MINUTE_US, SECOND_US
from daemon.journal import Drain, Entry
from daemon.moisture.along_course import Ints
from daemon.moisture.ensemble import Array
from daemon.record_arrays import Record, Told
from daemon.site import hours as opening
from daemon.site.types import Site
from sensors.reading import Channel, Reading, reading
from tests.daemon.dryer_shops import DRYER_SHOPS
from tests.daemon.outlet_shops import site_text
from tests.daemon.shops import SITE, site
from tests.daemon.willow_yard import SITE as WILLOW_YARD

HOURS = SITE[SITE.index("[hours]") : SITE.index("[compressor]")]
TANK = 'trap = { capacity = "15 L", drain_at = "600 ml" }\n'
BOWL = 'trap = { capacity = "120 ml", drain_at = "60 ml" }\n'
GUN = '[[outlet]]\nid = "spray-gun"\nafter = "booth-regulator"\n'

# no sensor at all, and nothing but a pressure switch's two settings
BARE = """
[site]
id = "larch-barn"
name = "Larch Barn"

[hours]
mon = ["08:00-17:00"]
tue = ["08:00-17:00"]

[compressor]
free_air_delivery = "150 L/min"
cut_in = "6 bar"
cut_out = "8 bar"

[[station]]
id = "intake"
kind = "intake"

[[station]]
id = "tank"
kind = "receiver"
after = "intake"
volume = "90 L"
trap = { capacity = "10 L", drain_at = "1 L", drain_every = "working day" }

[[outlet]]
id = "hose"
after = "tank"

[model]
members = 16
"""
ROOM_SENSOR = """
[[sensor]]
id = "room"
driver = "ds18b20"
serial = "28-00000a1b2c3d"
"""
SECOND_TANK = """
[[station]]
id = "far-tank"
kind = "receiver"
after = "riser"
volume = "40 L"
{pressure}trap = {{ capacity = "2 L", drain_at = "300 ml" }}

[[outlet]]
id = "blast-pot"
after = "far-tank"
share = 0.5

"""
FAR_GAUGE = """
[[sensor]]
id = "far-gauge"
driver = "pressure-transducer"
address = 0x48
input = 1
range = "0-12 bar"

[[sensor]]
id = "pipe-end"
"""
SWITCH = """
[[sensor]]
id = "riser-float"
driver = "float-switch"
line = 22
trap = "riser"
closes_at = "60 ml"

[[station]]
id = "intake"
"""


def _without(text: str, *sensors: str) -> str:
    """A site's text without these sensors, and without the lines that read them."""
    blocks = text.split("\n[[")
    kept = [each for each in blocks if not any(f'id = "{s}"\ndriver' in each for s in sensors)]
    lines = "\n[[".join(kept).splitlines(keepends=True)
    return "".join(line for line in lines if not any(f'= "{s}.' in line for s in sensors))


def _several(text: str, pressure: str) -> str:
    text = text.replace(GUN, SECOND_TANK.format(pressure=pressure).lstrip() + GUN + "share = 0.5\n")
    return text.replace('\n[[sensor]]\nid = "pipe-end"\n', FAR_GAUGE) if pressure else text


SHOPS: dict[str, str] = {
    "all measured": WILLOW_YARD.replace("[[outlet]]", "[model]\nmembers = 24\n\n[[outlet]]", 1),
    "contact and gauge": SITE,
    "always open": SITE.replace(HOURS, ""),
    "outlets watched": site_text(),
    "gauge without contact": _without(SITE, "motor"),
    "a gauge that is read too seldom": _without(SITE, "motor")
    .replace('name = "Birch Works"', 'name = "B"\nsample_every = "60 s"')
    .replace('volume = "100 L"', 'volume = "50 L"'),
    "contact without gauge": _without(SITE, "tank-gauge"),
    "contact alone": _without(SITE, "tank-gauge", "intake-air", "pipe-end"),
    "off at night": SITE.replace("[compressor]\n", "[compressor]\noff_when_closed = true\n"),
    "no sensors but one elsewhere": BARE.replace("\n[[station]]", ROOM_SENSOR + "\n[[station]]", 1),
    "small traps": SITE.replace(TANK, TANK.replace("15 L", "40 ml").replace("600 ml", "30 ml"))
    .replace(BOWL, BOWL.replace("120 ml", "6 ml").replace("60 ml", "5 ml"))
    .replace('capacity = "300 ml", drain_at = "150 ml"', 'capacity = "9 ml", drain_at = "8 ml"'),
    "two tanks": _several(SITE, ""),
    "two gauges": _several(SITE, 'pressure = "far-gauge.pressure"\n'),
    "a minute apart": SITE.replace('name = "Birch Works"', 'name = "B"\nsample_every = "60 s"'),
    "two seconds apart": SITE.replace('name = "Birch Works"', 'name = "B"\nsample_every = "2 s"'),
    "a float switch": SITE.replace('\n[[station]]\nid = "intake"\n', SWITCH, 1),
    **DRYER_SHOPS,
    "an open drain": SITE.replace(TANK, 'trap = { capacity = "15 L", drain = "float" }\n'),
    "a timer": SITE.replace(TANK, 'trap = { capacity = "15 L", drain = "timer" }\n'),
    "a drain for a line let down": SITE.replace(
        TANK, 'trap = { capacity = "15 L", drain = "pressure-off" }\n'
    ),
}


def a_shop(name: str, members: int = 16) -> Site:
    """One of the shops above, with few members."""
    lines = SHOPS[name].splitlines(keepends=True)
    text = "".join(each for each in lines if not each.startswith("members = "))
    if "[model]\n" in text:
        return site(text.replace("[model]\n", f"[model]\nmembers = {members}\n"))
    return site(f"{text}\n[model]\nmembers = {members}\n")


@dataclass(frozen=True, slots=True)
class Weather:
    """What happens in a record besides work."""

    begun_us: int
    hours: float
    cold: bool = False  # around 0 degC
    humid: bool = False
    trouble: float = 0.0  # about so many things that go wrong an hour
    edges: bool = False  # contacts tell of their changes only, at their own times
    shift_us: int = 0  # readings stand beside the ticks
    step_every: int = 1  # readings come at every tick, or at every so many


def a_record(shop: Site, weather: Weather, seed: int) -> Record:
    """What the sensors of a shop said."""
    random = np.random.default_rng(seed)
    period_us = shop.sample_every_us
    ticks = round(weather.hours * HOUR_US / period_us)
    times_us = weather.begun_us + np.arange(ticks + 1) * period_us
    is_open = np.array(
        [opening.is_open(shop.hours, shop.timezone, int(at_us)) for at_us in times_us]
    )
    gauge_pa, running = _plant(shop, random, is_open, period_us / 1e6)
    channels = {}
    for name, channel in shop.channels.items():
        values = _values(channel, random, weather, times_us, gauge_pa, running)
        chosen = np.ones(len(times_us), bool)
        chosen[:: weather.step_every] = True
        chosen &= np.arange(len(times_us)) % weather.step_every == 0
        at_us = times_us + (weather.shift_us if channel.quantity != "contact" else 0)
        if channel.quantity == "contact" and weather.edges:
            chosen = np.concatenate(([True], np.diff(values) != 0.0))
            at_us = at_us - random.integers(0, period_us, len(at_us)) * (at_us > at_us[0])
        values, chosen = _trouble(channel, random, weather, values, chosen)
        told = [
            reading(channel, float(value), int(when_us))
            for value, when_us in zip(values[chosen], at_us[chosen], strict=True)
        ]
        good = [each for each in told if each.good]
        if good:
            channels[name] = Told(
                np.array([each.time_us for each in good]), np.array([each.value for each in good])
            )
    return Record(channels)


def _plant(
    shop: Site, random: np.random.Generator, is_open: np.ndarray, period_s: float
) -> tuple[Array, Array]:
    """Gauge pressure, Pa, and whether the compressor runs, at every tick."""
    compressor = shop.line.compressor
    volume = sum(s.volume.value for s in shop.line.stations if s.volume is not None)
    delivered = compressor.delivered.value
    low, high = compressor.cut_in.value, compressor.cut_out.value
    gauge_pa, on, using = np.empty(len(is_open)), np.empty(len(is_open)), False
    pressure, running = (low + high) / 2.0, False
    for tick, works in enumerate(is_open):
        if random.random() < period_s / 300.0:
            using = bool(works) and random.random() < 0.6
        if not works:
            using = False
        may_run = bool(works) or not compressor.off_when_closed
        running = may_run and (pressure < low or (running and pressure < high))
        gauge_pa[tick], on[tick] = pressure, running
        net = delivered * running - delivered * (0.55 * using + 0.02)
        pressure = max(pressure + net * period_s / volume * 1e5, 0.0)
    return gauge_pa, on


def _values(
    channel: Channel,
    random: np.random.Generator,
    weather: Weather,
    times_us: Ints,
    gauge_pa: Array,
    running: Array,
) -> Array:
    """What one channel says when all is well."""
    hours = (times_us - times_us[0]) / HOUR_US + random.uniform(0.0, 24.0)
    noise = random.normal(0.0, 1.0, len(times_us))
    wave = np.sin(hours / 24.0 * 2.0 * math.pi)
    values: Array
    match channel.quantity:
        case "temperature" if channel.name.startswith("tank") or "skin" in channel.name:
            values = 300.0 + 5.0 * wave + 0.05 * noise
        case "temperature":
            values = (273.5 if weather.cold else 293.0) + 3.0 * wave + 0.03 * noise
        case "relative_humidity" if channel.sensor == "cell":
            values = np.clip(0.05 + 0.05 * wave + 0.001 * noise, 0.0, 1.0)
        case "relative_humidity":
            values = (0.88 if weather.humid else 0.55) + 0.1 * wave + 0.002 * noise
        case "pressure" if channel.gauge:
            lost = 2e4 if channel.name.startswith("far") else 0.0
            values = np.maximum(gauge_pa - lost + 300.0 * noise, 0.0)
        case "pressure":
            values = 101_000.0 + 300.0 * wave + 4.0 * noise
        case "contact" if "motor" in channel.name:
            values = running
        case "contact" if channel.sensor == "dryer-on":
            values = (np.sin(3.0 * hours) > -0.6).astype(np.float64)
        case "contact":
            values = (np.sin(hours) > 0.9).astype(np.float64)
        case _:
            values = 278.0 + wave + 0.05 * noise
    return values


def _trouble(
    channel: Channel, random: np.random.Generator, weather: Weather, values: Array, chosen: Array
) -> tuple[Array, Array]:
    """Silences, jumps, values that stand still, wet elements."""
    values, chosen = values.copy(), chosen.copy()
    length = len(values)
    for _ in range(random.poisson(weather.trouble * weather.hours / 4.0)):
        begins = int(random.integers(0, length))
        part = slice(begins, begins + int(random.integers(1, max(length // 8, 2))))
        kind = random.integers(0, 5)
        if kind == 0:
            chosen[part] = False
        elif kind == 1 and channel.quantity != "contact":
            values[begins : begins + int(random.integers(1, 9))] *= 1.08
        elif kind == 2:
            values[part] = values[begins]
        elif kind == 3 and channel.quantity == "relative_humidity":
            values[part] = 1.0
        elif kind == 4 and channel.gauge:
            values[part] = 0.0
    return values, chosen


def drains(shop: Site, weather: Weather, seed: int) -> list[Entry]:
    """Drains of all sorts, now and then, some of them between two ticks."""
    random = np.random.default_rng(seed)
    found: list[Entry] = []
    count = int(random.integers(0, 5))
    within_us = round(weather.hours * HOUR_US)
    for at in np.sort(random.integers(0, within_us + 5 * MINUTE_US, count)):
        trap = str(random.choice(list(shop.traps)))
        at_us = weather.begun_us + int(at) // SECOND_US * SECOND_US
        kind = random.integers(0, 3)
        volume_kg = float(random.uniform(0.0, 0.3))
        body = (Drain(trap), Drain(trap, "empty", 0.0), Drain(trap, "emptied", volume_kg))[kind]
        found.append(Entry(len(found) + 1, at_us, at_us, body))
    return found


def listed(record: Record) -> Sequence[Reading]:
    """The same readings one by one."""
    return record.readings(record.first_us - 1, record.last_us)
