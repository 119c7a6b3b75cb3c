"""`dripleg weekly`: a week's log on the terminal, and its PDF and CSV; also beside a daemon."""

from __future__ import annotations

import argparse
import threading
from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from pathlib import Path

from daemon.clock import Clock
from daemon.errors import InUseError, StoreError, WeekError
from daemon.site.types import Site
from daemon.store.log_reader import LogReader
from daemon.store.store import Store
from daemon.weekly import files
from daemon.weekly.compute import week_log
from daemon.weekly.rows import LogRows, read_rows
from daemon.weekly.sheet import sheet
from daemon.weekly.text import text_of
from daemon.weekly.weeks import Week, last_full, week_at

PATIENCE_S = 1.0  # after which it says what it is doing


def weekly(
    site: Site,
    options: argparse.Namespace,
    store_path: Path,
    clock: Clock,
    say: Callable[[str], None],
) -> str:
    """The log as text; WeekError or StoreError says what stands in the way."""
    now_us = clock.now_us()
    week = last_full(site.timezone, now_us)
    if options.week is not None:
        week = Week.read(options.week)
    if week > (now := week_at(site.timezone, now_us)):
        raise WeekError(f"{week} has not begun: this is {now}")
    if not store_path.exists():
        raise StoreError(
            f"there is no database at {store_path}: start the daemon first, or name its database "
            "with --store"
        )
    with patience(say, f"reading {store_path}"), _rows(site, store_path) as store:
        told = week_log(site, read_rows(store, week, site, now_us))
    shown = text_of(sheet(site, told))
    if options.out is None:
        return shown
    with patience(say, f"writing to {options.out}"):
        pdf, table = files.write(site, told, options.out)
    return f"{shown}\nWritten: {pdf} and {table}"


@contextmanager
def _rows(site: Site, path: Path) -> Iterator[LogRows]:
    """The log's rows, by way of the store where no daemon has it, else beside the daemon."""
    with ExitStack() as parts:
        store: LogRows
        try:
            store = parts.enter_context(Store.open(path, site.channels))
        except InUseError:
            store = parts.enter_context(LogReader.open(path))
        yield store


@contextmanager
def patience(say: Callable[[str], None], doing: str) -> Iterator[None]:
    """Say what is being done, if it takes long."""
    timer = threading.Timer(PATIENCE_S, say, [f"dripleg: {doing} ..."])
    timer.daemon = True
    timer.start()
    try:
        yield
    finally:
        timer.cancel()
