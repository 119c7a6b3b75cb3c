"""The thread that packs hours, and the nightly job that drops what is not kept. Invented values."""

from __future__ import annotations

import logging
import threading
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from daemon.clock import DAY_US
from daemon.errors import StoreError
from daemon.jobs import WallClockJobs
from daemon.journal import Drain
from daemon.sealing import Sealer
from daemon.site.reader import parse_site
from daemon.site.types import Keeping
from daemon.store.store import Store
from tests.daemon.sealed import CHANNELS, T0, fill, ordinary, record, seal_all, shown

EVER = (0, 2**61)
YEAR_US = round(365.25 * DAY_US)


@pytest.fixture
def store(tmp_path: Path) -> Iterator[Store]:
    with Store.open(tmp_path / "dripleg.db", CHANNELS) as opened:
        yield opened


class Quick:
    """A clock that does not wait, and counts how often it was asked to."""

    def __init__(self) -> None:
        self.waits: list[float] = []
        self.enough = threading.Event()

    def now_us(self) -> int:
        return T0

    def monotonic(self) -> float:
        return sum(self.waits)

    def wait(self, seconds: float, stop: threading.Event) -> bool:
        self.waits.append(seconds)
        if len(self.waits) > 20:
            self.enough.set()
        return stop.wait(0.001)


def test_hours_are_packed_beside_the_ticks_with_a_pause_between(store: Store) -> None:
    ticks = record(5.1)
    fill(store, ticks)
    clock = Quick()
    sealer = Sealer(store, clock)
    sealer.start()
    assert clock.enough.wait(30)
    sealer.stop()
    assert not store.seal_next()
    assert clock.waits[:7] == [5.0, 0.05, 0.05, 0.05, 0.05, 0.05, 5.0]
    assert shown(list(store.ticks(*EVER))) == shown(ticks)


def test_a_failure_is_told_once_and_tried_again(
    store: Store, monkeypatch: pytest.MonkeyPatch, caplog: pytest.LogCaptureFixture
) -> None:
    fill(store, record(2.1))
    sealer = Sealer(store, Quick())

    def fails() -> bool:
        raise StoreError("shop.db: no space left")

    with monkeypatch.context() as patch, caplog.at_level(logging.ERROR):
        patch.setattr(store, "seal_next", fails)
        for _ in range(3):
            sealer.catch_up()
    assert [each.getMessage() for each in caplog.records] == [
        "a finished hour was not packed: shop.db: no space left"
    ]
    sealer.catch_up()
    assert not store.seal_next()


def jobs_of(store: Store, keeping: Keeping) -> WallClockJobs:
    site = replace(parse_site("", "shop.toml"), keeping=keeping)
    return WallClockJobs(store, Path(store._database.where), site)


def years(store: Store, number: int) -> list[tuple[int, list[str]]]:
    """A tick a day, over years, sealed but for the last."""
    days = range(round(number * 365.25) + 1)
    fill(store, [(T0 + day * DAY_US, ordinary(T0 + day * DAY_US)) for day in days])
    seal_all(store)
    return [(T0 + day * DAY_US, []) for day in days]


def kept(store: Store) -> list[int]:
    return [tick_us for tick_us, _ in store.ticks(*EVER)]


def test_readings_older_than_the_site_file_says_are_dropped_at_night(
    store: Store, caplog: pytest.LogCaptureFixture
) -> None:
    days = [each for each, _ in years(store, 2)]
    store.add_entry(Drain("tank", volume_kg=0.4), T0, T0)
    with caplog.at_level(logging.INFO):
        jobs_of(store, Keeping(365.25 * 86400)).drop_old_readings()
    assert kept(store) == [each for each in days if each >= days[-1] - YEAR_US]
    assert len(store.entries()) == 1
    assert caplog.messages[-1] == (
        "365 hours of readings from before 2027-03-02T01:00:00Z were dropped"
    )


def test_readings_may_be_kept_for_ever(store: Store) -> None:
    days = [each for each, _ in years(store, 1)]
    jobs_of(store, Keeping(None)).drop_old_readings()
    assert kept(store) == days


def test_a_clock_that_is_wrong_for_a_night_costs_no_more_than_a_month(store: Store) -> None:
    ticks = record(800)[::360]
    fill(store, [*ticks, (T0 + 50 * YEAR_US, [])])
    seal_all(store)
    jobs_of(store, Keeping(30 * 86400)).drop_old_readings()
    assert len(kept(store)) == len(ticks) + 1 - 31 * 24


def test_a_night_without_anything_stored_drops_nothing(store: Store) -> None:
    jobs_of(store, Keeping()).drop_old_readings()
    store.commit_tick(T0, [])
    jobs_of(store, Keeping()).drop_old_readings()
    assert kept(store) == [T0]


def test_the_jobs_of_the_night_are_the_backup_and_then_the_dropping(store: Store) -> None:
    jobs = jobs_of(store, Keeping())
    hours = {each.id: str(each.trigger) for each in jobs._scheduler.get_jobs()}
    assert "hour='3'" in hours["backup"]
    assert "hour='4'" in hours["drop-old-readings"]
