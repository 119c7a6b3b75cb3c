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
from pathlib import Path

import numpy as np

from daemon import compose
from daemon.clock import ScaledClock
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
