"""`dripleg backup`: a copy while the daemon writes, what it may replace, and putting it back."""

from __future__ import annotations

import errno
import io
import os
import re
import shutil
import sqlite3
import tempfile
import threading
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path

import pytest

from daemon.__main__ import main
from daemon.backup_command import make_backup
from daemon.errors import StoreError
from daemon.site.reader import read_site
from daemon.store import copies, sqlite
from daemon.store.store import Store
from tests.daemon.sealed import CHANNELS, T0, TICK, fill, ordinary, record, seal_all, shown
from tests.daemon.test_store_opening import unprivileged

EVER = (0, 2**61)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    (tmp_path / "shop.toml").write_text("", encoding="utf-8")
    return tmp_path


@pytest.fixture
def store(folder: Path) -> Iterator[Store]:
    with Store.open(folder / "shop.db", CHANNELS) as opened:
        yield opened


def backup(folder: Path, target: str = "copy.db", *arguments: str) -> int:
    return main(["backup", str(folder / "shop.toml"), str(folder / target), *arguments])


@pytest.mark.parametrize("pages_a_step", [256, 1])
def test_a_copy_made_while_the_daemon_writes_is_one_moment_s_state(
    folder: Path,
    store: Store,
    capsys: pytest.CaptureFixture[str],
    monkeypatch: pytest.MonkeyPatch,
    pages_a_step: int,
) -> None:
    monkeypatch.setattr(sqlite, "_PAGES_A_STEP", pages_a_step)
    fill(store, record(30))
    stop, ticks = threading.Event(), list(record(30))

    def write() -> None:
        while not stop.is_set():
            tick_us = ticks[-1][0] + TICK
            ticks.append((tick_us, ordinary(tick_us)))
            store.commit_tick(*ticks[-1])
            store.seal_next()

    writer = threading.Thread(target=write)
    writer.start()
    try:
        codes = [backup(folder) for _ in range(3)]
    finally:
        stop.set()
        writer.join()
    assert codes == [0, 0, 0]
    assert "copied to" in capsys.readouterr().out
    with Store.open(folder / "copy.db", CHANNELS) as copy:
        found = list(copy.ticks(*EVER))
    assert shown(found) == shown(ticks[: len(found)])
    assert len(found) >= len(record(30))


