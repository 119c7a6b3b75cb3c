"""What happens by the wall clock, through APScheduler: backups, what is not kept, the week's log.

Sampling does not: it runs on the monotonic clock, which no time server sets back.
"""

from __future__ import annotations

import logging
from collections.abc import Callable
from pathlib import Path
from zoneinfo import ZoneInfo

from apscheduler.schedulers.background import BackgroundScheduler
from apscheduler.triggers.cron import CronTrigger

from daemon.clock import SystemClock, format_rfc3339, to_datetime
from daemon.errors import StoreError
from daemon.site.types import Site
from daemon.store.store import Store

log = logging.getLogger("dripleg")

BACKUP_HOUR = 3  # local time, when no shop works
DROP_HOUR = 4  # after the backup
MOST_DROPPED = 31 * 24  # hours of readings a night: a clock that is wrong once costs no more
WEEK_EVERY_MINUTES = 10  # to ask whether a week is over: cheap, and catches up after a stop
LATE_S = 6 * 3600  # a job that was due while the machine slept is still done within this


class WallClockJobs:
    """The scheduler and its jobs."""

    def __init__(
        self,
        store: Store,
        store_path: Path,
        site: Site,
        make_weeks: Callable[[], object] = lambda: None,
    ) -> None:
        self._store = store
        self._backup_path = store_path.with_name(store_path.name + ".backup")
        self._kept_s = site.keeping.readings_s
        zone = ZoneInfo(site.timezone)
        self._scheduler = BackgroundScheduler(timezone=zone)
        self._scheduler.add_job(
            self.backup,
            CronTrigger(hour=BACKUP_HOUR, timezone=zone),
            misfire_grace_time=LATE_S,
            coalesce=True,
            id="backup",
        )
        self._scheduler.add_job(
            self.drop_old_readings,
            CronTrigger(hour=DROP_HOUR, timezone=zone),
            misfire_grace_time=LATE_S,
            coalesce=True,
            id="drop-old-readings",
        )
        # at once, then again and again: a week that ended meanwhile is made up for. One job and
        # not two: the scheduler trips over a job that ends for good just as it is being stopped
        self._scheduler.add_job(
            make_weeks,
            CronTrigger(minute=f"*/{WEEK_EVERY_MINUTES}", timezone=zone),
            next_run_time=to_datetime(SystemClock().now_us()),
            misfire_grace_time=LATE_S,
            coalesce=True,
            id="week",
        )

    def start(self) -> None:
        """Begin to watch the clock."""
        self._scheduler.start()

    def stop(self) -> None:
        """Stop; a job that is running is waited for."""
        self._scheduler.shutdown(wait=True)

    def backup(self) -> None:
        """Make and check a copy of the database beside it."""
        try:
            self._store.backup(self._backup_path)
        except StoreError as error:
            log.error("the nightly backup failed: %s", error)
        else:
            log.info("backup made and checked: %s", self._backup_path)

    def drop_old_readings(self) -> None:
        """Drop readings that are older than the site file keeps them, counted from the last tick.

        Nothing else is ever dropped.
        """
        last_us = self._store.last_tick_us
        if self._kept_s is None or last_us is None:
            return
        before_us = last_us - round(self._kept_s * 1e6)
        try:
            hours = self._store.drop_readings(before_us, MOST_DROPPED)
        except StoreError as error:
            log.error("old readings were not dropped: %s", error)
        else:
            if hours:
                log.info(
                    "%d hours of readings from before %s were dropped",
                    hours,
                    format_rfc3339(before_us),
                )
