"""What the tests of the link to the broker share: a site, a store, a journal, a running link."""

from __future__ import annotations

import json
import subprocess
import sys
import threading
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from daemon.clock import SystemClock
from daemon.errors import JournalError, StoreError
from daemon.journal import Body, Drain, Entry
from daemon.moisture.description import Compressor, Fixed, Line
from daemon.mqtt import MqttLink, Timing
from daemon.outbox import Message
from daemon.site.types import Api, Cup, Hours, Mqtt, Site
from daemon.store.store import Store
from daemon.views import Recorded
from tests.daemon.broker import TIMEOUT_S, Heard

ROOT = Path(__file__).parents[2]
BASE = "dripleg/alder-yard"
EVENTS = f"{BASE}/events"
SERVICE = f"{BASE}/service"
DRAINS = f"{BASE}/drains"
REFUSED = f"{BASE}/drains/refused"
QUICK = Timing(keepalive_s=1, retry_least_s=0.05, retry_most_s=0.2)


def a_site(port: int, **mqtt: Any) -> Site:
    """An invented site without sensors, whose broker listens on that port."""
    nothing = Fixed(0.0, 0.0)
    return Site(
        path="alder-yard.toml",
        id="alder-yard",
        name="Alder Yard Finishing",
        timezone="Europe/Lisbon",
        units="metric",
        sample_every_us=10_000_000,
        hours=Hours(((),) * 7, frozenset(), always_open=True),
        cup=Cup(),
        sensors=(),
        channels={},
        line=Line((), (), Compressor(nothing, None, nothing, nothing, True), 10.0),
        outlets=(),
        mqtt=Mqtt("127.0.0.1", port, **mqtt),
        api=Api(),
    )


def event(number: int) -> Message:
    return Message(EVENTS, json.dumps({"id": f"e/{number}"}).encode(), id=f"e/{number}")


def state(trap: str, text: str) -> Message:
    return Message(f"{BASE}/traps/{trap}", text.encode(), retain=True)


def queue(store: Store, first: int, beyond: int) -> None:
    """Put numbered events into the outbox, in one tick."""
    tick_us = (store.last_tick_us or 0) + 1
    store.commit_tick(tick_us, [], [], [event(number) for number in range(first, beyond)])


def numbers(heard: list[Heard]) -> list[int]:
    return [int(each.body["id"].split("/")[1]) for each in heard if each.topic == EVENTS]


class WatchedStore(Store):
    """A store that tells when its outbox has been emptied, and that can be made to fail."""

    full = False

    def mark_sent(self, numbers: Sequence[int]) -> None:
        if self.full:
            raise StoreError("no space left (invented)")
        super().mark_sent(numbers)
        with marked:
            marked.notify_all()

    def wait_until_sent(self) -> None:
        with marked:
            assert marked.wait_for(lambda: self.outbox_waiting() == 0, TIMEOUT_S)


marked = threading.Condition()


class Journal:
    """Stands in for the daemon's own recording: remembers what came, by key as the store does."""

    def __init__(self) -> None:
        self.entries: list[Entry] = []
        self.fault: Exception | None = None

    def record(self, body: Body, at_us: int | None, key: str) -> Recorded:
        if self.fault is not None:
            raise self.fault
        if isinstance(body, Drain) and body.trap != "tank":
            raise JournalError(f'"{body.trap}" is not a trap of this site (known: tank)')
        for entry in self.entries:
            if key and entry.key == key:
                return Recorded(entry, repeated=True)
        self.entries.append(Entry(len(self.entries) + 1, at_us or 0, 0, body, key))
        return Recorded(self.entries[-1], repeated=False)


@contextmanager
def linked(
    port: int, store: Store, journal: Journal | None = None, timing: Timing = QUICK, **mqtt: Any
) -> Iterator[MqttLink]:
    record = (journal or Journal()).record
    link = MqttLink(a_site(port, **mqtt), store, record, SystemClock(), timing)
    link.start()
    try:
        yield link
    finally:
        link.stop()


@contextmanager
def child(script: str, *arguments: object) -> Iterator[subprocess.Popen[str]]:
    """Another process that runs this script after this module's names; killed at the end."""
    head = "import sys\nfrom tests.daemon.linking import *\n"
    process = subprocess.Popen(
        [sys.executable, "-c", head + script, *map(str, arguments)],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
        cwd=ROOT,
    )
    try:
        assert process.stdout is not None
        assert process.stdout.readline() == "ready\n"
        yield process
    finally:
        process.kill()
        process.communicate(timeout=TIMEOUT_S)