def test_a_daemon_that_writes_at_every_step_does_not_send_a_copy_back_to_its_start(
    folder: Path, store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(sqlite, "_PAGES_A_STEP", 4)
    ticks = record(30)
    fill(store, ticks)
    shares: list[float] = []

    def copied(share: float) -> None:
        assert not shares or share > shares[-1]
        shares.append(share)
        tick_us = ticks[-1][0] + TICK * len(shares)
        store.commit_tick(tick_us, ordinary(tick_us))

    copies.copy(folder / "shop.db", folder / "copy.db", copied)
    assert len(shares) > 5
    assert shares[-1] == 1.0
    with Store.open(folder / "copy.db", CHANNELS) as copy:
        assert shown(list(copy.ticks(*EVER))) == shown(ticks)


class Terminal(io.StringIO):
    """A person looks at it."""

    def isatty(self) -> bool:
        return True


class Ticking:
    """Goes on by so much at every look: a slow disk."""

    def __init__(self, step_s: float) -> None:
        self.seconds, self.step_s = 0.0, step_s

    def now_us(self) -> int:
        return 0

    def monotonic(self) -> float:
        self.seconds += self.step_s
        return self.seconds

    def wait(self, seconds: float, stop: threading.Event) -> bool:
        raise AssertionError("nobody waits here")


@pytest.mark.parametrize(
    ("stream", "step_s", "told"),
    [
        (Terminal(), 0.4, True),
        (Terminal(), 1e-6, False),  # done before anybody looks up
        (io.StringIO(), 0.4, False),
    ],
)
def test_a_long_copy_tells_a_terminal_how_far_it_is(
    folder: Path,
    store: Store,
    monkeypatch: pytest.MonkeyPatch,
    stream: io.StringIO,
    step_s: float,
    told: bool,
) -> None:
    monkeypatch.setattr(sqlite, "_PAGES_A_STEP", 4)
    monkeypatch.setattr(sqlite, "_STEPS_A_WORD", 10)
    fill(store, record(30))
    make_backup(read_site(folder / "shop.toml"), folder / "copy.db", folder / "shop.db", stream,
                Ticking(step_s))  # fmt: skip
    shown = stream.getvalue()
    shares = [int(each) for each in re.findall(r"\rcopying: +(\d+)%", shown)]
    assert shares == sorted(set(shares))
    assert (len(shares) > 5 and shares[-1] == 100) is told
    assert ("\rchecking ..." in shown) is told
    assert shown == "" or shown.endswith("\r")  # the line is taken away again


def test_the_line_is_taken_away_also_when_the_copy_fails(
    folder: Path, store: Store, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(sqlite, "_PAGES_A_STEP", 4)
    monkeypatch.setattr(sqlite, "_STEPS_A_WORD", 10)
    fill(store, record(30))

    def fails(*_: object) -> None:
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(os, "replace", fails)
    stream = Terminal()
    with pytest.raises(StoreError, match="free some space"):
        make_backup(read_site(folder / "shop.toml"), folder / "copy.db", folder / "shop.db",
                    stream, Ticking(0.4))  # fmt: skip
    assert stream.getvalue().endswith(" \r")


def test_a_copy_is_put_back_and_goes_on(folder: Path, store: Store) -> None:
    ticks = record(2.1)
    fill(store, ticks)
    seal_all(store)
    assert backup(folder) == 0
    store.close()
    for each in folder.glob("shop.db*"):
        each.unlink()
    shutil.copy(folder / "copy.db", folder / "shop.db")
    with Store.open(folder / "shop.db", CHANNELS) as again:
        assert shown(list(again.ticks(*EVER))) == shown(ticks)
        again.commit_tick(ticks[-1][0] + TICK, [])


def test_a_database_in_use_is_no_copy_any_more(
    folder: Path, store: Store, capsys: pytest.CaptureFixture[str]
) -> None:
    """Whoever put a copy back has a database there, which no backup may replace."""
    store.commit_tick(T0, ordinary(T0))
    assert backup(folder) == 0
    Store.open(folder / "copy.db", CHANNELS).close()
    assert backup(folder) == 1
    assert "no copy of a dripleg database: it is left as it is" in capsys.readouterr().err


@pytest.mark.parametrize("what", ["text", "empty", "other database", "own database", "link"])
def test_only_a_copy_is_ever_replaced(
    folder: Path, store: Store, capsys: pytest.CaptureFixture[str], what: str
) -> None:
    store.commit_tick(T0, ordinary(T0))
    target = folder / "copy.db"
    if what == "text":
        target.write_text("the year's accounts")
    elif what == "empty":
        target.touch()
    elif what == "other database":
        with closing(sqlite3.connect(target)) as other:
            other.execute("CREATE TABLE meta (name TEXT, value TEXT)")
            other.execute("CREATE TABLE accounts (x)")
            other.commit()
    elif what == "own database":
        target = folder / "shop.db"
    else:
        os.symlink(folder / "shop.db", target)
    before = target.read_bytes()
    assert backup(folder, target.name) == 1
    told = capsys.readouterr().err
    assert "give another path" in told
    assert target.read_bytes() == before
    assert not list(folder.glob("*.part"))


@pytest.mark.parametrize(
    ("target", "arguments", "words"),
    [
        ("", (), "this is a directory: name the copy's file"),
        ("nowhere/copy.db", (), "check that its directory exists"),
        ("copy.db", ("--store", "nowhere.db"), "nowhere.db: there is no database"),
    ],
)
def test_what_cannot_be_copied_is_told(
    folder: Path,
    store: Store,
    capsys: pytest.CaptureFixture[str],
    target: str,
    arguments: tuple[str, ...],
    words: str,
) -> None:
    store.commit_tick(T0, ordinary(T0))
    assert backup(folder, target, *arguments) == 1
    assert words in capsys.readouterr().err


def test_who_may_not_read_a_database_is_told_how(capsys: pytest.CaptureFixture[str]) -> None:
    """Beside a daemon its files can be read; without one only by their owner."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        (folder / "shop.toml").write_text("", encoding="utf-8")
        with Store.open(folder / "shop.db", CHANNELS) as store:
            store.commit_tick(T0, ordinary(T0))
            for each in folder.iterdir():
                each.chmod(0o444)
            (folder / "for-all").mkdir()
            (folder / "for-all").chmod(0o777)
            folder.chmod(0o555)
            with unprivileged():
                assert backup(folder, "for-all/copy.db") == 0
        with unprivileged():
            assert backup(folder, "for-all/copy.db") == 1
        assert "while no daemon has it: put sudo -u '" in capsys.readouterr().err
        folder.chmod(0o755)


def test_a_damaged_database_is_told_and_the_last_copy_kept(
    folder: Path, store: Store, capsys: pytest.CaptureFixture[str]
) -> None:
    fill(store, record(3))
    assert backup(folder) == 0
    good = (folder / "copy.db").read_bytes()
    store.close()
    path = folder / "shop.db"
    data = bytearray(path.read_bytes())
    data[4096 * 3 : 4096 * 9] = bytes(4096 * 6)
    path.write_bytes(data)
    assert backup(folder) == 1
    assert "damaged" in capsys.readouterr().err
    assert (folder / "copy.db").read_bytes() == good


def test_an_older_version_can_be_copied_before_it_is_brought_up_to_date(folder: Path) -> None:
    with Store.open(folder / "shop.db", CHANNELS) as store:
        store.commit_tick(T0, ordinary(T0))
    with closing(sqlite3.connect(folder / "shop.db")) as connection:
        connection.execute("DELETE FROM schema_version WHERE version > 1")
        connection.commit()
    assert backup(folder) == 0
    with closing(sqlite3.connect(folder / "copy.db")) as copy:
        assert copy.execute("SELECT max(version) FROM schema_version").fetchone() == (1,)
        assert copy.execute("SELECT count(*) FROM ticks").fetchone() == (1,)
