"""Looks at every sensor of a site for `dripleg check`: at its parts, or at what a daemon heard."""

from __future__ import annotations

import logging
import threading
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path

from daemon.asking import ask, serves
from daemon.clock import Clock
from daemon.site.types import Site
from sensors.reading import Reading
from sensors.registry import DRIVERS, Hardware, SensorConfig
from sensors.sampling import SLOW_LIMIT_S, SLOW_PART_S, Sampler

NOTHING_YET = "nothing yet"
SECOND_LOOK_S = 2.0  # for what is counted between two looks
_DEVICES: dict[str, Callable[[str], str]] = {
    "i2c-": lambda name: f"/dev/{name}",
    "one-wire": lambda name: "/sys/bus/w1/devices",
    "gpio ": lambda name: name.removeprefix("gpio "),
    "modbus /": lambda name: name.removeprefix("modbus "),
}


@dataclass(frozen=True, slots=True)
class Said:
    """The last that a channel said."""

    value: float | None  # SI; None: it has no good one
    fault: str  # why, or "" while it is good; NOTHING_YET is no fault of anybody's


@dataclass(frozen=True, slots=True)
class Looked:
    """What came of a look at all sensors."""

    said: Mapping[str, Said]  # by channel
    source: str  # where it is from, in words
    missing: tuple[str, ...] = ()  # devices that this machine does not have

    def faults(self) -> dict[str, str]:
        """The channels that are not usable, with their reason."""
        return {
            name: one.fault
            for name, one in self.said.items()
            if one.fault and one.fault != NOTHING_YET
        }


def device_of(config: SensorConfig) -> str | None:
    """The file by which the machine reaches a sensor's bus; None where there is none."""
    bus = DRIVERS[config.driver].bus(config)
    for beginning, device in _DEVICES.items():
        if bus.startswith(beginning):
            return device(bus)
    return None


def missing_devices(site: Site, root: Path = Path("/")) -> tuple[tuple[str, ...], bool]:
    """Devices that the site's sensors need and this machine lacks; whether it lacks all of them."""
    needed = dict.fromkeys(device_of(config) for config in site.sensors)
    devices = [device for device in needed if device is not None]
    lacking = tuple(d for d in devices if not (root / d.lstrip("/")).exists())
    return lacking, bool(devices) and len(lacking) == len(devices)


@dataclass
class Looker:
    """Looks at the sensors of a site; once opened, as often as is wanted."""

    site: Site
    hardware: Hardware
    clock: Clock
    listen: Callable[[], None] = lambda: None  # let what other devices publish come in
    store_path: Path | None = None  # of the daemon, where it is not beside the site file
    _sampler: Sampler | None = field(default=None, init=False)
    _never: threading.Event = field(default_factory=threading.Event, init=False)
    _said: dict[str, Said] = field(default_factory=dict, init=False)

    def look(self) -> Looked:
        """Ask a daemon that runs, else read every part; nothing is read where no part can be."""
        if serves(self.site, self.store_path):
            return self._of_daemon()
        return self._of_parts()

    def close(self) -> None:
        """Let go of the parts."""
        if self._sampler is not None:
            self._sampler.close()
            self._sampler = None

    def _of_daemon(self) -> Looked:
        self.close()  # two programs must not drive one bus
        answer = ask(self.site, "health", store_path=self.store_path)
        channels = answer[1].get("channels", []) if answer is not None else []
        said = {one["channel"]: Said(one["value"], one["fault"]) for one in channels}
        return Looked(said, "as the running daemon last heard them")

    def _of_parts(self) -> Looked:
        logging.getLogger("sensors").setLevel(logging.CRITICAL)  # it is told below
        if self._sampler is None:
            self._sampler = Sampler(self.site.sensors, self.hardware, self.clock.monotonic)
            self._take(self._sample())
            self.listen()
            self.clock.wait(SECOND_LOOK_S, self._never)
        self._take(self._sample())
        said = {name: self._said.get(name, Said(None, NOTHING_YET)) for name in self.site.channels}
        return Looked(said, "read just now")

    def _sample(self) -> list[Reading]:
        assert self._sampler is not None
        limit_s = SLOW_LIMIT_S + SLOW_PART_S * len(self.site.sensors)
        return self._sampler.sample(self.clock.now_us(), limit_s, patient=True)

    def _take(self, readings: list[Reading]) -> None:
        for one in readings:
            self._said[one.channel] = Said(one.value if one.good else None, one.fault)
