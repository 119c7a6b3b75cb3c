"""What happens by the wall clock, through APScheduler: the nightly backup.

Sampling does not: it runs on the monotonic clock, which no time server sets back.
"""

from __future__ import annotations

import logging
from pathlib import Path
from zoneinfo import ZoneInfo

from apscheduler.schedulers.background import BackgroundScheduler
from apscheduler.triggers.cron import CronTrigger

from daemon.errors import StoreError
from daemon.store.store import Store

log = logging.getLogger("dripleg")

BACKUP_HOUR = 3  # local time, when no shop works
LATE_S = 6 * 3600  # a job that was due while the machine slept is still done within this


class WallClockJobs:
    """The scheduler and its jobs."""

    def __init__(self, store: Store, store_path: Path, timezone: str) -> None:
        self._store = store
        self._backup_path = store_path.with_name(store_path.name + ".backup")
        zone = ZoneInfo(timezone)
        self._scheduler = BackgroundScheduler(timezone=zone)
        self._scheduler.add_job(
            self.backup,
            CronTrigger(hour=BACKUP_HOUR, timezone=zone),
            misfire_grace_time=LATE_S,
            coalesce=True,
            id="backup",
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
