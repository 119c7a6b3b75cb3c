"""The scheduler makes a week's log: at the start what was missed, and once."""

from __future__ import annotations

import json
import threading
from pathlib import Path

from daemon.clock import HOUR_US
from daemon.hour_figures import Noted
from daemon.jobs import WallClockJobs
from daemon.outbox import Topics
from daemon.shell import GRID_KEY
from daemon.store.store import Store
from daemon.weekly.making import WeekMaker
from daemon.weekly.weeks import Week
from tests.daemon.shops import site
from tests.daemon.test_shell import HandClock
from tests.daemon.week_rows import rows_of

SHOP = site()


def test_a_week_that_was_missed_is_made_at_the_start(tmp_path: Path) -> None:
    """The daemon was down over Monday's midnight, and is back on Tuesday."""
    path = tmp_path / "birch-works.db"
    from_us, to_us = Week(2026, 10).bounds_us("UTC")
    done = threading.Event()
    with Store.open(path, SHOP.channels) as store:
        store.set_meta(GRID_KEY, str(from_us))
        rows = rows_of(SHOP, from_us, to_us)
        store.commit_tick(to_us, [], noted=Noted(tuple(rows.hours), tuple(rows.days)))
        clock = HandClock(to_us + 30 * HOUR_US)
        maker = WeekMaker(SHOP, store, path, clock, Topics("dripleg/birch-works"))
        counts: list[int] = []

        def make() -> None:
            counts.append(maker.make())
            done.set()

        for _ in range(2):  # and again after another start
            done.clear()
            jobs = WallClockJobs(store, path, SHOP, make)
            jobs.start()
            assert done.wait(20.0)
            jobs.stop()
        assert counts[:2] == [1, 0]
        (waiting,) = store.pending(10)
        assert waiting.message.retain
        assert json.loads(waiting.message.payload)["week"] == "2026-W10"
    folder = tmp_path / "birch-works.weekly"
    assert sorted(each.suffix for each in folder.iterdir()) == [".csv", ".pdf"]
