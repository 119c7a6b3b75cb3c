"""`dripleg demo`: the real drivers and the real daemon on a make-believe shop, sped up."""

from __future__ import annotations

import re
import tempfile
import threading
from dataclasses import replace
from importlib import resources
from pathlib import Path
from zoneinfo import ZoneInfo

from daemon import compose, logs
from daemon.clock import MINUTE_US, SECOND_US, ScaledClock, SystemClock, to_datetime
from daemon.due import interval_words, volume_words
from daemon.errors import DriplegError
from daemon.journal import Drain, Entry, Undo
from daemon.make_believe import MakeBelieveShop
from daemon.site import hours as opening
from daemon.site.reader import parse_site
from daemon.site.types import Mqtt, Site
from sensors.emulated.hardware import EmulatedHardware
from sensors.reading import Reading
from sensors.sampling import HungBus, Sampler

SAY_EVERY_S = 5.0
LOOK_EVERY_S = 0.25
LATE_AFTER_S = 10.0  # here, without a tick there
SLOWEST, FASTEST = 1.0, 600.0


class DemoError(DriplegError, ValueError):
    """An option of the demo that cannot be used."""


class _ShopSampler:
    """Lets the make-believe shop live on before its parts are read."""

    def __init__(self, sampler: Sampler, shop: MakeBelieveShop) -> None:
        self._sampler, self._shop = sampler, shop
        self._let_out_kg: dict[int, float] = {}  # by a drain's number in the journal
        self._lock = threading.Lock()

    def sample(self, now_us: int, deadline_s: float) -> list[Reading]:
        with self._lock:
            self._shop.advance_to(now_us)
        return self._sampler.sample(now_us, deadline_s, patient=True)

    def hung_buses(self) -> tuple[HungBus, ...]:
        return self._sampler.hung_buses()

    def drain(self, entry: Entry) -> None:
        """What is recorded has really been done there, and what is undone never was."""
        with self._lock:
            match entry.body:
                case Drain(trap=trap, outcome="emptied" | "empty"):
                    held_kg = self._shop.traps_kg[trap]
                    self._shop.drain(trap)
                    self._let_out_kg[entry.seq] = held_kg - self._shop.traps_kg[trap]
                case Undo(trap=trap, entry=seq):
                    self._shop.traps_kg[trap] += self._let_out_kg.pop(seq, 0.0)


def seconds(text: str) -> float:
    """ "90s", "90", "5 min", "1 h" in seconds; DemoError when it is not a length of time."""
    match = re.fullmatch(r"\s*(\d+(?:\.\d+)?)\s*(s|min|m|h)?\s*", text)
    if match is None or float(match[1]) <= 0.0:
        raise DemoError(f'--for "{text}": write a length of time like 90s or 5min')
    return float(match[1]) * {"s": 1, "m": 60, "min": 60, "h": 3600, None: 1}[match[2]]


def broker(text: str) -> Mqtt:
    """The broker of `--broker HOST:PORT`; DemoError when it is not one."""
    host, _, port = text.rpartition(":")
    if not host or not port.isdigit() or not 0 < int(port) < 65536:
        raise DemoError(f'--broker "{text}": write HOST:PORT, like 127.0.0.1:1883')
    return Mqtt(host=host.strip("[]"), port=int(port))


def demo_site(start_us: int, mqtt: Mqtt | None) -> Site:
    """The make-believe shop's site file, in a time zone in which it is mid-morning now."""
    text = resources.files("daemon").joinpath("demo-site.toml").read_text(encoding="utf-8")
    ahead = (10 - to_datetime(start_us).hour + 12) % 24 - 12
    # the sign of these zones' names is the wrong way round: Etc/GMT-3 is three hours ahead
    zone = f"Etc/GMT{-ahead:+d}" if ahead else "UTC"
    return replace(parse_site(text, "demo-site.toml"), timezone=zone, mqtt=mqtt)


