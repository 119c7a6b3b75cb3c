"""Stops, kills, clocks set back, damage and late entries: the daemon comes back as it should."""

from __future__ import annotations

import json
import logging
import sqlite3
from collections.abc import Iterator
from contextlib import closing
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from daemon.advance import Core
from daemon.clock import DAY_US, HOUR_US, MINUTE_US, SECOND_US, format_rfc3339
from daemon.errors import StoreError
from daemon.journal import Drain, Entry, Undo
from daemon.outbox import Topics, trap_message
from daemon.replay import replay
from daemon.shell import Shell
from daemon.site.types import Site
from daemon.store.store import Store
from tests.daemon.records import exact
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, flat, site, working
from tests.daemon.test_shell import HandClock, Played, bits

SHOP = site()
TOPICS = Topics("dripleg/birch-works")
EVERY_MINUTE = SITE.replace("[site]\n", '[site]\nsample_every = "60 s"\n')


class Daemon:
    """A daemon on a store, without threads: what is not in the store is gone when it is killed."""

    def __init__(self, path: Path, ticks: int, shop: Site = SHOP) -> None:
        self.path, self.shop = path, shop
        self.period_us = shop.sample_every_us
        every = self.period_us // PERIOD_US
        self.record = list(working(SHOP, ticks * every))[::every]
        self.clock = HandClock(BEGUN_US)
        self.start()

    def start(self) -> None:
        self.store = Store.open(self.path, self.shop.channels)
        sampler = Played(self.record)
        self.shell = Shell(self.shop, self.clock, sampler, self.store, TOPICS)
        self.shell.recover()

    def kill(self) -> None:
        self.store.close()

    def stop(self) -> None:
        self.shell.checkpoint()
        self.store.close()

    def tick(self, *numbers: int) -> None:
        for number in numbers:
            now_us = BEGUN_US + number * self.period_us
            self.clock.wall_us = now_us
            self.shell.tick(now_us)

    @property
    def state(self) -> Any:
        return self.shell._state

    def alarm(self, name: str) -> str:
        return next(alarm.state for alarm in self.shell.alarms() if alarm.id == name)


@pytest.fixture
def daemon(tmp_path: Path) -> Iterator[Daemon]:
    made = Daemon(tmp_path / "birch-works.db", 400)
    yield made
    made.store.close()


def replayed(daemon: Daemon, ticks: int, *entries: Entry) -> bytes:
    return bits(replay(Core(SHOP), flat(daemon.record[:ticks]), list(entries)).state)


def test_a_clock_behind_the_last_tick_at_the_start_loses_nothing(daemon: Daemon) -> None:
    """A Pi has no clock battery: after a power cut it starts with an old time."""
    daemon.tick(*range(120))
    daemon.stop()
    daemon.clock.wall_us = BEGUN_US + 50 * PERIOD_US
    daemon.start()
    due_us = daemon.shell._next_due_us()
    assert due_us == BEGUN_US + 120 * PERIOD_US
    daemon.shell.tick(due_us)
    assert not daemon.shell._problems.get("store")
    assert bits(daemon.state) == replayed(daemon, 121)
    assert "set back" in daemon.shell._problems["clock"]


def test_a_clock_behind_also_after_a_change_of_the_site_file(daemon: Daemon) -> None:
    daemon.tick(*range(100))
    daemon.stop()
    daemon.shop = site(SITE.replace('set = "3 bar"', 'set = "4 bar"'))
    daemon.clock.wall_us = BEGUN_US - HOUR_US
    daemon.start()
    due_us = daemon.shell._next_due_us()
    assert due_us == BEGUN_US + 100 * PERIOD_US
    daemon.shell.tick(due_us)
    assert daemon.state.time_us == due_us
    assert not daemon.shell._problems.get("store")


def test_a_drain_recorded_while_it_stood_still_is_taken_in(daemon: Daemon) -> None:
    daemon.tick(*range(60))
    daemon.stop()
    at_us = BEGUN_US + 59 * PERIOD_US + 2 * SECOND_US
    with Store.open(daemon.path, SHOP.channels) as store:
        store.add_entry(Drain("tank"), at_us, at_us)
    daemon.start()
    daemon.tick(*range(60, 70))
    entry = Entry(1, at_us, at_us, Drain("tank"))
    assert bits(daemon.state) == replayed(daemon, 70, entry)


