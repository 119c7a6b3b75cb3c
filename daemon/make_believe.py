"""The make-believe shop behind `dripleg demo`: how things "really" are there, second by second.

It is not the daemon's model: one shop with its own true figures, stepped plainly. It sets the
emulated parts in physical units; the real drivers read them. All figures are invented.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

from daemon.clock import SECOND_US
from daemon.moisture import air
from sensors.emulated.fit import Setter

DELIVERED_M3_S = 0.365 / 60.0  # a little less than the plate says
TANK_M3 = 0.2
CUT_IN_PA, CUT_OUT_PA = 7.0e5, 9.0e5  # gauge
BAROMETER_PA = 101_000.0
RISE_K, RISE_S = 17.0, 1500.0
SEPARATIONS = {
    "tank": 0.74,
    "riser": 0.55,
    "booth-coalescer": 0.97,
    "dryer": 0.98,
    "fine-coalescer": 0.97,
}
TO_DRYER = 0.3  # of the air used; the rest goes to the other gun
DRYER_K = 276.65  # what its coil cools to
FLOAT_OPENS_KG = 0.028
HEEL_KG = 0.004
LEAK_M3_S = 0.012 / 60.0


@dataclass(slots=True)
class MakeBelieveShop:
    """The truth. `advance_to` moves it on; `traps_kg` is what the traps really hold."""

    now_us: int
    setters: Mapping[str, Setter]
    traps_kg: dict[str, float]
    pressure_pa: float = 7.6e5  # gauge
    running: bool = False
    rise_k: float = 10.0
    vapor_kg: float = 0.0
    step_us: int = SECOND_US
    at_work: Callable[[int], bool] = lambda _: True  # outside working hours only leaks use air
    _begun_us: int = field(init=False)

    def __post_init__(self) -> None:
        self._begun_us = self.now_us
        self.vapor_kg = self._dry_kg() * self._saturated("tank")
        self._show()

    def advance_to(self, now_us: int) -> None:
        """Live on until a time, a second (or what the step is) at a time."""
        while self.now_us + self.step_us <= now_us:
            self.now_us += self.step_us
            self._step(self.step_us / SECOND_US)
        self._show()

    def drain(self, trap: str) -> None:
        """Somebody opened the drain: little stays behind."""
        self.traps_kg[trap] = min(self.traps_kg[trap], HEEL_KG)

    # ---- the air ----

    def _hours(self) -> float:
        return (self.now_us - self._begun_us) / 3.6e9

    def _room_k(self) -> float:
        return 295.15 + 1.5 * math.sin(self._hours() * 0.7)

    def _humidity(self) -> float:
        return 0.66 + 0.03 * math.sin(self._hours() * 1.1 + 0.5)

    def _tank_k(self) -> float:
        return self._room_k() + self.rise_k

    def _pipe_k(self) -> float:
        return self._room_k() - 2.5

    def _booth_k(self) -> float:
        """The booth is heated, and it takes its heat from the room."""
        return self._room_k() - 1.0

    def _panel_k(self) -> float:
        """A panel is brought in cold every two hours, and warms up with half an hour's lag."""
        return self._booth_k() - 9.0 * math.exp(-((self._hours() + 1.2) % 2.0) / 0.5)

    def _used_m3_s(self) -> float:
        """At work somebody sprays for five minutes out of eight."""
        if not self.at_work(self.now_us):
            return LEAK_M3_S
        seconds = (self.now_us - self._begun_us) // SECOND_US % 480
        return 0.330 / 60.0 if seconds < 300 else 0.030 / 60.0

    def _dry_kg(self) -> float:
        absolute = self.pressure_pa + BAROMETER_PA
        return TANK_M3 * air.dry_air_density(self._tank_k(), absolute, self._saturated("tank"))

    def _saturated(self, station: str) -> float:
        temperature_k = self._tank_k() if station == "tank" else self._pipe_k()
        return air.saturated_humidity_ratio(temperature_k, self.pressure_pa + BAROMETER_PA)

    def _step(self, seconds: float) -> None:
        room_k = self._room_k()
        ratio = air.humidity_ratio(room_k, BAROMETER_PA, self._humidity())
        density = air.dry_air_density(room_k, BAROMETER_PA, ratio)
        drawn = DELIVERED_M3_S * density * seconds if self.running else 0.0
        used = self._used_m3_s() * density * seconds
        self.rise_k += ((RISE_K if self.running else 0.0) - self.rise_k) * seconds / RISE_S
        held = self._dry_kg()
        self.pressure_pa += (drawn - used) / held * (self.pressure_pa + BAROMETER_PA)
        self._water(drawn, used, ratio, held)
        if self.running != self._switch():
            self.running = not self.running
            self._put("motor.contact", 1.0 if self.running else 0.0)

    def _switch(self) -> bool:
        if self.pressure_pa >= CUT_OUT_PA:
            return False
        return self.running or self.pressure_pa <= CUT_IN_PA

    def _water(self, drawn: float, used: float, ratio: float, held: float) -> None:
        self.vapor_kg += drawn * ratio
        total = held + drawn
        condensed = max(0.0, self.vapor_kg - total * self._saturated("tank"))
        self.vapor_kg -= condensed
        leaving = self.vapor_kg * used / total
        self.vapor_kg -= leaving
        carried = self._catch("tank", condensed)
        pipe = max(0.0, leaving - used * self._saturated("riser"))
        carried = self._catch("riser", carried + pipe)
        self._catch("booth-coalescer", carried * (1.0 - TO_DRYER))
        dry = air.saturated_humidity_ratio(DRYER_K, self.pressure_pa + BAROMETER_PA)
        chilled = TO_DRYER * max(0.0, leaving - pipe - used * dry)
        self._catch("fine-coalescer", self._catch("dryer", carried * TO_DRYER + chilled))
        # a ball float keeps its seat under water: it passes what is above its level, and no air
        self.traps_kg["dryer"] = min(self.traps_kg["dryer"], FLOAT_OPENS_KG)

    def _catch(self, trap: str, liquid: float) -> float:
        caught = SEPARATIONS[trap] * liquid
        self.traps_kg[trap] += caught
        return liquid - caught

    # ---- what the parts feel ----

    def _put(self, channel: str, value: float) -> None:
        self.setters[channel](value, self.now_us)

    def _show(self) -> None:
        self._put("intake-air.temperature", self._room_k())
        self._put("intake-air.relative_humidity", self._humidity())
        self._put("intake-air.pressure", BAROMETER_PA)
        self._put("tank-gauge.pressure", self.pressure_pa)
        self._put("pipe-end.temperature", self._pipe_k())
        self._put("booth-air.temperature", self._booth_k())
        self._put("booth-air.relative_humidity", 0.5 + 0.04 * math.sin(self._hours() * 0.9))
        self._put("booth-air.pressure", BAROMETER_PA)
        self._put("panel.temperature", self._panel_k())
