"""Opening the store, and what can go wrong: paths, other processes, kills, damage, full disks."""

from __future__ import annotations

import os
import shutil
import signal
import sqlite3
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path

import pytest

from daemon.errors import StoreError
from daemon.store import sqlite
from daemon.store.store import Store
from sensors.reading import Channel, Reading

CHANNEL = Channel("tank-gauge.pressure", "pressure", 10.0, 0.0, 1.2e6, 6000.0, gauge=True)
CHANNELS = {CHANNEL.name: CHANNEL}
T0 = 1_772_434_800_000_000  # 2026-03-02T07:00:00Z
NOBODY = 65534


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "dripleg.db"


def fill(store: Store, ticks: int) -> None:
    for number in range(ticks):
        store.commit_tick(T0 + number, [Reading(CHANNEL.name, 10.0 * number, T0 + number)])


def crash_image(path: Path, target: Path) -> Path:
    """What a power cut would leave of a database that is open now."""
    for suffix in ("", "-wal"):
        shutil.copy(f"{path}{suffix}", f"{target}{suffix}")
    return target


@contextmanager
def unprivileged() -> Iterator[None]:
    """As a user whom file permissions bind."""
    if os.geteuid() != 0:
        yield
        return
    os.seteuid(NOBODY)
    try:
        yield
    finally:
        os.seteuid(0)


@contextmanager
def child(script: str, path: Path) -> Iterator[subprocess.Popen[str]]:
    """Another process that runs this script with the path; killed at the end."""
    head = (
        "import sys\n"
        "from daemon.store.store import Store\n"
        "from sensors.reading import Channel, Reading\n"
        f"channel = {CHANNEL!r}\n"
        "store = Store.open(sys.argv[1], {channel.name: channel})\n"
        "print('open', flush=True)\n"
    )
    process = subprocess.Popen(
        [sys.executable, "-c", head + script, str(path)],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    )
    try:
        assert process.stdout is not None
        assert process.stdout.readline() == "open\n"
        yield process
    finally:
        process.kill()
        process.communicate(timeout=30)


# --- the settings


def test_the_production_settings_are_in_force_on_every_connection(path: Path) -> None:
    with Store.open(path, CHANNELS):
        database = sqlite.connect(path)
        with database.read() as first, database.read() as second, database.write() as writer:
            for connection in (first, second, writer):
                found = [
                    connection.exec_driver_sql(f"PRAGMA {name}").scalar()
                    for name in ("journal_mode", "synchronous", "foreign_keys", "busy_timeout")
                ]
                assert found == ["wal", 2, 1, 5000]  # 2 is FULL
        database.close()


def test_a_url_names_the_same_database_as_its_path(path: Path) -> None:
    with Store.open(f"sqlite:///{path}", CHANNELS) as store:
        store.set_meta("who", "url")
    with Store.open(path, CHANNELS) as store:
        assert store.get_meta("who") == "url"


def test_another_kind_of_database_is_refused() -> None:
    with pytest.raises(StoreError, match=r"mysql://shop/db: only SQLite can be used"):
        Store.open("mysql://shop/db", CHANNELS)


# --- paths


def test_a_missing_directory_is_named(tmp_path: Path) -> None:
    with pytest.raises(StoreError, match=r"nowhere/x\.db: .*make the directory .*nowhere first"):
        Store.open(tmp_path / "nowhere" / "x.db", CHANNELS)


def test_a_directory_is_not_a_database(tmp_path: Path) -> None:
    with pytest.raises(StoreError, match="this is a directory: give the path of a database file"):
        Store.open(tmp_path, CHANNELS)


@pytest.mark.parametrize("locked", ["directory", "file", "lock"])
def test_what_may_not_be_written_is_told(locked: str) -> None:
    with tempfile.TemporaryDirectory() as name:
        path = Path(name) / "dripleg.db"
        Store.open(path, CHANNELS).close()
        lock = path.with_name("dripleg.db.lock")
        for each in (Path(name), path, lock):
            each.chmod(0o777)
        if locked == "directory":
            path.unlink()
            lock.unlink()
            Path(name).chmod(0o555)
        else:
            (path if locked == "file" else lock).chmod(0o444)
        with (
            unprivileged(),
            pytest.raises(StoreError, match=r"cannot be written \(.*let the user that runs"),
        ):
            Store.open(path, CHANNELS)
        Path(name).chmod(0o777)


