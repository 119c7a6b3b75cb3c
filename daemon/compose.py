"""The composition root: the one place that knows every part, and starts and stops them in order."""

from __future__ import annotations

import logging
import signal
import threading
from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from types import FrameType

from api.app import create_app
from api.server import ApiServer
from daemon.addresses import is_loopback
from daemon.clock import Clock, SystemClock
from daemon.jobs import WallClockJobs
from daemon.keys import SCOPES
from daemon.keys_local import remove_key, write_key
from daemon.moisture.contact import STALE_AFTER_PERIODS
from daemon.mqtt import MqttLink
from daemon.outbox import Topics
from daemon.retained import gone, retained_topics
from daemon.sealing import Sealer
from daemon.shell import Sampling, Shell
from daemon.signal_output import SignalOutput
from daemon.site import hours as opening
from daemon.site.types import Signal, Site
from daemon.store.store import Store
from daemon.weekly.making import WeekMaker
from sensors.registry import Hardware
from sensors.sampling import Sampler

log = logging.getLogger("dripleg")


@dataclass(frozen=True, slots=True)
class Parts:
    """What a running daemon is made of, for whoever started it."""

    shell: Shell
    server: ApiServer
    link: MqttLink | None


@dataclass(frozen=True, slots=True)
class Setting:
    """Where and with what a daemon runs."""

    site: Site
    store_path: Path
    hardware: Hardware
    clock: Clock = field(default_factory=SystemClock)
    port: int | None = None  # instead of the site file's
    wrap: Callable[[Sampler], Sampling] = lambda sampler: sampler


@contextmanager
def running(setting: Setting, stop: threading.Event) -> Iterator[Parts]:
    """Start everything but the ticking; at the end stop it in the opposite order.

    DriplegError when a part cannot start; what had started is stopped again.
    """
    site = setting.site
    holds_us = STALE_AFTER_PERIODS * site.sample_every_us
    with ExitStack() as parts:
        store = parts.enter_context(Store.open(setting.store_path, site.channels, holds_us))
        sampler = Sampler(site.sensors, setting.hardware, SystemClock().monotonic)
        parts.callback(sampler.close)
        topics = Topics.of(site, site.mqtt) if site.mqtt is not None else None
        shell = Shell(site, setting.clock, setting.wrap(sampler), store, topics)
        shell.recover()
        link = None
        if site.mqtt is not None:
            inbox = setting.hardware.inbox()
            link = MqttLink(site, store, shell.record, setting.clock, inbox=inbox)
            shell.link = link
            if topics is not None:
                used = retained_topics(topics, site, shell.core.definitions)
                link.publish_states(gone(store, used))
            link.start()
            parts.callback(link.stop)
        if site.signal is not None:
            parts.callback(_signal(setting, site.signal, shell).stop)
        if not is_loopback(site.api.host):
            write_key(setting.store_path, shell.keys.own("commands on this machine", SCOPES))
            parts.callback(remove_key, setting.store_path)
        port = site.api.port if setting.port is None else setting.port
        server = ApiServer(create_app(shell), site.api.host, port)
        server.start()
        parts.callback(server.stop)
        sealer = Sealer(store, SystemClock())
        sealer.start()
        parts.callback(sealer.stop)
        maker = WeekMaker(site, store, setting.store_path, setting.clock, topics)

        def make_weeks() -> None:
            if maker.make() and link is not None:
                link.wake()

        jobs = WallClockJobs(store, setting.store_path, site, make_weeks)
        jobs.start()
        parts.callback(jobs.stop)
        yield Parts(shell, server, link)


def _signal(setting: Setting, signal: Signal, shell: Shell) -> SignalOutput:
    """The lamp or buzzer, switched from now on."""
    site, clock = setting.site, setting.clock

    def is_open() -> bool:
        return opening.is_open(site.hours, site.timezone, clock.now_us())

    lines = setting.hardware.lines(signal.chip)
    # blinking is in real time, also beside a sped-up clock
    output = SignalOutput(signal, lines, shell.alarms, is_open, SystemClock())
    shell.signal_problem = lambda: output.problem
    output.start()
    return output


def run(setting: Setting, stop: threading.Event, greet: Callable[[Parts], None]) -> None:
    """Run until `stop` is set, by a signal or otherwise."""
    with running(setting, stop) as parts:
        greet(parts)
        parts.shell.run(stop)
        log.info("stopping")


def stop_on_signals(stop: threading.Event) -> None:
    """SIGTERM and SIGINT ask for a clean stop."""

    def ask(number: int, _frame: FrameType | None) -> None:
        log.info("%s: finishing the tick and stopping", signal.Signals(number).name)
        stop.set()

    for number in (signal.SIGTERM, signal.SIGINT):
        signal.signal(number, ask)
