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
from daemon.clock import Clock, SystemClock
from daemon.jobs import WallClockJobs
from daemon.mqtt import MqttLink
from daemon.outbox import Topics
from daemon.shell import Sampling, Shell
from daemon.site.types import Site
from daemon.store.store import Store
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
    with ExitStack() as parts:
        store = parts.enter_context(Store.open(setting.store_path, site.channels))
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
            link.start()
            parts.callback(link.stop)
        port = site.api.port if setting.port is None else setting.port
        server = ApiServer(create_app(shell), site.api.host, port)
        server.start()
        parts.callback(server.stop)
        jobs = WallClockJobs(store, setting.store_path, site.timezone)
        jobs.start()
        parts.callback(jobs.stop)
        yield Parts(shell, server, link)


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
