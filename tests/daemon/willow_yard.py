"""The shop of the benchmarks: twelve channels, 128 members, ten stations. Invented.

    python -m tests.daemon.willow_yard STORE

runs its daemon, API and emulated parts included, for 200 ticks, and prints what it weighs.
"""

from __future__ import annotations

import json
import math
import sys
import threading
import urllib.request
from itertools import product
from pathlib import Path

import numpy as np

from daemon import compose
from daemon.clock import DAY_US, HOUR_US, MINUTE_US, ScaledClock
from daemon.journal import Drain, Entry
from daemon.moisture.along_course import Ints
from daemon.moisture.ensemble import Array
from daemon.record_arrays import Record, Told
from daemon.site import hours as opening
from daemon.site.reader import parse_site
from daemon.site.types import Site
from sensors.emulated.hardware import EmulatedHardware
from sensors.reading import Reading
from tests.daemon.shops import BEGUN_US, PERIOD_US, a_tick

SITE = """
[site]
id = "willow-yard"
name = "Willow Yard"

[hours]
mon = ["06:00-18:00"]

[compressor]
free_air_delivery = { value = "600 L/min", give_or_take = "10 %" }
running = "motor.contact"
cut_in = "7 bar"
cut_out = "9 bar"

[[sensor]]
id = "intake-air"
driver = "bme280"
address = 0x76

[[sensor]]
id = "booth-air"
driver = "bme280"
address = 0x77

[[sensor]]
id = "tank-gauge"
driver = "pressure-transducer"
address = 0x48
input = 0
range = "0-12 bar"

[[sensor]]
id = "far-gauge"
driver = "pressure-transducer"
address = 0x48
input = 1
range = "0-12 bar"

[[sensor]]
id = "skin"
driver = "ds18b20"
serial = "28-00000a1b2c01"

[[sensor]]
id = "riser-end"
driver = "ds18b20"
serial = "28-00000a1b2c02"

[[sensor]]
id = "main-end"
driver = "ds18b20"
serial = "28-00000a1b2c03"

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
id = "aftercooler"
kind = "cooler"
after = "intake"
trap = { capacity = "500 ml", drain_at = "300 ml" }

[[station]]
id = "tank"
kind = "receiver"
after = "aftercooler"
volume = "500 L"
temperature = "skin.temperature"
pressure = "tank-gauge.pressure"
trap = { capacity = "40 L", drain_at = "2 L" }

[[station]]
id = "riser"
kind = "pipe"
after = "tank"
temperature = "riser-end.temperature"
trap = { capacity = "400 ml", drain_at = "250 ml" }

[[station]]
id = "main"
kind = "pipe"
after = "riser"
temperature = "main-end.temperature"
trap = { capacity = "400 ml", drain_at = "250 ml" }

[[station]]
id = "separator"
kind = "separator"
after = "main"
trap = { capacity = "150 ml", drain_at = "100 ml" }

[[station]]
id = "coalescer"
kind = "coalescer"
after = "separator"
trap = { capacity = "150 ml", drain_at = "100 ml" }

[[station]]
id = "booth-regulator"
kind = "regulator"
after = "coalescer"
set = "3 bar"

[[station]]
id = "far-drop"
kind = "pipe"
after = "main"
pressure = "far-gauge.pressure"
trap = { capacity = "300 ml", drain_at = "150 ml" }

[[station]]
id = "pot-separator"
kind = "separator"
after = "far-drop"
trap = { capacity = "150 ml", drain_at = "100 ml" }

[[outlet]]
id = "spray-gun"
after = "booth-regulator"
share = 0.6
surroundings = "booth-air"

[[outlet]]
id = "blast-pot"
after = "pot-separator"
share = 0.4
"""


def willow_yard() -> Site:
    site = parse_site(SITE, "willow-yard.toml")
    assert len(site.channels) == 12
    assert (len(site.line.stations), site.line.members) == (10, 128)
    return site


def a_day(site: Site, ticks: int) -> list[tuple[int, list[Reading]]]:
    """A compressor that cycles on its pressure switch; all else wanders."""
    record, gauge_pa, on = [], 8e5, True
    generator = np.random.default_rng(1)
    for number in range(ticks):
        now_us = BEGUN_US + number * PERIOD_US
        wander = math.sin(number / 200.0)
        noise = generator.normal(0.0, 1.0, 12)
        values = {
            "intake-air.temperature": 295.0 + 3.0 * wander + 0.02 * noise[0],
            "intake-air.relative_humidity": 0.6 + 0.1 * wander + 0.001 * noise[1],
            "intake-air.pressure": 101_000.0 + 5.0 * noise[2],
            "booth-air.temperature": 294.0 + wander + 0.02 * noise[3],
            "booth-air.relative_humidity": 0.55 + 0.001 * noise[4],
            "booth-air.pressure": 101_000.0 + 5.0 * noise[5],
            "tank-gauge.pressure": gauge_pa + 300.0 * noise[6],
            "far-gauge.pressure": gauge_pa - 2e4 + 300.0 * noise[7],
            "skin.temperature": 305.0 + 4.0 * wander + 0.05 * noise[8],
            "riser-end.temperature": 297.0 + wander + 0.05 * noise[9],
            "main-end.temperature": 295.0 + wander + 0.05 * noise[10],
            "motor.contact": float(on),
        }
        record.append((now_us, a_tick(site, now_us, values)))
        gauge_pa += (600.0 * on - 300.0) / 60.0 * 10.0 / 500.0 * 1e5
        if not 7e5 <= gauge_pa <= 9e5:
            on = gauge_pa < 7e5
    return record


