"""Packs finished hours of readings, beside the ticks.

A thread of its own: packing an hour takes some milliseconds, and a database that has months to
catch up with takes minutes. Every hour is one short transaction, and between two of them a tick
may go first.
"""

from __future__ import annotations

import logging
import threading

from daemon.clock import Clock
from daemon.errors import StoreError
from daemon.store.store import Store

log = logging.getLogger("dripleg")

LOOK_EVERY_S = 5.0  # to see that no hour has ended costs nothing
PAUSE_S = 0.05  # after each hour that was packed
TOLD_AFTER = 100  # hours to catch up with that are worth a word


class Sealer:
    """Looks every few seconds, on the machine's own clock, whether an hour has ended."""

    def __init__(self, store: Store, clock: Clock) -> None:
        self._store, self._clock = store, clock
        self._stop = threading.Event()
        self._thread = threading.Thread(target=self._run, name="sealer", daemon=True)
        self._told = ""

    def start(self) -> None:
        """Begin to look."""
        self._thread.start()

    def stop(self) -> None:
        """Stop; the hour that is being packed is waited for."""
        self._stop.set()
        self._thread.join()

    def _run(self) -> None:
        while not self._clock.wait(LOOK_EVERY_S, self._stop):
            self.catch_up()

    def catch_up(self) -> None:
        """Pack what can be packed, hour by hour, until told to stop."""
        hours = 0
        try:
            while self._store.seal_next():
                hours += 1
                if self._clock.wait(PAUSE_S, self._stop):
                    break
        except StoreError as error:  # the readings stay as they are, and are tried again
            if str(error) != self._told:
                log.error("a finished hour was not packed: %s", error)
            self._told = str(error)
        else:
            self._told = ""
        if hours >= TOLD_AFTER:
            log.info("%d hours of readings were packed", hours)
