"""Fixtures that tests of the daemon share."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.daemon.broker import Broker
from tests.daemon.linking import Journal, WatchedStore


@pytest.fixture
def broker(tmp_path: Path) -> Iterator[Broker]:
    """A private mosquitto that runs."""
    folder = tmp_path / "broker"
    folder.mkdir()
    started = Broker(folder).start()
    yield started
    started.stop()


@pytest.fixture
def store(tmp_path: Path) -> Iterator[WatchedStore]:
    """An open store of a site without channels."""
    with WatchedStore.open(tmp_path / "dripleg.db", {}) as opened:
        yield opened


@pytest.fixture
def journal() -> Journal:
    """What was recorded, beside any store."""
    return Journal()
