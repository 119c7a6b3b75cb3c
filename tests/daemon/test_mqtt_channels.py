"""Readings of other devices, over a real broker, through the daemon's link and the real driver."""

from __future__ import annotations

import threading
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from dataclasses import replace
from pathlib import Path

import pytest

from daemon.clock import SystemClock
from daemon.mqtt import MqttLink
from daemon.site.reader import parse_site
from daemon.site.types import Mqtt, Site
from daemon.store.store import Store
from sensors import reasons
from sensors.hardware import RealHardware
from sensors.inbox import Inbox
from sensors.reading import Reading
from sensors.sampling import Sampler
from tests.daemon.broker import TIMEOUT_S, Broker, Listener
from tests.daemon.linking import QUICK, Journal

SITE = """
[[sensor]]
id = "slab"
driver = "mqtt-channel"
topic = "shop/slab"
field = "air.temperature"
quantity = "temperature"
unit = "degC"
silent_after = "5 s"

[[sensor]]
id = "motor"
driver = "mqtt-channel"
topic = "shop/motor"
quantity = "contact"
silent_after = "1 h"

[mqtt]
host = "127.0.0.1"
"""
PERIOD_US = 10_000_000


class Told(Inbox):
    """An inbox that can be waited for."""

    def __init__(self) -> None:
        super().__init__()
        self.posted: list[tuple[str, bool]] = []
        self._news = threading.Condition()

    def post(self, topic: str, payload: bytes, arrived_us: int, retained: bool = False) -> None:
        super().post(topic, payload, arrived_us, retained)
        with self._news:
            self.posted.append((topic, retained))
            self._news.notify_all()

    def wait_for(self, topic: str, retained: bool = False, times: int = 1) -> None:
        with self._news:
            there = self._news.wait_for(
                lambda: self.posted.count((topic, retained)) >= times, TIMEOUT_S
            )
        assert there, f"{topic} never came; there were {self.posted}"


class Daemon:
    """What of a daemon these readings pass through."""

    def __init__(self, site: Site, store: Store) -> None:
        self.clock = SystemClock()
        self.inbox = Told()
        self.hardware = RealHardware(inbox=self.inbox)
        self.sampler = Sampler(site.sensors, self.hardware, self.clock.monotonic)
        self.link = MqttLink(
            site, store, Journal().record, self.clock, QUICK, inbox=self.hardware.inbox()
        )

    def sample(self, later_us: int = 0) -> list[Reading]:
        return self.sampler.sample(self.clock.now_us() + later_us, TIMEOUT_S)


@contextmanager
def running(port: int, store: Store) -> Iterator[Daemon]:
    site = replace(parse_site(SITE, "birch-works.toml"), mqtt=Mqtt("127.0.0.1", port))
    daemon = Daemon(site, store)
    daemon.sample()  # the drivers ask for their topics when they are first read
    daemon.link.start()
    try:
        assert daemon.link.wait_for("connected", TIMEOUT_S)
        yield daemon
    finally:
        daemon.link.stop()
        daemon.sampler.close()
        daemon.hardware.close()


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Store]:
    site = parse_site(SITE, "birch-works.toml")
    with Store.open(tmp_path / "birch-works.db", site.channels) as store:
        yield store


def say_until_heard(listener: Listener, daemon: Daemon, topic: str, payload: str) -> None:
    """The broker may take our subscription a moment after the connection."""
    for _ in range(200):
        listener.say(topic, payload)
        with suppress(AssertionError):
            with daemon.inbox._news:
                came = daemon.inbox._news.wait_for(
                    lambda: (topic, False) in daemon.inbox.posted, 0.1
                )
            assert came
            return
    raise AssertionError(f"{topic} was never heard")


def test_a_device_s_number_becomes_a_reading(broker: Broker, bench: Store) -> None:
    with running(broker.port, bench) as daemon, Listener(broker.port, "nothing") as device:
        say_until_heard(device, daemon, "shop/slab", '{"air": {"temperature": 16.25}}')
        say_until_heard(device, daemon, "shop/motor", "ON")
        before_us = daemon.clock.now_us()
        readings = daemon.sample()
    found = {one.channel: one for one in readings}
    assert found["slab.temperature"].value == pytest.approx(289.40)
    assert found["motor.contact"].value == 1.0
    assert all(one.good and one.time_us <= before_us for one in readings)


def test_a_retained_message_is_of_unknown_age_and_not_taken(broker: Broker, bench: Store) -> None:
    with Listener(broker.port, "nothing") as device:
        device.say("shop/slab", '{"air": {"temperature": 99}}', retain=True)
        with running(broker.port, bench) as daemon:
            daemon.inbox.wait_for("shop/slab", retained=True)
            assert daemon.sample() == []
            # the same device speaking now is heard, though it asks the broker to retain that too
            device.say("shop/slab", '{"air": {"temperature": 17}}', retain=True)
            daemon.inbox.wait_for("shop/slab")
            (one,) = daemon.sample()
    assert one.value == pytest.approx(290.15)


def test_a_device_that_falls_silent_is_a_fault_and_no_old_value(
    broker: Broker, bench: Store
) -> None:
    with running(broker.port, bench) as daemon, Listener(broker.port, "nothing") as device:
        say_until_heard(device, daemon, "shop/slab", '{"air": {"temperature": 16.25}}')
        assert any(one.good for one in daemon.sample())
        (late,) = daemon.sample(later_us=PERIOD_US)
    assert (late.channel, late.fault) == ("slab.temperature", reasons.SILENT)


def test_nonsense_is_a_bad_reading_and_not_a_dead_link(broker: Broker, bench: Store) -> None:
    with running(broker.port, bench) as daemon, Listener(broker.port, "nothing") as device:
        say_until_heard(device, daemon, "shop/slab", '{"air": "warm"}')
        readings = [one for one in daemon.sample() if one.channel == "slab.temperature"]
        assert {one.fault for one in readings} == {reasons.ERROR_ANSWER}
        assert daemon.link.status == "connected"


def test_topics_are_asked_for_again_after_a_reconnection(broker: Broker, bench: Store) -> None:
    with running(broker.port, bench) as daemon:
        broker.kill()
        assert daemon.link.wait_for("not connected", TIMEOUT_S)
        broker.start()
        assert daemon.link.wait_for("connected", TIMEOUT_S)
        with Listener(broker.port, "nothing") as device:
            say_until_heard(device, daemon, "shop/motor", "0")
            readings = [one for one in daemon.sample() if one.good]
    assert {(one.channel, one.value) for one in readings} == {("motor.contact", 0.0)}


def test_without_a_broker_the_site_file_is_told_that_nothing_will_come() -> None:
    said = "\n".join(parse_site(SITE.partition("[mqtt]")[0], "birch-works.toml").remarks)
    assert "slab waits for messages of another device, but there is no [mqtt] table" in said
    assert "waits for messages" not in "\n".join(parse_site(SITE, "birch-works.toml").remarks)
