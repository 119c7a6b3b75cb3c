"""Requests generated from the API's own description, valid and broken, over a real socket.

Every operation that is described is asked: of a daemon in memory with one of everything, of a real
one that has run for a while, and of one that asks for keys.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import pytest
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st

from api.app import create_app
from api.server import ApiServer
from daemon.journal import Drain
from daemon.shell import Shell
from daemon.store.store import Store
from daemon.views import Running
from tests.api.fake import FakeRunning, a_site
from tests.daemon.shops import BEGUN_US, working
from tests.daemon.test_shell import SHOP, HandClock, Played

schemathesis = pytest.importorskip("schemathesis")

CHECKS = (
    "not_a_server_error",
    "status_code_conformance",
    "content_type_conformance",
    "response_schema_conformance",
    "response_headers_conformance",
)
# names that exist, so that not every generated request ends at 404
KNOWN: dict[str, list[Any]] = {
    "trap": ["tank", "riser"],
    "alarm": ["riser-drain-due", "tank-drain-due"],
    "outlet": ["spray-gun"],
    "station": ["tank", "riser"],
    "sensor": ["intake-air"],
    "channel": ["tank-gauge.pressure", "motor.contact"],
    "seq": [1, 2],
}
DESCRIBED = create_app(FakeRunning()).openapi()["paths"]
OPERATIONS = [(path, method) for path, each in DESCRIBED.items() for method in each]
# any text is a trap's name, known or not: what can be sent wrongly is a query or a body
BREAKABLE = [
    (path, method)
    for path, method in OPERATIONS
    if "requestBody" in DESCRIBED[path][method]
    or any(each["in"] == "query" for each in DESCRIBED[path][method].get("parameters", ()))
]


def served(running: Running) -> Iterator[Any]:
    server = ApiServer(create_app(running), "127.0.0.1", 0)
    server.start()
    yield schemathesis.openapi.from_url(server.url + "api/v1/openapi.json")
    server.stop()


@pytest.fixture(scope="module")
def fake() -> Iterator[Any]:
    yield from served(FakeRunning())


@pytest.fixture(scope="module")
def locked() -> Iterator[Any]:
    yield from served(FakeRunning(site=a_site("0.0.0.0")))


@pytest.fixture(scope="module")
def real(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Any]:
    path = tmp_path_factory.mktemp("real") / "birch-works.db"
    record = list(working(SHOP, 60))
    with Store.open(path, SHOP.channels) as store:
        clock = HandClock(BEGUN_US)
        shell = Shell(SHOP, clock, Played(record), store)
        for now_us, _ in record:
            clock.wall_us = now_us
            shell.tick(now_us)
        shell.record(Drain("tank", volume_kg=0.1))
        yield from served(shell)


def ask(described: Any, path: str, method: str, mode: str, times: int, *more: str) -> None:
    """Send so many generated requests and hold every answer against the description."""
    checks = [getattr(schemathesis.checks, name) for name in (*CHECKS, *more)]
    operation = described[path][method]
    cases = operation.as_strategy(generation_mode=schemathesis.GenerationMode[mode])

    @settings(
        max_examples=times,
        deadline=None,
        derandomize=True,
        database=None,
        phases=[Phase.explicit, Phase.generate],
        suppress_health_check=list(HealthCheck),
    )
    @given(case=cases, data=st.data())
    def each(case: Any, data: st.DataObject) -> None:
        if mode == "POSITIVE":
            for names in (case.path_parameters, case.query):
                for name in set(names or {}) & set(KNOWN):
                    names[name] = data.draw(st.sampled_from(KNOWN[name]))
        case.call_and_validate(checks=checks, timeout=10)

    each()


def test_every_way_to_write_is_asked() -> None:
    assert sum(method == "post" for _, method in OPERATIONS) >= 12


@pytest.mark.parametrize(("path", "method"), OPERATIONS)
def test_no_valid_request_finds_a_server_error_or_an_undocumented_answer(
    fake: Any, path: str, method: str
) -> None:
    ask(fake, path, method.upper(), "POSITIVE", 20)


@pytest.mark.parametrize(("path", "method"), BREAKABLE)
def test_no_broken_request_is_taken_or_finds_a_server_error(
    fake: Any, path: str, method: str
) -> None:
    ask(fake, path, method.upper(), "NEGATIVE", 20, "negative_data_rejection")


@pytest.mark.parametrize(("path", "method"), OPERATIONS)
def test_a_running_daemon_answers_as_it_is_described(real: Any, path: str, method: str) -> None:
    ask(real, path, method.upper(), "POSITIVE", 10)


@pytest.mark.parametrize(("path", "method"), OPERATIONS)
def test_who_has_no_key_is_answered_as_it_is_described(locked: Any, path: str, method: str) -> None:
    ask(locked, path, method.upper(), "POSITIVE", 3)
