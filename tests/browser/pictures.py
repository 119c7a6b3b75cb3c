"""Makes the pictures in `deploy/pictures/`: the demo's shop on a Friday, its week lived through.

    python -m tests.browser.pictures

It takes some minutes: the daemon ticks through the whole week. People there drain, test with a
blotter and see alarms as invented here.
"""

from __future__ import annotations

import math
import sys
import tempfile
import threading
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from zoneinfo import ZoneInfo

from PIL import Image
from selenium import webdriver
from selenium.webdriver.chrome.service import Service

from daemon import compose
from daemon.clock import (
    DAY_US,
    HOUR_US,
    MINUTE_US,
    SECOND_US,
    format_rfc3339,
    parse_rfc3339,
    to_datetime,
)
from daemon.demo import demo_site
from daemon.errors import JournalError
from daemon.journal import Acknowledge, Blotter, Body, Drain
from daemon.make_believe import MakeBelieveShop
from daemon.site import hours as opening
from sensors.emulated.hardware import EmulatedHardware
from sensors.reading import Reading
from sensors.sampling import HungBus, Sampler
from tests.browser.conftest import ARGUMENTS
from tests.browser.person import PHONE
from tests.tree import ROOT

FOLDER = ROOT / "deploy" / "pictures"
MONDAY_US = parse_rfc3339("2026-06-01T07:00:00Z")
LOOK_US = parse_rfc3339("2026-06-05T13:40:00Z")
PAGES = {"round": 1250, "spray": 1500, "week": 1500, "line": 1500}  # heights, CSS pixels
COLORS = 96


class _Clock:
    """Stands where it is put."""

    now = MONDAY_US

    def now_us(self) -> int:
        return self.now

    def monotonic(self) -> float:
        return self.now / SECOND_US

    def wait(self, seconds: float, stop: threading.Event) -> bool:
        raise AssertionError("nobody waits here")


@dataclass
class _Sampler:
    """Lets the shop live on before its parts are read."""

    sampler: Sampler
    shop: MakeBelieveShop

    def sample(self, now_us: int, deadline_s: float) -> list[Reading]:
        self.shop.advance_to(now_us)
        return self.sampler.sample(now_us, deadline_s, patient=True)

    def hung_buses(self) -> tuple[HungBus, ...]:
        return self.sampler.hung_buses()


@dataclass
class _People:
    """What is done in that week; figures are invented."""

    shop: MakeBelieveShop
    record: Callable[[Body], object]
    ahead_us: int  # of UTC, the shop's clock
    done: set[str] = field(default_factory=set)

    def at(self, now_us: int, alarms: list[tuple[str, int]]) -> None:
        """Do what it is time for."""
        day, of_day_us = divmod(now_us + self.ahead_us, DAY_US)
        for alarm, since_us in alarms:
            if now_us - since_us > 12 * MINUTE_US:
                self._once(f"{alarm} {since_us}", Acknowledge(alarm, "JR"))
        if of_day_us >= 17 * HOUR_US + 20 * MINUTE_US:
            self._drain(f"{day}", "tank", 0.05 * math.sin(day), "clear")
        for hours in (11.95, 14.6, 17.1):
            if of_day_us >= hours * HOUR_US:
                for trap in ("booth-coalescer", "riser"):
                    self._drain(f"{day} {hours}", trap, 0.04 * math.cos(day + hours), "milky")
        if of_day_us >= 8 * HOUR_US and day % 3 == 0:
            self._once(f"{day} blotter", Blotter("clear-coat", "clean", "TK"))

    def _drain(self, day: str, trap: str, off: float, look: str) -> None:
        held = self.shop.traps_kg[trap]
        volume_kg = round(held * 0.96 * (1.0 + off), 3)  # the cup reads a little low
        if self._once(f"{day} {trap}", Drain(trap, volume_kg=volume_kg, by="AM", look=look)):
            self.shop.drain(trap)

    def _once(self, what: str, body: Body) -> bool:
        if what in self.done:
            return False
        self.done.add(what)
        try:
            self.record(body)
        except JournalError as error:
            print(what, error, file=sys.stderr)
            return False
        return True


def main() -> None:
    """Live through the week, then look."""
    site, clock = demo_site(MONDAY_US, None), _Clock()
    zone = to_datetime(MONDAY_US).astimezone(ZoneInfo(site.timezone)).utcoffset()
    ahead_us = 0 if zone is None else round(zone.total_seconds()) * SECOND_US
    with tempfile.TemporaryDirectory() as folder, EmulatedHardware() as parts:
        setters = parts.fit(site.sensors)
        parts.make_noisy()
        held = {s.id: s.trap.holds_at_start_kg for s in site.line.stations if s.trap is not None}
        shop = MakeBelieveShop(
            MONDAY_US,
            setters,
            held,
            at_work=lambda at_us: opening.is_open(site.hours, site.timezone, at_us),
        )
        setting = compose.Setting(
            site, Path(folder) / "demo.db", parts, clock, 0, lambda sampler: _Sampler(sampler, shop)
        )
        with compose.running(setting, threading.Event()) as running:
            shell = running.shell
            people = _People(shop, shell.record, ahead_us)
            while clock.now < LOOK_US:
                clock.now += site.sample_every_us
                shell.tick(clock.now)
                if clock.now % MINUTE_US == 0:
                    raised = [
                        (each.id, each.since_us)
                        for each in shell.alarms()
                        if each.state == "unacknowledged"
                    ]
                    people.at(clock.now, raised)
                if clock.now % (6 * HOUR_US) == 0:
                    print(format_rfc3339(clock.now), file=sys.stderr)
            _take_pictures(running.server.url)


def _take_pictures(url: str) -> None:
    options = webdriver.ChromeOptions()
    options.binary_location = "/usr/bin/chromium"
    for argument in (*ARGUMENTS, "--hide-scrollbars"):
        options.add_argument(argument)
    driver = webdriver.Chrome(options, Service("/usr/bin/chromedriver"))
    FOLDER.mkdir(exist_ok=True)
    try:
        for page, height in PAGES.items():
            metrics = {"width": PHONE, "height": height, "deviceScaleFactor": 1, "mobile": True}
            driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", metrics)
            driver.get(f"{url}{page}")
            path = FOLDER / f"{page}.png"
            driver.save_screenshot(str(path))
            with Image.open(path) as taken:
                small = taken.convert("RGB").quantize(COLORS)
            small.save(path, optimize=True)
            print(path, path.stat().st_size, file=sys.stderr)
    finally:
        driver.quit()


if __name__ == "__main__":
    main()
