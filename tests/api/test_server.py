"""The server in its thread, over real sockets on loopback."""

from __future__ import annotations

import errno
import logging
import os
import signal
import socket
import threading
import time
from collections.abc import AsyncIterator, Iterator
from contextlib import asynccontextmanager, suppress

import httpx
import pytest
from fastapi import FastAPI

from api.app import create_app
from api.server import ApiServer, ServerError
from daemon.errors import DriplegError
from tests.api.fake import FakeRunning


@pytest.fixture
def server(running: FakeRunning) -> Iterator[ApiServer]:
    server = ApiServer(create_app(running), "127.0.0.1", 0)
    yield server
    server.stop()


def settled_threads() -> set[str]:
    """Names of the threads alive; those that are on their way out are joined first."""
    for thread in threading.enumerate():
        if thread not in (threading.current_thread(), threading.main_thread()):
            thread.join(2.0)
    return {thread.name for thread in threading.enumerate()}


def test_a_free_port_is_taken_and_requests_are_answered(server: ApiServer) -> None:
    server.start()
    assert server.port > 0
    assert server.url == f"http://127.0.0.1:{server.port}/"
    response = httpx.get(server.url + "api/v1/traps")
    assert response.status_code == 200
    assert [trap["trap"] for trap in response.json()] == ["tank", "riser"]
    assert "server" not in response.headers


def test_a_stopped_server_leaves_no_thread_and_no_socket(running: FakeRunning) -> None:
    before = settled_threads()
    server = ApiServer(create_app(running), "127.0.0.1", 0)
    server.start()
    httpx.get(server.url + "api/v1/traps")  # a worker thread has run a handler
    assert len(threading.enumerate()) > len(before)
    server.stop()
    assert settled_threads() == before
    with pytest.raises(httpx.ConnectError):
        httpx.get(server.url)


def test_stopping_twice_or_before_starting_is_fine(running: FakeRunning) -> None:
    server = ApiServer(create_app(running), "127.0.0.1", 0)
    server.stop()
    server.start()
    server.stop()
    server.stop()


def test_stopping_does_not_wait_for_idle_connections(server: ApiServer) -> None:
    server.start()
    with httpx.Client() as client:
        client.get(server.url + "api/v1/traps")  # the connection stays open
        begun = time.monotonic()
        server.stop()
        assert time.monotonic() - begun < 2.0


def test_a_taken_port_is_named_with_what_to_do(server: ApiServer, running: FakeRunning) -> None:
    server.start()
    second = ApiServer(create_app(running), "127.0.0.1", server.port)
    with pytest.raises(ServerError) as error:
        second.start()
    assert str(error.value) == (
        f"the API cannot listen on 127.0.0.1 port {server.port}: another program does already, "
        f"perhaps a second dripleg. `ss -ltnp sport = :{server.port}` names it; stop it, or give "
        "another port in [api]"
    )
    assert isinstance(error.value, DriplegError)


@pytest.mark.parametrize(
    ("host", "words"),
    [
        # TEST-NET-1, RFC 5737: nobody's own address
        ("192.0.2.1", '[api] host = "192.0.2.1" is not an address of this machine'),
        ("no such name", '[api] host = "no such name": no such address'),
    ],
)
def test_an_address_that_is_not_ours_is_named(running: FakeRunning, host: str, words: str) -> None:
    with pytest.raises(ServerError) as error:
        ApiServer(create_app(running), host, 0).start()
    assert words in str(error.value)


@pytest.mark.parametrize(
    ("number", "words"),
    [
        (errno.EACCES, "may not listen on 127.0.0.1 port 80: ports below 1024 are for root"),
        (errno.ENOBUFS, "cannot listen on 127.0.0.1 port 80: No buffer space available"),
    ],
)
def test_what_the_system_refuses_is_told_in_words(
    running: FakeRunning, monkeypatch: pytest.MonkeyPatch, number: int, words: str
) -> None:
    def refuse(_socket: socket.socket, _address: object) -> None:
        raise OSError(number, os.strerror(number))

    monkeypatch.setattr("socket.socket.bind", refuse)
    with pytest.raises(ServerError) as error:
        ApiServer(create_app(running), "127.0.0.1", 80).start()
    assert words in str(error.value)


def test_a_server_is_started_once(server: ApiServer) -> None:
    server.start()
    with pytest.raises(ServerError, match="was started before"):
        server.start()


def test_an_application_that_does_not_start_is_an_error_and_leaves_no_thread() -> None:
    @asynccontextmanager
    async def broken(app: FastAPI | None) -> AsyncIterator[None]:
        if app is not None:
            raise RuntimeError("no")
        yield

    before = settled_threads()
    with pytest.raises(ServerError, match="the API did not start on "):
        ApiServer(FastAPI(lifespan=broken), "127.0.0.1", 0).start()
    assert settled_threads() == before