def test_a_drain_dated_before_the_stop_corrects_what_was_announced(tmp_path: Path) -> None:
    """The alarm was told as raised; the drain that came late says that it had been seen to."""
    text = SITE.replace('drain_at = "600 ml"', 'drain_at = "600 ml", holds_at_start = "650 ml"')
    daemon = Daemon(tmp_path / "a.db", 200, site(text))
    daemon.tick(*range(100))
    assert daemon.alarm("tank-drain-due") == "unacknowledged"
    daemon.stop()
    at_us = BEGUN_US + 50 * PERIOD_US
    written_us = BEGUN_US + 120 * PERIOD_US
    with Store.open(daemon.path, daemon.shop.channels) as store:
        store.add_entry(Drain("tank"), at_us, written_us)
        store.mark_sent([row.number for row in store.pending(1000)])
    daemon.clock.wall_us = written_us
    daemon.start()
    daemon.tick(121)
    assert daemon.alarm("tank-drain-due") == "normal"
    changes = daemon.store.transitions(BEGUN_US + 100 * PERIOD_US, BEGUN_US + DAY_US)
    told = [(each.alarm, each.before, each.after) for each in changes]
    assert ("tank-drain-due", "unacknowledged", "normal") in told
    sent = [row.message for row in daemon.store.pending(1000)]
    # how an alarm stands is told apart from what happened: of that only the newest counts
    assert {message.topic for message in sent} == {TOPICS.events}
    daemon.store.close()


def test_corrections_outlive_a_store_that_fails(tmp_path: Path) -> None:
    text = SITE.replace('drain_at = "600 ml"', 'drain_at = "600 ml", holds_at_start = "650 ml"')
    daemon = Daemon(tmp_path / "a.db", 200, site(text))
    daemon.tick(*range(100))
    daemon.shell.record(Drain("tank"), BEGUN_US + 5 * PERIOD_US)
    commit = daemon.store.commit_tick

    def fails(*_: object) -> None:
        raise StoreError("no space left for the database")

    daemon.store.commit_tick = fails  # type: ignore[method-assign, assignment]
    daemon.tick(100, 101)
    assert any("no space left" in problem for problem in daemon.shell.health().problems)
    daemon.store.commit_tick = commit  # type: ignore[method-assign]
    daemon.tick(102)
    assert not any("no space left" in problem for problem in daemon.shell.health().problems)
    changes = daemon.store.transitions(BEGUN_US + 100 * PERIOD_US, BEGUN_US + DAY_US)
    corrected = [each for each in changes if each.alarm == "tank-drain-due"]
    assert [(each.before, each.after) for each in corrected] == [("unacknowledged", "normal")]
    assert corrected[0].text.startswith("Corrected after a late entry.")
    stored = [reading for _, found in daemon.store.ticks(0, BEGUN_US + DAY_US) for reading in found]
    assert stored == flat(daemon.record[:103])
    daemon.store.close()


def test_entries_reported_out_of_order_while_the_store_fails_are_all_taken(
    daemon: Daemon,
) -> None:
    """Several ticks are then made at once, each with its own entries."""
    daemon.tick(*range(80))
    commit = daemon.store.commit_tick

    def fails(*_: object) -> None:
        raise StoreError("no space left for the database")

    daemon.store.commit_tick = fails  # type: ignore[method-assign, assignment]
    daemon.tick(80, 81, 82, 83)
    later_us, earlier_us = (BEGUN_US + n * PERIOD_US + SECOND_US for n in (82, 80))
    daemon.shell.record(Drain("riser"), later_us)
    daemon.shell.record(Drain("tank"), earlier_us)
    daemon.store.commit_tick = commit  # type: ignore[method-assign]
    daemon.tick(84)
    written_us = BEGUN_US + 83 * PERIOD_US
    entries = [
        Entry(2, earlier_us, written_us, Drain("tank")),
        Entry(1, later_us, written_us, Drain("riser")),
    ]
    assert bits(daemon.state) == replayed(daemon, 85, *entries)


def test_a_drain_dated_before_the_record_does_not_lose_the_record(
    daemon: Daemon, caplog: pytest.LogCaptureFixture
) -> None:
    """Nothing is known of that time; what is known since must stay."""
    daemon.tick(*range(60))
    held = bits(daemon.state)
    daemon.stop()
    for at_us in (BEGUN_US - HOUR_US, BEGUN_US):
        with Store.open(daemon.path, SHOP.channels) as store:
            store.add_entry(Drain("tank"), at_us, BEGUN_US + 80 * PERIOD_US)
    daemon.start()
    assert bits(daemon.state) == held


