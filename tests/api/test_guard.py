"""Who may ask, and how.

The attacks meant: DNS rebinding (a page whose name is made to point here) and cross-site requests
(a page elsewhere that sends a form or a fetch here). By the Fetch standard, "CORS-safelisted
request-header", a page may send text/plain, form types, and no type at all without asking first, so
none of them may write.
"""

from __future__ import annotations

import pytest

from api.guard import LARGEST_BODY, host_is_ours
from daemon.addresses import is_loopback
from tests.api.client import Client, client_of, problem_of
from tests.api.fake import FakeRunning, a_site

DRAINS = "/api/v1/traps/tank/drains"
AS_JSON = {"content-type": "application/json"}


@pytest.mark.parametrize(
    ("host", "ours"),
    [
        ("127.0.0.1:8080", True),
        ("127.0.0.1", True),
        ("LOCALHOST:8080", True),
        ("[::1]:8080", True),
        ("localhost.", True),
        ("rebound.example:8080", False),
        ("127.0.0.1.rebound.example", False),
        ("localhost.rebound.example", False),
        ("192.168.1.20", False),
        ("dripleg.local", False),
        ("", False),
        ("[::1", False),
        ("user@rebound.example", False),
    ],
)
def test_a_loopback_api_answers_to_loopback_names_only(host: str, ours: bool) -> None:
    assert host_is_ours(host, "127.0.0.1") is ours


@pytest.mark.parametrize(
    ("host", "ours"),
    [
        ("192.168.1.20:8080", True),
        ("[fd00::20]:8080", True),
        ("shop-pi:8080", True),
        ("shop-pi.local", True),
        ("shop-pi.home.arpa", True),
        ("localhost", True),
        ("rebound.example", False),
        ("local.rebound.example", False),
        ("", False),
    ],
)
def test_an_api_on_the_network_answers_to_names_that_nobody_else_can_own(
    host: str, ours: bool
) -> None:
    assert host_is_ours(host, "0.0.0.0") is ours


@pytest.mark.parametrize(
    ("host", "loopback"),
    [
        ("127.0.0.1", True),
        ("127.8.9.1", True),
        ("::1", True),
        ("localhost", True),
        ("0.0.0.0", False),
        ("::", False),
        ("", False),
        ("192.168.1.20", False),
        ("shop-pi.local", False),
    ],
)
def test_which_addresses_only_this_machine_reaches(host: str, loopback: bool) -> None:
    assert is_loopback(host) is loopback


@pytest.mark.parametrize("method", ["GET", "POST"])
def test_a_rebound_name_reads_and_writes_nothing(running: FakeRunning, method: str) -> None:
    client = client_of(running, host="rebound.example:8080")
    response = client.request(method, DRAINS, content=b"{}", headers=AS_JSON)
    problem = problem_of(response, 421, "wrong-host")
    assert problem["detail"].startswith('the Host header says "rebound.example:8080"')
    assert running.journal == []


@pytest.mark.parametrize(
    "headers",
    [
        {"origin": "https://elsewhere.example"},
        {"origin": "null"},
        {"origin": "http://127.0.0.1:3000"},
        {"origin": "http://127.0.0.1"},
        {"origin": "http://localhost:8080"},
        {"origin": "http://127.0.0.1:8080.elsewhere.example"},
        {"sec-fetch-site": "cross-site"},
        {"sec-fetch-site": "same-site"},
        {"origin": "http://127.0.0.1:8080", "sec-fetch-site": "cross-site"},
    ],
)
def test_a_page_from_elsewhere_cannot_write(
    running: FakeRunning, client: Client, headers: dict[str, str]
) -> None:
    response = client.post(DRAINS, content=b"{}", headers={**AS_JSON, **headers})
    problem_of(response, 403, "cross-site-write")
    assert running.journal == []


@pytest.mark.parametrize(
    "headers",
    [
        {},
        {"origin": "http://127.0.0.1:8080"},
        {"origin": "http://127.0.0.1:8080", "sec-fetch-site": "same-origin"},
    ],
)
def test_own_pages_and_programs_can_write(client: Client, headers: dict[str, str]) -> None:
    response = client.post(DRAINS, content=b"{}", headers={**AS_JSON, **headers})
    assert response.status_code == 201


@pytest.mark.parametrize(
    "content_type", ["", "text/plain", "application/x-www-form-urlencoded", "multipart/form-data"]
)
def test_what_a_form_can_send_writes_nothing(
    running: FakeRunning, client: Client, content_type: str
) -> None:
    headers = {"content-type": content_type} if content_type else {}
    problem = problem_of(client.post(DRAINS, content=b"{}", headers=headers), 415, "not-json")
    assert "Send content-type: application/json" in problem["detail"]
    assert running.journal == []


def test_a_charset_beside_the_type_is_fine(client: Client) -> None:
    headers = {"content-type": "application/json; charset=utf-8"}
    assert client.post(DRAINS, content=b"{}", headers=headers).status_code == 201


def test_a_body_far_too_large_is_refused_unread(running: FakeRunning, client: Client) -> None:
    body = b" " * LARGEST_BODY + b"{}"
    problem = problem_of(client.post(DRAINS, content=body, headers=AS_JSON), 413, "too-large")
    assert problem["detail"].startswith("it has 16386 bytes, and 16384 are taken")
    assert running.journal == []


def test_a_body_of_unsaid_length_is_refused(running: FakeRunning, client: Client) -> None:
    headers = {**AS_JSON, "transfer-encoding": "chunked"}
    problem_of(client.post(DRAINS, content=b"{}", headers=headers), 411, "no-length")
    assert running.journal == []


@pytest.mark.parametrize("host", ["0.0.0.0", "192.168.1.20", "::", ""])
def test_an_api_that_others_can_reach_tells_and_takes_nothing_without_a_key(host: str) -> None:
    running = FakeRunning(site=a_site(host))
    client = client_of(running, host="192.168.1.20:8080")
    problem_of(client.get("/api/v1/traps"), 401, "keys-needed")
    for path in (DRAINS, "/api/v1/alarms/riser-drain-due/acknowledge"):
        problem = problem_of(client.post(path, json={}), 401, "keys-needed")
        assert "`dripleg key SITE make` makes a key" in problem["detail"]
    assert running.journal == []


def test_no_answer_opens_itself_to_other_origins(client: Client) -> None:
    asking = {
        "origin": "https://elsewhere.example",
        "access-control-request-method": "POST",
        "access-control-request-headers": "content-type",
    }
    for method, path in (("GET", "/api/v1/traps"), ("OPTIONS", DRAINS), ("POST", DRAINS)):
        response = client.request(method, path, headers=asking)
        assert not [name for name in response.headers if name.startswith("access-control")]
    assert client.request("OPTIONS", DRAINS, headers=asking).status_code == 405


def test_answers_are_not_kept_framed_or_sniffed(client: Client) -> None:
    for path in ("/", "/api/v1/traps", "/nope"):
        headers = client.get(path).headers
        assert headers["cache-control"] == "no-store"
        assert headers["x-content-type-options"] == "nosniff"
        assert "frame-ancestors 'none'" in headers["content-security-policy"]
        assert "default-src 'none'" in headers["content-security-policy"]
