"""`dripleg backup`: a consistent, checked copy of the database, also while a daemon runs."""

from __future__ import annotations

from pathlib import Path

from daemon.clock import format_rfc3339
from daemon.errors import StoreError
from daemon.site.types import Site
from daemon.store import copies
from daemon.store.reader import StoreReader


def make_backup(site: Site, target: Path, store_path: Path) -> str:
    """Copy the database; what to say about it. StoreError when that cannot be."""
    copies.copy(store_path, target)
    try:
        with StoreReader.open(target) as reader:
            last_us = reader.last_tick_us
    except StoreError:  # of another version, which a copy may well be
        last_us = None
    until = "" if last_us is None else f", up to {format_rfc3339(last_us)}"
    size_mb = target.stat().st_size / 1e6
    return f"{site.name}: copied to {target} and checked{until} ({size_mb:.1f} MB)"