# --- not ours, or damaged


def test_a_file_that_is_no_database_is_told_and_left_alone(path: Path) -> None:
    words = b"the weekly moisture log of Alder Yard Finishing\n" * 40
    path.write_bytes(words)
    with pytest.raises(StoreError, match="this is not a dripleg database: give another path"):
        Store.open(path, CHANNELS)
    assert path.read_bytes() == words


def test_another_program_s_database_is_told_and_left_alone(path: Path) -> None:
    with closing(sqlite3.connect(path)) as other:
        other.execute("CREATE TABLE recipes (name TEXT)")
    with pytest.raises(StoreError, match=r"database of another program .*'recipes'"):
        Store.open(path, CHANNELS)
    with closing(sqlite3.connect(path)) as other:
        tables = other.execute("SELECT name FROM sqlite_master").fetchall()
    assert tables == [("recipes",)]


def test_damage_is_found_when_the_last_stop_was_not_clean(path: Path, tmp_path: Path) -> None:
    with Store.open(path, CHANNELS) as store:
        fill(store, 2000)
    with Store.open(path, CHANNELS):
        image = crash_image(path, tmp_path / "image.db")
    damaged = bytearray(image.read_bytes())
    middle = len(damaged) // 2 // 4096 * 4096
    damaged[middle : middle + 4096] = b"\x5a" * 4096
    image.write_bytes(damaged)
    with pytest.raises(StoreError, match=r"image\.db: the database is damaged.*restore a backup"):
        Store.open(image, CHANNELS)