def run(port: int, length: str | None, broker_at: str | None, speed: float) -> None:
    """Run the demo until it is stopped, or for a length of time."""
    if not SLOWEST <= speed <= FASTEST:
        raise DemoError(f"--speed {speed:g}: give a number from {SLOWEST:g} to {FASTEST:g}")
    if not 0 <= port <= 65535:
        raise DemoError(f"--port {port}: give a number from 1 to 65535, or 0 for a free one")
    limit_s = seconds(length) if length is not None else None
    mqtt = broker(broker_at) if broker_at is not None else None
    logs.set_up(verbose=False, quiet=True)  # alarms are told below, in the shop's own time
    start_us = SystemClock().now_us()
    start_us -= start_us % MINUTE_US
    site = demo_site(start_us, mqtt)
    stop = threading.Event()
    compose.stop_on_signals(stop)
    with tempfile.TemporaryDirectory(prefix="dripleg-demo-") as folder, EmulatedHardware() as parts:
        setters = parts.fit(site.sensors)
        parts.make_noisy()
        held = {s.id: s.trap.holds_at_start_kg for s in site.line.stations if s.trap is not None}
        shop = MakeBelieveShop(
            start_us,
            setters,
            held,
            at_work=lambda time_us: opening.is_open(site.hours, site.timezone, time_us),
        )
        samplers: list[_ShopSampler] = []

        def wrap(sampler: Sampler) -> _ShopSampler:
            samplers.append(_ShopSampler(sampler, shop))
            return samplers[-1]

        setting = compose.Setting(
            site=site,
            store_path=Path(folder) / "demo.db",
            hardware=parts,
            clock=ScaledClock(speed, start_us, patience_s=site.sample_every_us / SECOND_US),
            port=port,
            wrap=wrap,
        )
        with compose.running(setting, stop) as running:
            running.shell.on_entry = samplers[-1].drain
            # its clock runs fast, but not the machine that it runs on
            running.shell.late_after_us = round(LATE_AFTER_S * speed * SECOND_US)
            print(_greeting(site, running, speed, limit_s), flush=True)
            teller = threading.Thread(
                target=_Teller(running, limit_s).tell, args=(stop,), name="teller"
            )
            teller.start()
            try:
                running.shell.run(stop)
            finally:
                stop.set()
                teller.join()
    print("The demo has stopped; what it stored is gone.", flush=True)


def _greeting(site: Site, parts: compose.Parts, speed: float, limit_s: float | None) -> str:
    url = parts.server.url
    mqtt = f"Without MQTT: give --broker HOST:PORT to see it there (dripleg/{site.id}/#)."
    if site.mqtt is not None:
        mqtt = f"MQTT at {site.mqtt.host}:{site.mqtt.port}, topics {site.mqtt.prefix}/{site.id}/#"
    ends = "until Ctrl-C" if limit_s is None else f"for {limit_s:g} s"
    return f"""\
{site.name}: a make-believe shop. Its parts are emulated; drivers and daemon are the real ones.
An hour there passes in {3600 / speed:.0f} s here, {ends}. Times below are the shop's.

  look        {url}
  the traps   curl {url}api/v1/traps
  the alarms  curl {url}api/v1/alarms
  drain       curl -X POST {url}api/v1/traps/tank/drains \\
                -H 'content-type: application/json' -d '{{"volume_ml": 590, "by": "AM"}}'

{mqtt}
"""


class _Teller:
    """Says now and then what the daemon believes, and at once how alarms change."""

    def __init__(self, parts: compose.Parts, limit_s: float | None) -> None:
        self._shell, self._limit_s = parts.shell, limit_s
        self._site = parts.shell.site
        self._states: dict[str, str] = {}

    def tell(self, stop: threading.Event) -> None:
        """Tell until stopped; set `stop` when the demo's time is over, or nobody reads it."""
        try:
            self._tell(stop)
        except BrokenPipeError:
            pass
        finally:
            stop.set()

    def _tell(self, stop: threading.Event) -> None:
        clock = SystemClock()
        begun_s = told_s = clock.monotonic()
        while not clock.wait(LOOK_EVERY_S, stop):
            now_s = clock.monotonic()
            if self._limit_s is not None and now_s - begun_s >= self._limit_s:
                stop.set()
            self._tell_alarms()
            if now_s - told_s >= SAY_EVERY_S:
                told_s = now_s
                self._tell_traps()

    def _clock_of(self, time_us: int) -> str:
        zone = ZoneInfo(self._site.timezone)
        return to_datetime(time_us).astimezone(zone).strftime("%H:%M")

    def _tell_alarms(self) -> None:
        for alarm in self._shell.alarms():
            if alarm.state != self._states.get(alarm.id, "normal"):
                said = alarm.text if alarm.state != "normal" else ""
                told = f"{self._clock_of(alarm.since_us)}  ALARM {alarm.id}: {alarm.state}. {said}"
                print(told.rstrip(), flush=True)
            self._states[alarm.id] = alarm.state

    def _tell_traps(self) -> None:
        views = self._shell.traps()
        for number, view in enumerate(views):
            time = self._clock_of(view.at_us) if number == 0 else ""
            holds = interval_words(self._site, view.p05_kg, view.p50_kg, view.p95_kg)
            limit = volume_words(self._site, view.drain_at_kg)
            print(f"{time:<5}  {view.trap:<16} {holds:<28} drain at {limit}", flush=True)
