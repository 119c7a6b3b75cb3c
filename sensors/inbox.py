"""What other devices have sent over MQTT, kept until the channels that wait for it are read.

The MQTT client calls `post` from its own thread and subscribes to `topics()`; drivers call `want`
when they open and `take` when they are read. Subclass it to be told of a new topic.
"""

from __future__ import annotations

import threading
from collections import deque
from dataclasses import dataclass

KEPT = 1000  # messages a topic between two ticks; beyond that the oldest go


@dataclass(frozen=True, slots=True)
class Message:
    """One message as it came."""

    payload: bytes
    arrived_us: int  # wall clock


class Inbox:
    """Messages by topic. Safe to use from any thread."""

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._waiting: dict[str, dict[str, deque[Message]]] = {}

    def want(self, topic: str, reader: str) -> None:
        """A reader (a sensor's id) waits for a topic from now on."""
        with self._lock:
            new = topic not in self._waiting
            self._waiting.setdefault(topic, {}).setdefault(reader, deque(maxlen=KEPT))
        if new:
            self.on_new_topic(topic)

    def on_new_topic(self, topic: str) -> None:
        """Called once for each topic; a client subscribes here."""

    def topics(self) -> tuple[str, ...]:
        """Every topic that somebody waits for."""
        with self._lock:
            return tuple(self._waiting)

    def post(self, topic: str, payload: bytes, arrived_us: int, retained: bool = False) -> None:
        """A message has come. A retained one is of unknown age and is not taken."""
        if retained:
            return
        with self._lock:
            for waiting in self._waiting.get(topic, {}).values():
                waiting.append(Message(payload, arrived_us))

    def take(self, topic: str, reader: str, until_us: int) -> list[Message]:
        """A reader's messages that came not later than that, in order; they are then gone."""
        with self._lock:
            waiting = self._waiting.get(topic, {}).get(reader, deque())
            taken = []
            while waiting and waiting[0].arrived_us <= until_us:
                taken.append(waiting.popleft())
            return taken
