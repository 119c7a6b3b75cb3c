"""What is sent over a connection to the broker, and what of it the broker has acknowledged."""

from __future__ import annotations

import logging
import threading
from collections.abc import Iterable

from daemon.errors import StoreError
from daemon.mqtt_session import Session
from daemon.outbox import Message
from daemon.store.store import Store

log = logging.getLogger("dripleg.mqtt")


class OutboxSender:
    """Sends the outbox in order; knows which rows are under way on this connection."""

    def __init__(self, store: Store, window: int) -> None:
        self._store = store
        self._window = window
        self._under_way: dict[int, int] = {}  # the session's number -> the row's
        self._sent_to = 0  # the last row sent on this connection
        self._done: set[int] = set()  # acknowledged rows that the store still has
        self._trouble = ""

    def begin(self) -> None:
        """On a new connection nothing is under way."""
        self._under_way.clear()
        self._sent_to = 0

    def send(self, session: Session) -> None:
        """Send the oldest rows not yet sent, as many as the window takes."""
        self._forget_done()
        while (room := self._window - len(self._under_way)) > 0:
            try:
                rows = self._store.pending(room, after_number=self._sent_to)
            except StoreError as error:
                self._tell(error)
                return
            for row in rows:
                if row.number not in self._done:
                    self._under_way[session.send(row.message)] = row.number
                self._sent_to = row.number
            if len(rows) < room:
                return

    def acknowledged(self, numbers: Iterable[int]) -> bool:
        """Take acknowledged rows out of the store; whether there were any."""
        rows = {self._under_way.pop(number) for number in numbers if number in self._under_way}
        self._done |= rows
        if rows:
            self._forget_done()
        return bool(rows)

    def _forget_done(self) -> None:
        if not self._done:
            return
        try:
            self._store.mark_sent(sorted(self._done))
        except StoreError as error:
            self._tell(error)  # they stay in `_done`: neither sent again nor lost
        else:
            self._done.clear()
            self._trouble = ""

    def _tell(self, error: StoreError) -> None:
        if str(error) != self._trouble:
            log.warning("the outbox: %s", error)
            self._trouble = str(error)


class StateSender:
    """Sends the newest message of each topic; knows what the broker has yet to get."""

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._newest: dict[str, Message] = {}
        self._unsent: dict[str, None] = {}  # in order
        self._under_way: dict[int, str] = {}  # the session's number -> the topic

    def put(self, messages: Iterable[Message]) -> None:
        """Take these in; called from any thread."""
        with self._lock:
            for message in messages:
                self._newest[message.topic] = message
                self._unsent[message.topic] = None

    def begin(self) -> None:
        """A new connection is told everything."""
        with self._lock:
            self._unsent = dict.fromkeys(self._newest)
            self._under_way.clear()

    def send(self, session: Session) -> None:
        """Send what is new, but no topic twice before the broker has acknowledged the first."""
        with self._lock:
            busy = set(self._under_way.values())
            messages = [self._newest[topic] for topic in self._unsent if topic not in busy]
            for message in messages:
                del self._unsent[message.topic]
        for message in messages:
            self._under_way[session.send(message)] = message.topic

    def acknowledged(self, numbers: Iterable[int]) -> None:
        """Their topics may be sent again."""
        for number in numbers:
            self._under_way.pop(number, None)
