"""The link to the MQTT broker: sends the outbox and the states, takes in drains and readings.

One thread connects, sends what the outbox holds, and tries again when the broker is gone. A row
leaves the outbox when the broker has acknowledged it, and not before: an MQTT client's own queue is
memory and dies with the process, so every connection begins anew from the outbox.

A broker that refuses us by its access list acknowledges a message all the same (MQTT 3.1.1 has no
other answer): what it then does with it, nobody here can see.
"""

from __future__ import annotations

import logging
import socket
import threading
from collections.abc import Callable, Iterable
from contextlib import suppress
from dataclasses import dataclass
from hashlib import blake2b
from typing import Literal

from daemon.clock import Clock, SystemClock, format_rfc3339
from daemon.errors import BrokerError, DriplegError
from daemon.journal import Body, Drain
from daemon.mqtt_senders import OutboxSender, StateSender
from daemon.mqtt_session import Arrived, Session, tls_context
from daemon.outbox import Message, Topics, encode, service_message
from daemon.payloads import read_drain, refusal_payload
from daemon.site.types import Site
from daemon.store.store import Store
from daemon.views import Recorded
from sensors.inbox import Inbox

log = logging.getLogger("dripleg.mqtt")

Status = Literal["connected", "not connected"]
Record = Callable[[Body, int | None, str], Recorded]  # the body, when (None: now), its key

NOT_KEPT = 0  # the quality of service of which a broker keeps nothing for who is away
_LOOK_EVERY_S = 1.0  # into the outbox, also when nobody calls `wake`


@dataclass(frozen=True, slots=True)
class Timing:
    """How patient the link is, in the network's own seconds, however fast the daemon's clock."""

    keepalive_s: int = 30  # a broker that says nothing for twice as long is given up
    retry_least_s: float = 1.0  # before the first new try; doubled for each further one
    retry_most_s: float = 60.0
    steady_s: float = 10.0  # a connection that held so long begins the tries anew
    farewell_s: float = 3.0  # how long a stop waits for the broker
    window: int = 100  # messages sent and not yet acknowledged, at most


