"""Listens to a broker for what other devices publish, and says nothing: for `dripleg check`.

It connects under a name of its own, so that a running daemon's connection stays as it is.
"""

from __future__ import annotations

import logging
import os
import socket
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager

from daemon.clock import Clock
from daemon.mqtt_session import Arrived, Session, tls_context
from daemon.site.types import Mqtt, Site
from sensors.inbox import Inbox

log = logging.getLogger("dripleg.mqtt")

WAIT_S = 5.0  # for a first message on every topic
KEEPALIVE_S = 30
STEP_S = 0.2


@contextmanager
def listening(site: Site, inbox: Inbox, clock: Clock) -> Iterator[Callable[[], None]]:
    """While inside, what arrives is put into the inbox. Gives what waits for a first message.

    Without a broker, or without anybody who waits for a topic, nothing is done.
    """
    if site.mqtt is None or not any(one.driver == "mqtt-channel" for one in site.sensors):
        yield lambda: None
        return
    listener = _Listener(
        site.mqtt, f"{site.mqtt.prefix}-{site.id}-check-{os.getpid()}", inbox, clock
    )
    try:
        yield listener.wait
    finally:
        listener.stop()


class _Listener:
    """One connection, begun when somebody first waits: then the topics are known."""

    def __init__(self, mqtt: Mqtt, name: str, inbox: Inbox, clock: Clock) -> None:
        self._inbox, self._clock = inbox, clock
        self._waiting: set[str] = set()
        self._news = threading.Condition()
        self._stop = threading.Event()
        self._session = Session(
            mqtt, name.replace("/", "-"), tls_context(mqtt), KEEPALIVE_S, None, self._take, False
        )
        self._where = f"{mqtt.host}:{mqtt.port}"
        self._thread = threading.Thread(target=self._run, name="mqtt check", daemon=True)

    def wait(self) -> None:
        """Until every topic has spoken, but not for long."""
        self._waiting = set(self._inbox.topics())
        if self._waiting and self._thread.ident is None:
            self._thread.start()
        with self._news:
            self._news.wait_for(lambda: not self._waiting or self._stop.is_set(), WAIT_S)

    def stop(self) -> None:
        self._stop.set()
        if self._thread.ident is not None:
            self._thread.join()

    def _run(self) -> None:
        session, asked = self._session, False
        waker, woken = socket.socketpair()
        try:
            session.open()
            while not session.ended and not self._stop.is_set():
                if session.accepted and not asked:
                    asked = True
                    for topic in self._inbox.topics():
                        session.subscribe(topic)
                session.step(woken, STEP_S)
            if session.accepted and not session.ended:
                session.goodbye()
            elif session.ended:
                log.warning(
                    "the broker at %s cannot be listened to: %s", self._where, session.ended
                )
        finally:
            session.close()
            waker.close()
            woken.close()
            with self._news:
                self._waiting.clear()
                self._news.notify_all()

    def _take(self, arrived: Arrived) -> None:
        now_us = self._clock.now_us()
        self._inbox.post(arrived.topic, arrived.payload, now_us, arrived.retained)
        if not arrived.retained:
            with self._news:
                self._waiting.discard(arrived.topic)
                self._news.notify_all()
