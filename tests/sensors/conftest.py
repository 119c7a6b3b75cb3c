"""Emulated hardware for each test, with the check that no bus stays locked."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from sensors.emulated.hardware import EmulatedHardware


@pytest.fixture
def hardware(tmp_path: Path) -> Iterator[EmulatedHardware]:
    emulated = EmulatedHardware(tmp_path)
    yield emulated
    assert not emulated.locked_buses()
    emulated.close()
