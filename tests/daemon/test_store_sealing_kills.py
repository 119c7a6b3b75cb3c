"""A kill or a failure at any instant of packing loses nothing and doubles nothing."""

from __future__ import annotations

import random
import shutil
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from sqlalchemy import event
from sqlalchemy.exc import OperationalError

from daemon.clock import HOUR_US
from daemon.errors import StoreError
from daemon.store.store import Store
from tests.daemon.sealed import (
    CHANNELS,
    PRESSURE,
    T0,
    Record,
    fill,
    record,
    seal_all,
    shown,
)

EVER = (0, 2**61)
HOURS = 30
KILLS = 8
PACKER = """
import sys
from daemon.store.store import Store
from tests.daemon.sealed import CHANNELS
store = Store.open(sys.argv[1], CHANNELS)
print("open", flush=True)
while store.seal_next():
    print("sealed", flush=True)
print("done", flush=True)
sys.stdin.read()
"""


@pytest.fixture(scope="module")
def ticks() -> Record:
    return record(HOURS + 0.05)


@pytest.fixture(scope="module")
def filled(tmp_path_factory: pytest.TempPathFactory, ticks: Record) -> Path:
    """A database of hours that were never sealed."""
    path = tmp_path_factory.mktemp("filled") / "dripleg.db"
    with Store.open(path, CHANNELS) as store:
        fill(store, ticks)
    return path


def packs_until_killed(path: Path, spins: int) -> int:
    """Run a process that packs, kill it somewhere in its work; how many hours it told of."""
    process = subprocess.Popen(
        [sys.executable, "-c", PACKER, str(path)],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    )
    try:
        assert process.stdout is not None
        assert process.stdout.readline() == "open\n"
        told = 0
        for _ in range(1 + spins % 4):
            told += process.stdout.readline() == "sealed\n"
        for _ in range(spins * 1000):  # somewhere within the next hour
            pass
    finally:
        process.kill()
        told += process.communicate(timeout=30)[0].count("sealed\n")
    return told


def test_a_kill_at_any_instant_of_packing_loses_and_doubles_nothing(
    tmp_path: Path, filled: Path, ticks: Record
) -> None:
    path = tmp_path / "dripleg.db"
    shutil.copy(filled, path)
    expected = shown(ticks)
    chance = random.Random(7)
    told = 0
    for _ in range(KILLS):
        told += packs_until_killed(path, chance.randrange(1, 200))
        with Store.open(path, CHANNELS) as store:
            assert shown(list(store.ticks(*EVER))) == expected
            hours = store.hours(PRESSURE.name, T0, T0 + HOURS * HOUR_US)
            assert hours.count.tolist() == [360] * HOURS
    with Store.open(path, CHANNELS) as store:
        assert seal_all(store) <= HOURS - told  # what was told of was committed
        assert shown(list(store.ticks(*EVER))) == expected


def test_a_failure_at_any_statement_of_packing_leaves_all_as_it_was(tmp_path: Path) -> None:
    """The disk refuses the first statement, then the second ... until it refuses none."""
    short = record(2.1)
    expected = shown(short)
    with Store.open(tmp_path / "dripleg.db", CHANNELS) as store:
        fill(store, short)
        engine = store._database.engine
        at = 0
        left = 0

        def refuse(*arguments: Any) -> None:
            nonlocal left
            if left == 0:
                raise OperationalError(str(arguments[2]), {}, Exception("disk I/O error"))
            left -= 1

        failures = 0
        sealed = False
        while not sealed:
            left = at
            event.listen(engine, "before_cursor_execute", refuse)
            try:
                sealed = store.seal_next()
            except StoreError:
                failures += 1
            finally:
                event.remove(engine, "before_cursor_execute", refuse)
            at += 1
            assert shown(list(store.ticks(*EVER))) == expected
            hours = store.hours(PRESSURE.name, T0, T0 + 2 * HOUR_US)
            assert hours.count.tolist() == [360, 360]
        assert failures >= 6  # begin, find, read, insert ticks, values and hours, delete
        assert seal_all(store) == 1
