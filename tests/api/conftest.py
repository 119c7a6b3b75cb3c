"""Fixtures of the API's tests."""

from __future__ import annotations

import pytest

from tests.api.client import Client, client_of
from tests.api.fake import FakeRunning


@pytest.fixture
def running() -> FakeRunning:
    return FakeRunning()


@pytest.fixture
def client(running: FakeRunning) -> Client:
    return client_of(running)
