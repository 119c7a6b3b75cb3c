"""`dripleg check`: explains a site file, and reads every sensor once, or until Ctrl-C."""

from __future__ import annotations

import argparse
import threading
from collections.abc import Callable
from contextlib import ExitStack
from pathlib import Path

from daemon.asking import serves
from daemon.check import render, sections
from daemon.check_counted import counted_section
from daemon.check_readings import Looker, missing_devices
from daemon.check_sensors import elsewhere_section, now_section
from daemon.check_signal import signal_section
from daemon.clock import Clock, format_rfc3339
from daemon.mqtt_listen import listening
from daemon.site.types import Site
from sensors.registry import Hardware

WATCH_EVERY_S = 2.0
SENSORS_AT = 4  # where the section comes among those of the file
EXIT_OK, EXIT_FAILED = 0, 1

Say = Callable[[str], None]


def check(
    site: Site,
    options: argparse.Namespace,
    hardware: Hardware,
    clock: Clock,
    stop: threading.Event,
    say: Say,
    root: Path = Path("/"),
) -> int:
    """Say it all; 0 unless a sensor cannot be read, then 1."""
    if options.no_sensors or not site.sensors:
        say(render(sections(site)))
        return EXIT_OK
    missing, nothing_here = missing_devices(site, root)
    if nothing_here and not serves(site, options.store):
        said = sections(site)
        said.insert(SENSORS_AT, elsewhere_section(missing))
        say(render(said))
        return EXIT_OK
    with ExitStack() as parts:
        listen = parts.enter_context(listening(site, hardware.inbox(), clock))
        looker = Looker(site, hardware, clock, listen, options.store)
        parts.callback(looker.close)
        if options.watch:
            return _watch(site, looker, clock, stop, say)
        looked = looker.look()
        said = sections(site)
        now = now_section(site, looked)
        said.insert(SENSORS_AT, now)
        if (counted := counted_section(site, options.store)) is not None:
            said.insert(SENSORS_AT, counted)
        tried = signal_section(site, hardware, clock, options.store)
        if tried is not None:
            said.insert(said.index(now) + 1, tried.section)
        say(render(said))
        if tried is not None and not tried.good:
            return EXIT_FAILED
        return EXIT_FAILED if looked.faults() else EXIT_OK


def _watch(site: Site, looker: Looker, clock: Clock, stop: threading.Event, say: Say) -> int:
    """Again and again, for somebody on a ladder; the last look decides the exit code."""
    code = EXIT_OK
    while True:
        looked = looker.look()
        code = EXIT_FAILED if looked.faults() else EXIT_OK
        say(f"{format_rfc3339(clock.now_us() // 1_000_000 * 1_000_000)} (Ctrl-C ends this)")
        say(render([now_section(site, looked)]))
        if clock.wait(WATCH_EVERY_S, stop):
            return code