def test_damage_met_while_reading_is_told(path: Path) -> None:
    with Store.open(path, CHANNELS) as store:
        fill(store, 2000)
    whole = path.read_bytes()
    damaged = bytearray(whole)
    damaged[len(whole) // 2 :] = b"\x5a" * (len(whole) - len(whole) // 2)
    path.write_bytes(damaged)
    with (
        pytest.raises(StoreError, match="the database is damaged: stop dripleg and restore"),
        Store.open(path, CHANNELS) as store,
    ):
        list(store.ticks(0, T0 + 2000))


def test_a_refused_database_is_not_kept_locked(path: Path) -> None:
    path.write_bytes(b"no database" * 100)
    with pytest.raises(StoreError):
        Store.open(path, CHANNELS)
    path.unlink()
    Store.open(path, CHANNELS).close()


# --- other processes, kills


def test_a_second_store_on_one_database_is_refused(path: Path) -> None:
    with (
        Store.open(path, CHANNELS),
        pytest.raises(StoreError, match=f"another dripleg .process {os.getpid()}. is using"),
    ):
        Store.open(path, CHANNELS)


def test_another_process_is_named_and_its_kill_frees_the_database(path: Path) -> None:
    with child("sys.stdin.read()", path) as other:
        with pytest.raises(StoreError, match=f"another dripleg .process {other.pid}. is using"):
            Store.open(path, CHANNELS)
        other.send_signal(signal.SIGKILL)
        other.wait(30)
        with Store.open(path, CHANNELS) as store:
            assert not store.last_stop_clean
    with Store.open(path, CHANNELS) as store:
        assert store.last_stop_clean


def test_a_kill_loses_no_tick_that_was_committed(path: Path) -> None:
    script = (
        "number = 0\n"
        "while True:\n"
        "    store.commit_tick(number, [Reading(channel.name, 10.0 * number, number)],\n"
        "                      checkpoint=str(number).encode())\n"
        "    print(number, flush=True)\n"
        "    number += 1\n"
    )
    with child(script, path) as other:
        assert other.stdout is not None
        for _ in range(200):
            told = int(other.stdout.readline())
        other.send_signal(signal.SIGKILL)
        rest = other.stdout.read().split("\n")
        told = max([told, *(int(line) for line in rest[:-1])])
        other.wait(30)
    with Store.open(path, CHANNELS) as store:
        last = store.last_tick_us
        assert last in (told, told + 1)  # one may have been committed and not yet told
        found = [(time_us, readings[0].value) for time_us, readings in store.ticks(-1, told + 1)]
        assert found == [(number, 10.0 * number) for number in range(last + 1)]
        assert store.checkpoint_before(last) == (last, str(last).encode())


def test_a_power_cut_leaves_what_was_committed(path: Path, tmp_path: Path) -> None:
    with Store.open(path, CHANNELS) as store:
        fill(store, 3)
        image = crash_image(path, tmp_path / "image.db")
    with Store.open(image, CHANNELS) as store:
        assert not store.last_stop_clean
        assert len(list(store.ticks(0, T0 + 3))) == 3


def test_a_new_database_counts_as_stopped_cleanly(path: Path) -> None:
    with Store.open(path, CHANNELS) as store:
        assert store.last_stop_clean


def test_a_clean_stop_leaves_one_file_with_everything(path: Path, tmp_path: Path) -> None:
    with Store.open(path, CHANNELS) as store:
        fill(store, 3)
    alone = Path(shutil.copy(path, tmp_path / "alone.db"))
    with Store.open(alone, CHANNELS) as store:
        assert len(list(store.ticks(0, T0 + 3))) == 3


# --- a full disk


def test_a_full_disk_is_told_and_the_tick_can_be_stored_later(path: Path) -> None:
    with Store.open(path, CHANNELS) as store:
        fill(store, 3)
        with store._database.write() as connection:
            pages = connection.exec_driver_sql("PRAGMA page_count").scalar()
            # SQLite's own limit gives the same error as a full disk, SQLITE_FULL
            connection.exec_driver_sql(f"PRAGMA max_page_count = {pages}")
        readings = [Reading(CHANNEL.name, 10.0, T0 + 3)]
        with pytest.raises(StoreError, match="no space left for the database: free some space"):
            store.commit_tick(T0 + 3, readings, checkpoint=b"x" * 100_000)
        assert store.last_tick_us == T0 + 2
        with store._database.write() as connection:
            connection.exec_driver_sql("PRAGMA max_page_count = 1000000")
        store.commit_tick(T0 + 3, readings, checkpoint=b"x" * 100_000)
        assert len(list(store.ticks(0, T0 + 3))) == 4


# --- backup


def test_a_backup_is_one_whole_database_of_one_moment(path: Path, tmp_path: Path) -> None:
    copy = tmp_path / "copy.db"
    with Store.open(path, CHANNELS) as store:
        fill(store, 100)
        store.backup(copy)
        store.commit_tick(T0 + 100, [])
    assert sorted(each.name for each in tmp_path.glob("copy*")) == ["copy.db"]
    with Store.open(copy, CHANNELS) as store:
        assert store.last_tick_us == T0 + 99
        assert len(list(store.ticks(0, T0 + 100))) == 100


def test_a_backup_takes_the_place_of_the_one_before(path: Path, tmp_path: Path) -> None:
    copy = tmp_path / "copy.db"
    copy.write_bytes(b"last night's")
    with Store.open(path, CHANNELS) as store:
        store.backup(copy)
    Store.open(copy, CHANNELS).close()


def test_a_backup_that_cannot_be_written_says_so(path: Path, tmp_path: Path) -> None:
    with (
        Store.open(path, CHANNELS) as store,
        pytest.raises(StoreError, match=r"copy\.db: the database cannot be opened: check that its"),
    ):
        store.backup(tmp_path / "nowhere" / "copy.db")


def test_a_backup_onto_the_database_itself_is_refused(path: Path) -> None:
    with (
        Store.open(path, CHANNELS) as store,
        pytest.raises(StoreError, match="this is the database itself"),
    ):
        store.backup(path)


def test_a_damaged_database_makes_no_backup(path: Path, tmp_path: Path) -> None:
    with Store.open(path, CHANNELS) as store:
        fill(store, 2000)
    damaged = bytearray(path.read_bytes())
    middle = len(damaged) // 2 // 4096 * 4096
    damaged[middle : middle + 4096] = b"\x5a" * 4096
    path.write_bytes(damaged)
    copy = tmp_path / "copy.db"
    copy.write_bytes(b"last night's")
    with (
        Store.open(path, CHANNELS) as store,
        pytest.raises(StoreError, match="the database is damaged"),
    ):
        store.backup(copy)
    assert copy.read_bytes() == b"last night's"
    assert sorted(each.name for each in tmp_path.glob("copy*")) == ["copy.db"]
