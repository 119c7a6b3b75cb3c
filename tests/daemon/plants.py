"""A tank, a compressor and a leak, reckoned apart from the model: an invented shop's physics.

The tank's air is an ideal gas at one temperature; the leak is choked, a share of the stock per
second. The gun uses what a function says.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass

from daemon.clock import SECOND_US
from daemon.site import hours as opening
from daemon.site.types import Site
from sensors.reading import Reading
from tests.daemon.shops import a_tick

GAS, BAROMETER_PA = 287.055, 101_300.0
REFERENCE_KG_PER_M3 = 1.0e5 / (287.055 * 293.15)


@dataclass
class Plant:
    """What is true of the plant."""

    site: Site
    volume_m3: float = 0.1
    delivered_l_min: float = 150.0  # of the air at the intake
    leak_l_min: float = 5.0  # reference litres, at 7 bar gauge
    ambient_k: Callable[[float], float] = lambda hour: 291.15 + 3.0 * math.sin(hour / 24 * 6.28)
    rise_k: float = 15.0  # of the tank over its room, at full duty
    used_l_min: Callable[[int], float] = lambda now_us: 0.0
    on_when_closed: bool = False
    relative_humidity: float = 0.55
    noise_pa: float = 200.0
    step_s: int = 1

    def record(self, from_us: int, seconds: int, period_s: int) -> Iterator[list[Reading]]:
        """The readings of each tick."""
        warm = 0.0
        room_k = self.ambient_k(0.0)
        stock = 8.0e5 * self.volume_m3 / (GAS * room_k)
        on = False
        for second in range(0, seconds, self.step_s):
            now_us = from_us + second * SECOND_US
            room_k = self.ambient_k(now_us / 3.6e9 % 24.0)
            tank_k = room_k + warm
            pressure = stock * GAS * tank_k / self.volume_m3
            if second % period_s == 0:
                noise = self.noise_pa * math.sin(second * 1.7)
                yield self._readings(now_us, room_k, pressure - BAROMETER_PA + noise, on)
            is_open = opening.is_open(self.site.hours, self.site.timezone, now_us)
            on = self._switch(on, pressure - BAROMETER_PA, is_open or self.on_when_closed)
            warm += ((self.rise_k if on else 0.0) - warm) / 1800.0 * self.step_s
            density = BAROMETER_PA / (GAS * room_k)
            leak = self.leak_l_min / 60e3 * REFERENCE_KG_PER_M3 * pressure / (7e5 + BAROMETER_PA)
            used = self.used_l_min(now_us) / 60e3 * REFERENCE_KG_PER_M3
            gone = (leak + used) * (pressure > 1.5e5)
            stock += (on * self.delivered_l_min / 60e3 * density - gone) * self.step_s

    def _switch(self, on: bool, gauge_pa: float, may_run: bool) -> bool:
        if not may_run or gauge_pa >= 8e5:
            return False
        return on or gauge_pa <= 6e5

    def _readings(self, now_us: int, room_k: float, gauge_pa: float, on: bool) -> list[Reading]:
        values = {
            "intake-air.temperature": room_k,
            "intake-air.relative_humidity": self.relative_humidity,
            "intake-air.pressure": BAROMETER_PA,
            "tank-gauge.pressure": gauge_pa,
            "pipe-end.temperature": room_k - 1.0,
            "motor.contact": float(on),
        }
        known = {name: each for name, each in values.items() if name in self.site.channels}
        return a_tick(self.site, now_us, known)