class MqttLink:
    """Keeps the broker told. Every method may be called from any thread.

    `record` takes in a drain that arrived, or raises a DriplegError that says what is wrong. An
    `inbox` is filled with what other devices publish on the topics that its readers wait for.
    BrokerError when the site's `[mqtt]` table cannot be used at all.
    """

    def __init__(
        self,
        site: Site,
        store: Store,
        record: Record,
        clock: Clock,
        timing: Timing | None = None,
        inbox: Inbox | None = None,
    ) -> None:
        if site.mqtt is None:
            raise BrokerError(f"{site.path}: no broker is named: add an [mqtt] table with its host")
        self._mqtt = site.mqtt
        self._topics = Topics.of(site, site.mqtt)
        self._client_id = f"{site.mqtt.prefix}-{site.id}".replace("/", "-")
        self._tls = tls_context(site.mqtt)
        self._where = f"{site.mqtt.host}:{site.mqtt.port}"
        self._record = record
        self._clock = clock
        self._network = SystemClock()  # the broker's time is real, also beside a sped-up clock
        self._timing = timing or Timing()
        self._outbox = OutboxSender(store, self._timing.window)
        self._states = StateSender()
        self._inbox = inbox
        self._heard_on: set[str] = set()  # topics of the inbox, on this connection
        self._stop = threading.Event()
        self._look = threading.Event()
        self._waker, self._woken = socket.socketpair()
        for end in (self._waker, self._woken):
            end.setblocking(False)
        self._thread = threading.Thread(target=self._run, name="mqtt", daemon=True)
        self._changed = threading.Condition()
        self._status: Status = "not connected"
        self._problem = ""
        self._told = ""  # the trouble that the log speaks of
        self._tell_of_success = True

    # --- called by the rest of the daemon

    def start(self) -> None:
        """Begin to connect, in the background; returns at once."""
        self._thread.start()

    def stop(self) -> None:
        """Say "stopped" to the broker if there is one, and end. May be called twice."""
        self._stop.set()
        self.wake()
        if self._thread.ident is not None:
            self._thread.join()
        self._waker.close()
        self._woken.close()

    def wake(self) -> None:
        """The outbox has something new."""
        self._look.set()
        with suppress(OSError):  # full: it wakes as it is; closed: there is nobody to wake
            self._waker.send(b"\0")

    def publish_states(self, messages: Iterable[Message]) -> None:
        """Send these when connected, and again after each reconnection: the newest of each topic.

        They are kept in memory only: the next process makes its own.
        """
        self._states.put(messages)
        self.wake()

    @property
    def status(self) -> Status:
        return self._status

    @property
    def problem(self) -> str:
        """Why there is no connection, in words; "" while there is one."""
        return self._problem

    def wait_for(self, status: Status, timeout_s: float) -> bool:
        """Wait until the link has that status; says whether it came to it in time."""
        with self._changed:
            return self._changed.wait_for(lambda: self._status == status, timeout_s)

    # --- the link's own thread

    def _run(self) -> None:
        delay_s = self._timing.retry_least_s
        while not self._stop.is_set():
            began_s = self._network.monotonic()
            try:
                reason = self._connection()
            except Exception as error:  # whatever it is, the next connection may do better
                reason = f"internal fault: {error!r}"
                if reason != self._told:
                    log.exception("the link to the broker failed")
            if self._stop.is_set():
                return
            if self._network.monotonic() - began_s >= self._timing.steady_s:
                delay_s, self._told = self._timing.retry_least_s, ""
            self._failed(reason)
            self._network.wait(delay_s, self._stop)
            delay_s = min(2.0 * delay_s, self._timing.retry_most_s)

    def _connection(self) -> str:
        """Connect and serve until the connection ends or a stop is wanted; why it ended."""
        connected_us = self._clock.now_us()
        session = Session(
            self._mqtt,
            self._client_id,
            self._tls,
            self._timing.keepalive_s,
            will=service_message(self._topics, "gone", connected_us, None),
            take=lambda arrived: self._take(session, arrived),
        )
        try:
            session.open()
            while not session.ended and not session.accepted and not self._stop.is_set():
                self._step(session)
            if session.accepted and not session.ended:
                self._begin(session, connected_us)
                self._serve(session)
                self._farewell(session, connected_us)
        finally:
            session.close()
            self._set_status("not connected", session.ended)
        return session.ended

    def _begin(self, session: Session, connected_us: int) -> None:
        self._outbox.begin()
        self._states.begin()
        session.send(service_message(self._topics, "running", connected_us, connected_us))
        session.subscribe(self._topics.drains)
        self._heard_on.clear()
        self._look.set()

    def _connected(self, session: Session) -> None:
        """The broker has answered that it will pass drains on, or that it will not."""
        self._set_status("connected", "")
        if self._tell_of_success:
            log.info("connected to the broker at %s", self._where)
            self._tell_of_success = False
        if session.listening == "refused":
            log.warning("the broker does not let this user listen on %s", self._topics.drains)

    def _serve(self, session: Session) -> None:
        look_at_s = 0.0
        while not session.ended and not self._stop.is_set():
            self._listen(session)
            self._states.send(session)
            now_s = self._network.monotonic()
            if self._look.is_set() or now_s >= look_at_s:
                self._look.clear()
                look_at_s = now_s + _LOOK_EVERY_S
                self._outbox.send(session)
            self._step(session)
            if session.listening and self._status != "connected" and not session.ended:
                self._connected(session)
            if self._settle(session):
                self._look.set()  # the window has room again

    def _listen(self, session: Session) -> None:
        """Ask for what other devices publish that a sensor of this site waits for."""
        for topic in self._inbox.topics() if self._inbox is not None else ():
            if session.listening and topic not in self._heard_on:
                self._heard_on.add(topic)
                session.subscribe(topic, NOT_KEPT)  # a value from before is worth nothing now
        while session.refused_topics:
            topic = session.refused_topics.pop()
            log.warning("the broker does not let this user listen on %s", topic)

    def _settle(self, session: Session) -> bool:
        """Take what was acknowledged off the books; whether anything was."""
        numbers = session.acknowledged()
        self._states.acknowledged(numbers)
        return self._outbox.acknowledged(numbers)

    def _farewell(self, session: Session, connected_us: int) -> None:
        """On a stop: "stopped", and time for what is under way to be acknowledged."""
        if session.ended:
            return
        self._states.send(session)
        self._outbox.send(session)
        until_s = self._network.monotonic() + self._timing.farewell_s
        last = session.send(
            service_message(self._topics, "stopped", connected_us, self._clock.now_us())
        )
        numbers: list[int] = []
        while not session.ended and last not in numbers and self._network.monotonic() < until_s:
            self._step(session)
            numbers = session.acknowledged()
            self._outbox.acknowledged(numbers)
        if last in numbers:
            session.goodbye()

    def _step(self, session: Session) -> None:
        """One round of the network, and the waker emptied."""
        session.step(self._woken, min(_LOOK_EVERY_S, self._timing.keepalive_s / 4))
        with suppress(BlockingIOError):
            self._woken.recv(4096)

    def _set_status(self, status: Status, problem: str) -> None:
        with self._changed:
            self._status, self._problem = status, problem
            self._changed.notify_all()

    def _failed(self, reason: str) -> None:
        """Tell the log of a trouble once, however often it comes back."""
        if reason == self._told:
            log.debug("broker at %s: %s", self._where, reason)
            return
        log.warning(
            "no connection to the broker at %s (%s): messages wait in the database, and it is "
            "tried again in the background",
            self._where,
            reason,
        )
        self._told = reason
        self._tell_of_success = True

    # --- what arrives

    def _take(self, session: Session, arrived: Arrived) -> None:
        """What arrived: something that a sensor waits for, or a drain."""
        if arrived.topic in self._heard_on and self._inbox is not None:
            now_us = self._clock.now_us()
            self._inbox.post(arrived.topic, arrived.payload, now_us, arrived.retained)
        if arrived.topic == self._topics.drains:
            self._take_drain(session, arrived)

    def _take_drain(self, session: Session, arrived: Arrived) -> None:
        """Record a drain that arrived, or answer why not."""
        payload = arrived.payload
        if arrived.retained:
            log.warning(
                "a retained message on %s was ignored: it may be old, and a drain reported once "
                "must not be taken again at each start; send drains without the retain flag",
                self._topics.drains,
            )
            return
        try:
            drain, at_us, key = read_drain(payload)
            if key:
                recorded = self._record(drain, at_us, key)
            else:
                recorded = self._record_delivery(drain, at_us, arrived)
        except DriplegError as error:
            self._refuse(session, str(error), payload)
        except Exception:
            log.exception("a drain that arrived could not be recorded")
            self._refuse(session, "it could not be recorded: see the daemon's log", payload)
        else:
            again = "was known already" if recorded.repeated else "recorded"
            log.info("drain of %s over MQTT %s (entry %d)", drain.trap, again, recorded.entry.seq)

    def _record_delivery(self, drain: Drain, at_us: int | None, arrived: Arrived) -> Recorded:
        """Record a drain that brings no key: the delivery itself gives it one.

        What is delivered again after a kill is known by its number, which the broker uses anew
        only after 65 535 others, or after it has lost its memory; only a message that is said to
        come again can then be a repetition.
        """
        if not arrived.number:  # delivered at most once
            return self._record(drain, at_us, "")
        digest = blake2b(arrived.payload, digest_size=6).hexdigest()
        day = format_rfc3339(self._clock.now_us())[:10]
        key = f"mqtt-{day}-{arrived.number}-{digest}"
        recorded, further = self._record(drain, at_us, key), 1
        while recorded.repeated and not arrived.again:
            further += 1
            recorded = self._record(drain, at_us, f"{key}-{further}")
        return recorded

    def _refuse(self, session: Session, reason: str, payload: bytes) -> None:
        log.warning("a drain over MQTT was refused: %s", reason)
        answer = encode(refusal_payload(reason, payload, self._clock.now_us()))
        session.send(Message(self._topics.refused_drains, answer))