WORKING_WEEK = "".join(f'{day} = ["07:00-17:00"]\n' for day in ("mon", "tue", "wed", "thu", "fri"))


def working_willow_yard() -> Site:
    """The same shop, working from Monday to Friday."""
    return parse_site(SITE.replace('mon = ["06:00-18:00"]\n', WORKING_WEEK), "willow-yard.toml")


def a_record(site: Site, days: int) -> Record:
    """Days of work, evenings and nights with a leak, as arrays. Drawn from one seed."""
    generator = np.random.default_rng(3)
    ticks = days * DAY_US // PERIOD_US
    times_us = BEGUN_US + np.arange(ticks) * PERIOD_US
    hours = np.arange(ticks) / 360.0
    week, day = hours / 168.0 * 2.0 * np.pi, (hours - 3.0) / 24.0 * 2.0 * np.pi
    warm = 8.0 * np.sin(week / 26.0) + 3.0 * np.sin(day)
    gauge_pa, running = _plant(site, times_us, generator)

    def noise(sd: float) -> Array:
        return generator.normal(0.0, sd, ticks)

    values = {
        "intake-air.temperature": 289.0 + warm + noise(0.02),
        "intake-air.relative_humidity": 0.6 - 0.1 * np.sin(day) + 0.1 * np.sin(week) + noise(1e-3),
        "intake-air.pressure": 101_000.0 + 900.0 * np.sin(week * 1.7) + noise(4.0),
        "booth-air.temperature": 293.0 + 0.3 * warm + noise(0.02),
        "booth-air.relative_humidity": 0.5 + noise(1e-3),
        "booth-air.pressure": 101_000.0 + 900.0 * np.sin(week * 1.7) + noise(4.0),
        "tank-gauge.pressure": gauge_pa + noise(300.0),
        "far-gauge.pressure": gauge_pa - 2e4 + noise(300.0),
        "skin.temperature": 291.0 + warm + 8.0 * _smoothed(running) + noise(0.05),
        "riser-end.temperature": 290.0 + 0.9 * warm + noise(0.05),
        "main-end.temperature": 289.5 + 0.9 * warm + noise(0.05),
        "motor.contact": running,
    }
    return Record(
        {
            name: Told(
                times_us, np.rint(each / site.channels[name].step) * site.channels[name].step
            )
            for name, each in values.items()
        }
    )


def _plant(site: Site, times_us: Ints, generator: np.random.Generator) -> tuple[Array, Array]:
    """Gauge pressure, Pa, and whether the compressor runs, at every tick."""
    gauge_pa, running = np.empty(len(times_us)), np.empty(len(times_us))
    pressure_pa, on = 8e5, 1.0
    bursts = generator.random(len(times_us) // 30 + 1) < 0.6  # of five minutes each
    for number, at_us in enumerate(times_us.tolist()):
        gauge_pa[number], running[number] = pressure_pa, on
        uses = 0.04
        if number % 6 == 0:
            is_open = opening.is_open(site.hours, site.timezone, at_us)
        if is_open and bursts[number // 30]:
            uses = 0.7
        pressure_pa += (on - uses) * 600.0 / 60.0 * 10.0 / 500.0 * 1e5
        if not 7e5 <= pressure_pa <= 9e5:
            on = float(pressure_pa < 7e5)
    return gauge_pa, running


def _smoothed(running: Array) -> Array:
    """The duty with a lag of half an hour."""
    found, so_far = np.empty_like(running), 0.0
    for number, on in enumerate(running.tolist()):
        so_far += (on - so_far) / 180.0
        found[number] = so_far
    return found


def daily_drains(site: Site, days: int) -> list[Entry]:
    """Every trap, each working day at half past four."""
    first_us = BEGUN_US - BEGUN_US % DAY_US + 16 * HOUR_US + 30 * MINUTE_US
    at_us = [first_us + day * DAY_US for day in range(days) if day % 7 < 5]
    return [
        Entry(number, when_us, when_us, Drain(trap))
        for number, (when_us, trap) in enumerate(product(at_us, site.traps), 1)
    ]


def resident_mb() -> dict[str, float]:
    """What the kernel says of this process: VmRSS now, VmHWM at most."""
    lines = Path("/proc/self/status").read_text().splitlines()
    fields = (line.split() for line in lines if line.startswith(("VmRSS", "VmHWM")))
    return {name.rstrip(":"): int(kb) / 1024 for name, kb, _ in fields}


def main(store: str) -> None:
    """Run it, and print its weight as JSON."""
    site = willow_yard()
    with EmulatedHardware() as hardware:
        setters = hardware.fit(site.sensors)
        for reading in a_day(site, 1)[0][1]:
            setters[reading.channel](reading.value, BEGUN_US)
        setting = compose.Setting(site, Path(store), hardware, ScaledClock(1.0, BEGUN_US), 0)
        with compose.running(setting, threading.Event()) as parts:
            for number in range(200):
                parts.shell.tick(BEGUN_US + number * PERIOD_US)
            with urllib.request.urlopen(f"{parts.server.url}api/v1/traps") as answer:
                assert len(json.load(answer)) == len(site.traps)
            print(json.dumps(resident_mb()))


if __name__ == "__main__":
    main(sys.argv[1])