def test_a_drain_at_the_very_first_tick_is_kept_and_said_to_be_too_early(
    daemon: Daemon, caplog: pytest.LogCaptureFixture
) -> None:
    daemon.tick(*range(50))
    daemon.shell.record(Drain("tank"), BEGUN_US)
    with caplog.at_level(logging.WARNING):
        daemon.tick(50)
    assert "nothing to go back to" in caplog.text
    assert bits(daemon.state) == replayed(daemon, 51)


def test_a_drain_before_the_first_tick_counts_at_the_first_tick(tmp_path: Path) -> None:
    shop = exact(holds_at_start="200 ml")
    store = Store.open(tmp_path / "elm-row.db", shop.channels)
    clock = HandClock(BEGUN_US - 5 * SECOND_US)
    shell = Shell(shop, clock, Played([]), store)
    shell.recover()
    shell.record(Drain("tank"))
    shell.tick(BEGUN_US)
    (view,) = shell.traps()
    store.close()
    assert (view.p95_kg, view.since) == (0.0, "last drain")


def damage(path: Path, where: str) -> None:
    with closing(sqlite3.connect(path)) as connection, connection:
        connection.execute(f"UPDATE checkpoints SET state = x'00' WHERE {where}")


def test_a_checkpoint_that_cannot_be_read_is_left_out(
    daemon: Daemon, caplog: pytest.LogCaptureFixture
) -> None:
    """Damaged, or of another version: an earlier one and the readings since give the same bits."""
    daemon.tick(*range(370))
    held = bits(daemon.state)
    daemon.stop()
    damage(daemon.path, f"at_us > {BEGUN_US}")
    with caplog.at_level(logging.WARNING):
        daemon.start()
    assert "is left out: a checkpoint cannot be read" in caplog.text
    assert bits(daemon.state) == held


def test_without_a_readable_checkpoint_it_begins_anew(daemon: Daemon) -> None:
    daemon.tick(*range(50))
    daemon.stop()
    damage(daemon.path, "1")
    daemon.start()
    assert daemon.shell.traps() == ()
    daemon.tick(50, 51)
    assert daemon.state.time_us == BEGUN_US + 51 * PERIOD_US
    assert daemon.state.begun_us == BEGUN_US + 50 * PERIOD_US


NOTICE = (
    "Contents counted from Mon 2 Mar, 07:08: earlier state could not be read. There may be "
    "more in {} than is shown. {}, whatever the figure says."
)


def counted(daemon: Daemon) -> dict[str, int | None]:
    return {view.trap: view.counted_from_us for view in daemon.shell.traps()}


def test_what_traps_hold_is_said_to_be_counted_from_a_start_without_a_state(
    daemon: Daemon, caplog: pytest.LogCaptureFixture
) -> None:
    """Until each has been drained once, also over another stop."""
    daemon.tick(*range(50))
    assert set(counted(daemon).values()) == {None}  # a first start has lost nothing
    daemon.stop()
    damage(daemon.path, "1")
    daemon.start()
    with caplog.at_level(logging.WARNING):
        daemon.tick(50, 51)
    begun_us = BEGUN_US + 50 * PERIOD_US
    assert counted(daemon) == dict.fromkeys(SHOP.traps, begun_us)
    assert NOTICE.format("tank, riser and bowl", "Drain each once") in caplog.text
    sent = json.loads(trap_message(TOPICS, daemon.shell.traps()[0]).payload)
    assert sent["counted_from"] == format_rfc3339(begun_us)
    drained = daemon.shell.record(Drain("tank")).entry
    assert counted(daemon) == {"tank": None, "riser": begun_us, "bowl": begun_us}
    daemon.tick(52)
    daemon.shell.record(Undo("tank", drained.seq))
    assert counted(daemon)["tank"] == begun_us
    for trap in ("tank", "riser"):
        daemon.shell.record(Drain(trap))
    daemon.shell.record(Drain("bowl", "partly"))  # what is left is not known either
    daemon.tick(53)
    daemon.stop()
    caplog.clear()
    daemon.start()
    assert NOTICE.format("bowl", "Drain it once") in caplog.text
    assert counted(daemon) == {"tank": None, "riser": None, "bowl": begun_us}
    daemon.shell.record(Drain("bowl", "empty"))
    daemon.tick(54)
    assert set(counted(daemon).values()) == {None}


