"""Fixtures that tests of the daemon share."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.daemon.broker import Broker


@pytest.fixture
def broker(tmp_path: Path) -> Iterator[Broker]:
    """A private mosquitto that runs."""
    folder = tmp_path / "broker"
    folder.mkdir()
    started = Broker(folder).start()
    yield started
    started.stop()
