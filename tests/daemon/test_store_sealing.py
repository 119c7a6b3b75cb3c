"""Finished hours are packed, and nobody can tell by what is read. All values are invented."""

from __future__ import annotations

import random
import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from sqlalchemy import Connection

from daemon.clock import DAY_US, HOUR_US, SECOND_US
from daemon.errors import StoreError
from daemon.store.packing import Layout, pack
from daemon.store.sealing import open_times, seal, unseal
from daemon.store.store import Store
from sensors.reading import Channel, Reading, in_steps
from tests.daemon.sealed import (
    CHANNELS,
    MOTOR,
    PRESSURE,
    T0,
    TEMPERATURE,
    TICK,
    Record,
    fill,
    listed,
    ordinary,
    record,
    records,
    seal_all,
    shown,
)

EVER = (0, 2**61)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "dripleg.db"


@pytest.fixture
def store(path: Path) -> Iterator[Store]:
    with Store.open(path, CHANNELS) as opened:
        yield opened


def rows(path: Path, table: str) -> int:
    with closing(sqlite3.connect(path)) as connection:
        return int(connection.execute(f"SELECT count(*) FROM {table}").fetchone()[0])


@settings(
    max_examples=50, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(records())
def test_what_is_read_is_the_same_to_the_bit_after_each_hour_is_sealed(
    tmp_path_factory: pytest.TempPathFactory, ticks: Record
) -> None:
    with Store.open(tmp_path_factory.mktemp("store") / "a.db", CHANNELS) as store:
        fill(store, ticks)
        series = {name: listed(store.readings(name, *EVER)) for name in CHANNELS}
        assert shown(list(store.ticks(*EVER))) == shown(ticks)
        while store.seal_next():
            assert shown(list(store.ticks(*EVER))) == shown(ticks)
            for name, expected in series.items():
                assert listed(store.readings(name, *EVER)) == expected
        if ticks:  # parts of it too
            first, last = ticks[len(ticks) // 3][0], ticks[-1][0] - 1
            inside = [each for each in ticks if first < each[0] <= last]
            assert shown(list(store.ticks(first, last))) == shown(inside)


@settings(max_examples=60, deadline=None)
@given(records())
def test_a_run_comes_back_as_the_bytes_that_were_packed(ticks: Record) -> None:
    layout = Layout.of(1, [(channel.name, channel.step) for channel in CHANNELS.values()])
    if not ticks:
        return
    times = [tick_us for tick_us, _ in ticks]
    packed = [pack(layout, tick_us, readings) for tick_us, readings in ticks]
    sealed = seal(layout, times, packed)
    opened = open_times(times[0], sealed.ticks)
    assert opened.ticks_us.tolist() == times
    assert list(unseal(layout, opened, sealed.channels)) == packed


def test_an_hour_is_sealed_once_a_tick_of_the_next_is_stored(store: Store, path: Path) -> None:
    fill(store, record(1))
    assert not store.seal_next()  # a tick may still come
    fill(store, record(0.1, T0 + HOUR_US))
    assert store.seal_next()
    assert not store.seal_next()
    assert rows(path, "ticks") == 36
    assert rows(path, "sealed_ticks") == 1
    assert rows(path, "sealed_values") == 3


def test_nothing_is_asked_of_the_database_while_no_hour_has_ended(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    fill(store, record(0.5))
    assert not store.seal_next()
    monkeypatch.setattr(store._database, "write", None)  # whoever asks now fails
    assert not store.seal_next()


def test_months_are_sealed_from_the_oldest_on_while_ticks_come(store: Store) -> None:
    ticks = record(5)
    fill(store, ticks)
    for number in range(5):
        new = record(0.01, T0 + (5 + number) * HOUR_US)
        fill(store, new)
        ticks += new
        assert store.seal_next()
        assert shown(list(store.ticks(*EVER))) == shown(ticks)


def test_a_series_that_is_being_read_meets_every_reading_once(
    store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Pages that end within an hour, which is sealed before the next page is read."""
    ticks = record(3.5)
    fill(store, ticks)
    expected = listed(store.readings(MOTOR.name, *EVER))
    monkeypatch.setattr("daemon.store.ticks._IN_A_SERIES", 100)
    read = store._database.read
    pages = 0

    @contextmanager
    def sealing_between() -> Iterator[Connection]:
        nonlocal pages
        pages += 1
        if pages % 3 == 0:
            store.seal_next()
        with read() as connection:
            yield connection

    monkeypatch.setattr(store._database, "read", sealing_between)
    assert listed(store.readings(MOTOR.name, *EVER)) == expected
    assert rows(Path(store._database.where), "sealed_ticks") == 3


def test_a_stream_that_was_begun_before_meets_every_tick_once(store: Store) -> None:
    ticks = record(4.5)
    fill(store, ticks)
    stream = store.ticks(*EVER)
    begun = [next(stream) for _ in range(100)]
    seal_all(store)
    assert shown([*begun, *stream]) == shown(ticks)


def test_sealed_hours_survive_a_restart_and_time_goes_on_after_them(path: Path) -> None:
    ticks = [(T0 + hour * HOUR_US, ordinary(T0 + hour * HOUR_US)) for hour in range(3)]
    with Store.open(path, CHANNELS) as store:
        fill(store, ticks)
        assert seal_all(store) == 2
    with closing(sqlite3.connect(path)) as connection:  # as if the last hour were sealed as well
        connection.execute("DELETE FROM ticks")
        connection.commit()
    with Store.open(path, CHANNELS) as store:
        assert store.last_tick_us == T0 + HOUR_US
        with pytest.raises(StoreError, match="ticks go forward only"):
            store.commit_tick(T0 + HOUR_US, [])
        assert shown(list(store.ticks(*EVER))) == shown(ticks[:2])


def test_a_change_of_channels_within_an_hour_makes_two_runs_of_it(path: Path) -> None:
    first = record(0.5)
    with Store.open(path, CHANNELS) as store:
        fill(store, first)
    finer = Channel(PRESSURE.name, "pressure", 0.1, 0.0, 1.2e6, 6000.0, gauge=True)
    second: Record = [
        (each, [Reading(finer.name, in_steps(6.1e5 / 3, 0.1), each)])
        for each in range(T0 + HOUR_US // 2, T0 + HOUR_US + TICK, TICK)
    ]
    with Store.open(path, {c.name: c for c in (MOTOR, finer)}) as store:
        fill(store, second)
        before = listed(store.readings(PRESSURE.name, *EVER))
        hours = store.hours(PRESSURE.name, T0, T0 + 2 * HOUR_US)
        assert seal_all(store) == 2
        assert shown(list(store.ticks(*EVER))) == shown(first + second)
        assert listed(store.readings(PRESSURE.name, *EVER)) == before
        after = store.hours(PRESSURE.name, T0, T0 + 2 * HOUR_US)
        assert after.count.tolist() == hours.count.tolist() == [360, 1]
        assert after.total.tolist() == pytest.approx(hours.total.tolist(), rel=1e-14)


@pytest.mark.parametrize(
    "damage", ["x'00'", "substr(packed, 1, 20)", "x''", "zeroblob(length(packed))"]
)
@pytest.mark.parametrize("table", ["sealed_ticks", "sealed_values"])
def test_damage_is_told_and_never_read_as_something_else(
    store: Store, path: Path, table: str, damage: str
) -> None:
    fill(store, record(1.1))
    seal_all(store)
    with closing(sqlite3.connect(path)) as connection:
        connection.execute(f"UPDATE {table} SET packed = {damage}")
        connection.commit()
    with pytest.raises(StoreError, match=r"are damaged .*: restore a backup"):
        list(store.ticks(*EVER))
    with pytest.raises(StoreError, match=r"are damaged .*: restore a backup"):
        store.readings(PRESSURE.name, *EVER)


def test_a_row_that_cannot_be_packed_stays_as_it_is(store: Store, path: Path) -> None:
    ticks = record(1.1)
    fill(store, ticks)
    with closing(sqlite3.connect(path)) as connection:
        connection.execute("UPDATE ticks SET packed = x'0100' WHERE at_us = ?", (T0 + TICK,))
        connection.commit()
    with pytest.raises(StoreError, match="damaged"):
        store.seal_next()
    assert rows(path, "ticks") == len(ticks)
    assert rows(path, "sealed_ticks") == 0


# --- what is not kept


def test_old_readings_are_dropped_from_the_oldest_and_nothing_else(store: Store) -> None:
    ticks = record(6.1)
    fill(store, ticks)
    seal_all(store)
    hours = store.hours(PRESSURE.name, T0, T0 + 6 * HOUR_US)
    assert store.drop_readings(T0 + 3 * HOUR_US, most_hours=2) == 2
    assert store.drop_readings(T0 + 3 * HOUR_US, most_hours=99) == 1
    assert store.drop_readings(T0 + 3 * HOUR_US, most_hours=99) == 0
    kept = [each for each in ticks if each[0] >= T0 + 3 * HOUR_US]
    assert shown(list(store.ticks(*EVER))) == shown(kept)
    assert store.readings(PRESSURE.name, *EVER).times_us[0] == T0 + 3 * HOUR_US
    again = store.hours(PRESSURE.name, T0, T0 + 6 * HOUR_US)
    assert again.total.tolist() == hours.total.tolist()
    assert again.held_us.tolist() == hours.held_us.tolist()


def test_the_running_hour_is_never_dropped(store: Store) -> None:
    ticks = record(1.5)
    fill(store, ticks)
    seal_all(store)
    assert store.drop_readings(T0 + 99 * DAY_US, most_hours=99) == 1
    assert shown(list(store.ticks(*EVER))) == shown(ticks[360:])


def test_space_is_given_back_to_the_disk(path: Path) -> None:
    """Bad readings with long reasons that do not compress: much that can be dropped."""
    begin = T0 - T0 % DAY_US
    with Store.open(path, CHANNELS) as store:
        for hour in range(20):
            tick_us = begin + hour * HOUR_US
            reason = random.Random(hour).randbytes(100_000).hex()
            store.commit_tick(tick_us, [Reading(TEMPERATURE.name, 1.0, tick_us, reason)])
        seal_all(store)
    full = path.stat().st_size
    with Store.open(path, CHANNELS) as store:
        assert store.drop_readings(begin + 19 * HOUR_US, most_hours=99) == 19
    assert path.stat().st_size < full - 500_000


def test_late_readings_far_from_their_tick_are_found_when_sealed(store: Store) -> None:
    old = Reading(PRESSURE.name, 500.0, T0 - 3 * HOUR_US + SECOND_US)
    store.commit_tick(T0, [old])
    store.commit_tick(T0 + HOUR_US, [])
    assert seal_all(store) == 1
    assert store.readings(PRESSURE.name, old.time_us, old.time_us + 1).values.tolist() == [500]
    assert store.hours(PRESSURE.name, T0 - 3 * HOUR_US, T0).count.tolist() == [1, 0, 0]
