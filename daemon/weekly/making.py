"""Makes the log of every week once it is over: files beside the database, and word over MQTT.

Asked again and again by the wall-clock jobs; what is made is remembered in the database, in the
transaction that hands its announcement to the outbox. A week that ended while the daemon stood
still is made when it is back and has caught up.
"""

from __future__ import annotations

import logging
from collections.abc import Iterator
from pathlib import Path

from daemon.clock import Clock
from daemon.errors import DriplegError
from daemon.outbox import Topics
from daemon.site.types import Site
from daemon.store.store import Store
from daemon.weekly import files
from daemon.weekly.announce import week_message
from daemon.weekly.compute import week_log
from daemon.weekly.rows import read_rows
from daemon.weekly.weeks import Week, first_hour_us, last_full, week_at

log = logging.getLogger("dripleg")

MADE_KEY = "weekly.made"  # the last week that was made
MOST_AT_ONCE = 60  # weeks that are made in one go: a clock that is wrong once costs no more


class WeekMaker:
    """Makes one site's weeks."""

    def __init__(
        self, site: Site, store: Store, store_path: Path, clock: Clock, topics: Topics | None
    ) -> None:
        self._site, self._store, self._clock = site, store, clock
        self._folder = files.folder_of(store_path)
        self._topics = topics

    def make(self) -> int:
        """Make what is over and not made yet; how many weeks that were."""
        count = 0
        try:
            for week in self._missing():
                count += self._make(week)
        except DriplegError as error:
            log.error("the weekly log was not made: %s", error)
        return count

    def _missing(self) -> Iterator[Week]:
        """Weeks that are over and wholly committed, after the last one that was made."""
        timezone = self._site.timezone
        begun, made = self._store.get_meta("grid_us"), self._store.get_meta(MADE_KEY)
        last_us = self._store.last_tick_us
        if begun is None or last_us is None:
            return
        last = last_full(timezone, self._clock.now_us())
        while first_hour_us(last.bounds_us(timezone)[1]) > last_us:  # its end is not committed yet
            last = last.before()
        week = week_at(timezone, int(begun)) if made is None else Week.read(made).after()
        for _ in range(MOST_AT_ONCE):
            if week > last:
                return
            yield week
            week = week.after()

    def _make(self, week: Week) -> bool:
        rows = read_rows(self._store, week, self._site, self._clock.now_us())
        told = week_log(self._site, rows)
        messages = []
        if not told.empty:
            paths = files.write(self._site, told, self._folder)
            log.info("the log of %s is made: %s", week, " and ".join(map(str, paths)))
            if self._topics is not None:
                messages = [week_message(self._topics, self._site, told)]
        self._store.announce(messages, MADE_KEY, str(week))
        return not told.empty