@pytest.fixture
def short_stops(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("api.server.FINISH_WITHIN_S", 0)
    monkeypatch.setattr("api.server.JOIN_WITHIN_S", 0.3)


class Stuck:
    """An application with a handler that does not come to an end until it is let go."""

    def __init__(self, holds_the_loop: bool) -> None:
        self.reached, self.release = threading.Event(), threading.Event()
        self.app = FastAPI()
        self.app.get("/stuck")(self._on_loop if holds_the_loop else self._wait)

    def _wait(self) -> None:
        self.reached.set()
        self.release.wait(20.0)

    async def _on_loop(self) -> None:
        self._wait()

    def ask(self, url: str) -> threading.Thread:
        """Ask from a thread, which ends when the connection does."""

        def get() -> None:
            with suppress(httpx.HTTPError):
                httpx.get(url + "stuck", timeout=20.0)

        asking = threading.Thread(target=get)
        asking.start()
        assert self.reached.wait(10.0)
        return asking


@pytest.mark.usefixtures("short_stops")
def test_a_handler_that_waits_for_ever_does_not_hold_a_stop_up() -> None:
    stuck = Stuck(holds_the_loop=False)
    server = ApiServer(stuck.app, "127.0.0.1", 0)
    server.start()
    asking = stuck.ask(server.url)
    try:
        server.stop()
        asking.join(5.0)
        assert not asking.is_alive()
    finally:
        stuck.release.set()
        asking.join()


@pytest.mark.usefixtures("short_stops")
def test_a_server_that_cannot_be_stopped_is_an_error() -> None:
    stuck = Stuck(holds_the_loop=True)
    server = ApiServer(stuck.app, "127.0.0.1", 0)
    server.start()
    asking = stuck.ask(server.url)
    try:
        with pytest.raises(ServerError, match="a request does not come to an end"):
            server.stop()
    finally:
        stuck.release.set()
        asking.join()
    server.stop()


def test_ipv6_works_where_the_machine_has_it(running: FakeRunning) -> None:
    try:
        socket.create_server(("::1", 0), family=socket.AF_INET6).close()
    except OSError:
        pytest.skip("this machine has no IPv6 loopback")
    server = ApiServer(create_app(running), "::1", 0)
    server.start()
    try:
        assert server.url == f"http://[::1]:{server.port}/"
        assert httpx.get(server.url + "api/v1/traps").status_code == 200
    finally:
        server.stop()


def test_the_daemon_s_signal_handlers_stay(server: ApiServer) -> None:
    def handlers() -> list[object]:
        return [signal.getsignal(each) for each in (signal.SIGTERM, signal.SIGINT)]

    before = handlers()
    server.start()
    assert handlers() == before


def test_a_request_leaves_no_line_in_the_log(
    server: ApiServer, caplog: pytest.LogCaptureFixture
) -> None:
    with caplog.at_level(logging.INFO):
        server.start()
        caplog.clear()
        httpx.get(server.url + "api/v1/traps")
        httpx.get(server.url + "nope")
    # the client's own lines are not the server's
    assert [record for record in caplog.records if not record.name.startswith("http")] == []


def test_starting_is_told_once_with_the_address(
    server: ApiServer, caplog: pytest.LogCaptureFixture
) -> None:
    with caplog.at_level(logging.DEBUG, logger="api"):
        server.start()
    assert [record.getMessage() for record in caplog.records] == [f"API and page on {server.url}"]


def test_what_a_proxy_claims_is_not_believed(server: ApiServer) -> None:
    """A forwarded header must not turn another origin into ours."""
    server.start()
    headers = {
        "x-forwarded-host": "elsewhere.example",
        "x-forwarded-proto": "https",
        "origin": "https://elsewhere.example",
    }
    url = server.url + "api/v1/traps/tank/drains"
    assert httpx.post(url, json={}, headers=headers).status_code == 403


def test_many_at_once_are_all_answered(server: ApiServer, running: FakeRunning) -> None:
    server.start()
    url = server.url + "api/v1/traps/tank/drains"
    answers: list[int] = []

    def press(number: int) -> None:
        answers.append(httpx.post(url, json={"key": f"button-{number}"}).status_code)

    threads = [threading.Thread(target=press, args=(number % 5,)) for number in range(20)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert sorted(answers) == [200] * 15 + [201] * 5
    assert sorted(entry.seq for entry in running.journal) == [1, 2, 3, 4, 5]
