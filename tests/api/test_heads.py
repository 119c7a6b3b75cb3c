"""HEAD answers as GET does, without the body: RFC 9110, section 9.3.2."""

from __future__ import annotations

import socket

import pytest
from fastapi.routing import APIRoute

from api.app import create_app
from api.pages import assets, line, pair, round, spray, week
from api.routes import home
from api.server import ApiServer
from tests.api.client import Client, client_of, problem_of
from tests.api.fake import FakeRunning, a_site
from tests.api.test_keys import a_key
from tests.api.test_problems import FailingRunning

PLACES = {
    "trap": "tank",
    "outlet": "spray-gun",
    "week": "2026-W48",
    "kind": "not-found",
    "name": "style.css",
    "rest": "drained",
    "alarm": "riser-drain-due",
    "seq": "1",
    "station": "tank",
    "sensor": "intake-air",
}


def addresses() -> list[str]:
    """Every address that GET can be asked of, its names filled in."""
    app = create_app(FakeRunning())
    found = {path for path, methods in app.openapi()["paths"].items() if "get" in methods}
    for shown in (home, round, spray, week, line, assets, pair):
        found |= {
            route.path.replace("{rest:path}", "{rest}")
            for route in shown.router.routes
            if isinstance(route, APIRoute) and "GET" in (route.methods or ())
        }
    filled = [path.format(**PLACES) for path in sorted(found)]
    return [
        f"{path}?channel=tank-gauge.pressure" if path.endswith("/readings") else path
        for path in filled
    ]


@pytest.mark.parametrize("path", addresses())
def test_every_address_answers_head_as_get_without_a_body(client: Client, path: str) -> None:
    full, head = client.get(path), client.request("HEAD", path)
    assert full.status_code < 400, (path, full.text)
    assert head.status_code == full.status_code
    assert dict(head.headers) == dict(full.headers)
    assert head.content == b""


def test_the_addresses_are_those_of_the_api_and_of_the_pages() -> None:
    found = addresses()
    assert {"/", "/round", "/api/v1/health", "/api/v1/traps/tank", "/metrics"} <= set(found)
    assert len(found) > 25


def test_a_file_that_the_browser_has_is_not_told_again(client: Client) -> None:
    tag = client.request("HEAD", "/static/style.css").headers["etag"]
    again = client.request("HEAD", "/static/style.css", headers={"if-none-match": tag})
    assert again.status_code == 304
    assert again.headers["etag"] == tag


def test_an_address_that_only_takes_refuses_head_as_it_refuses_get(client: Client) -> None:
    response = client.request("HEAD", "/api/v1/alarms/tank-drain-due/acknowledge")
    assert response.status_code == 405
    assert response.headers.get_list("allow") == ["POST"]
    assert response.content == b""


def test_nothing_there_is_404_without_a_body(client: Client) -> None:
    response = client.request("HEAD", "/api/v1/trapz")
    assert (response.status_code, response.content) == (404, b"")


def test_a_failure_inside_has_no_body_either() -> None:
    response = client_of(FailingRunning()).request("HEAD", "/api/v1/traps")
    assert (response.status_code, response.content) == (500, b"")


def test_head_needs_a_key_where_get_needs_one() -> None:
    running = FakeRunning(site=a_site("0.0.0.0"))
    text = a_key(running, "read")
    client = client_of(running, host="192.168.1.20:8080")
    problem_of(client.get("/api/v1/traps"), 401, "keys-needed")
    refused = client.request("HEAD", "/api/v1/traps")
    assert (refused.status_code, refused.content) == (401, b"")
    assert refused.headers["www-authenticate"] == 'Bearer realm="dripleg"'
    bearer = {"authorization": f"Bearer {text}"}
    assert client.request("HEAD", "/api/v1/traps", headers=bearer).status_code == 200
    rebound = client_of(running, host="rebound.example:8080")
    assert rebound.request("HEAD", "/api/v1/traps", headers=bearer).status_code == 421


def test_over_a_socket_the_length_is_said_and_nothing_follows(running: FakeRunning) -> None:
    server = ApiServer(create_app(running), "127.0.0.1", 0)
    server.start()
    try:
        with socket.create_connection(("127.0.0.1", server.port), 5.0) as line:
            line.sendall(
                b"HEAD /api/v1/health HTTP/1.1\r\nhost: 127.0.0.1\r\nconnection: close\r\n\r\n"
            )
            with line.makefile("rb") as stream:
                said = stream.read()
    finally:
        server.stop()
    lines, _, rest = said.partition(b"\r\n\r\n")
    assert lines.startswith(b"HTTP/1.1 200 ")
    assert rest == b""
    length = [line for line in lines.lower().split(b"\r\n") if line.startswith(b"content-length")]
    assert len(length) == 1
    assert int(length[0].partition(b":")[2]) > 50