def test_a_drain_recorded_beside_a_change_of_the_site_file_counts(daemon: Daemon) -> None:
    daemon.tick(*range(150))
    contents = daemon.shell.core.model.contents(daemon.state.model)
    daemon.stop()
    at_us = BEGUN_US + 150 * PERIOD_US
    with Store.open(daemon.path, SHOP.channels) as store:
        store.add_entry(Drain("tank"), at_us, at_us)
    daemon.shop = site(SITE.replace('set = "3 bar"', 'set = "4 bar"'))
    daemon.start()
    daemon.tick(151)
    views = {view.trap: view for view in daemon.shell.traps()}
    assert views["tank"].p95_kg == 0.0
    assert views["tank"].last_drain_us == at_us
    assert views["riser"].p50_kg == pytest.approx(np.median(contents[2]), rel=1e-9)


def silent_day(daemon: Daemon) -> int:
    """Tick to the middle of an hour, a day and more after the last reading; the tick's number."""
    first, last = len(daemon.record), len(daemon.record) + 1440 + 10
    daemon.tick(*range(first))
    daemon.tick(*range(first, last, 60), last)
    return last


def test_a_late_drain_in_a_long_silence_is_announced_at_the_next_full_hour(
    tmp_path: Path,
) -> None:
    """Without a good reading for a day ticks stand at full hours: nothing gets lost in between."""
    text = EVERY_MINUTE.replace(
        'drain_at = "150 ml"', 'drain_at = "150 ml", holds_at_start = "200 ml"'
    )
    daemon = Daemon(tmp_path / "a.db", 60, site(text))
    last = silent_day(daemon)
    assert daemon.alarm("riser-drain-due") == "unacknowledged"
    hour = -(-last // 60) * 60
    before_us = daemon.state.time_us
    daemon.shell.record(Drain("riser"), BEGUN_US + 50 * MINUTE_US)
    daemon.tick(last + 1, last + 2)
    assert daemon.state.time_us == before_us
    daemon.tick(hour)
    assert daemon.alarm("riser-drain-due") == "normal"
    changes = daemon.store.transitions(before_us, BEGUN_US + 3 * DAY_US)
    (told,) = (each for each in changes if each.alarm == "riser-drain-due")
    assert (told.before, told.after) == ("unacknowledged", "normal")
    assert told.at_us == BEGUN_US + hour * MINUTE_US
    daemon.store.close()


def test_a_replay_of_a_long_silence_gives_the_bits_of_the_daemon(tmp_path: Path) -> None:
    daemon = Daemon(tmp_path / "a.db", 60, site(EVERY_MINUTE))
    last = silent_day(daemon)
    end_us = BEGUN_US + (last + 30) * MINUTE_US
    resumed = [
        (end_us + n * MINUTE_US, [replace(each, time_us=end_us + n * MINUTE_US) for each in found])
        for n, (_, found) in enumerate(daemon.record[:20])
    ]
    daemon.shell._sampler = Played(resumed)
    for now_us, _ in resumed:
        daemon.clock.wall_us = now_us
        daemon.shell.tick(now_us)
    whole = flat(daemon.record) + flat(resumed)
    assert bits(daemon.state) == bits(replay(Core(daemon.shop), whole, []).state)
    held = bits(daemon.state)
    daemon.kill()
    daemon.start()
    assert bits(daemon.state) == held
    daemon.store.close()


def test_a_drain_recorded_while_a_tick_goes_on_counts_just_after_it(tmp_path: Path) -> None:
    """And is shown at once: it does not send the model back."""
    text = SITE.replace('drain_at = "600 ml"', 'drain_at = "600 ml", holds_at_start = "650 ml"')
    daemon = Daemon(tmp_path / "a.db", 50, site(text))
    daemon.tick(*range(20))
    daemon.clock.wall_us -= 3 * SECOND_US  # the time it was when the tick began
    recorded = daemon.shell.record(Drain("tank"))
    assert recorded.entry.at_us == daemon.state.time_us + 1
    assert daemon.shell.traps()[0].p95_kg < 0.01
    daemon.tick(20)
    assert daemon.shell.traps()[0].last_drain_us == recorded.entry.at_us
    daemon.store.close()
