"""Problem documents for what goes wrong outside a route, or inside it."""

from __future__ import annotations

import logging
from collections.abc import Sequence

import pytest

from api.pages.forms import TOKEN
from api.problems import KINDS
from daemon.errors import StoreError
from daemon.views import TrapView
from tests.api.client import Client, client_of, problem_of
from tests.api.fake import FakeRunning

BROWSER = {"accept": "text/html,application/xhtml+xml,*/*;q=0.8"}


class FailingRunning(FakeRunning):
    """Cannot tell what the traps hold."""

    def traps(self) -> Sequence[TrapView]:
        raise RuntimeError("secret detail of the inside")


class FullDisk(FakeRunning):
    """Cannot read its log."""

    def traps(self) -> Sequence[TrapView]:
        raise StoreError("dripleg.db: the disk is full; make room")


def test_an_address_with_nothing_there_is_a_problem_document(client: Client) -> None:
    problem = problem_of(client.get("/api/v1/trapz"), 404, "not-found")
    assert problem["detail"] == (
        "nothing is at /api/v1/trapz. See /api/v1/openapi.json for what there is."
    )


def test_an_address_with_odd_characters_keeps_its_form(client: Client) -> None:
    problem = problem_of(client.get("/api/v1/traps/tank%20%C3%A9%22"), 404, "unknown-trap")
    assert problem["instance"] == "/api/v1/traps/tank%20%C3%A9%22"


@pytest.mark.parametrize(
    ("method", "path", "allowed"),
    [
        ("DELETE", "/api/v1/traps/tank/drains", "GET, HEAD, POST"),
        ("PUT", "/api/v1/traps", "GET, HEAD"),
        ("GET", "/api/v1/alarms/tank-drain-due/acknowledge", "POST"),
    ],
)
def test_a_wrong_method_names_the_possible_ones(
    client: Client, method: str, path: str, allowed: str
) -> None:
    response = client.request(method, path)
    problem_of(response, 405, "wrong-method")
    assert response.headers.get_list("allow") == [allowed]


def test_an_unexpected_error_is_logged_and_not_told(caplog: pytest.LogCaptureFixture) -> None:
    with caplog.at_level(logging.ERROR):
        response = client_of(FailingRunning()).get("/api/v1/traps")
    problem = problem_of(response, 500, "unexpected")
    assert problem["detail"].startswith("The daemon's log has the details")
    assert "secret" not in response.text
    assert "Traceback" not in response.text
    (record,) = caplog.records
    assert record.getMessage() == "GET '/api/v1/traps' failed"
    assert record.exc_info is not None
    assert "secret detail of the inside" in str(record.exc_info[1])


def test_a_browser_gets_a_page_after_an_unexpected_error(caplog: pytest.LogCaptureFixture) -> None:
    client = client_of(FailingRunning())
    with caplog.at_level(logging.ERROR):
        response = client.get("/round?trap=tank", headers=BROWSER)
    assert response.status_code == 500
    assert response.headers["content-type"] == "text/html; charset=utf-8"
    assert response.headers["cache-control"] == "no-store"
    assert "<h1>Something went wrong inside dripleg</h1>" in response.text
    assert '<a class="button" href="/round?trap=tank">Try again</a>' in response.text
    assert "daemon's log, at Tue 1 Dec, 09:00." in response.text.replace("\N{NO-BREAK SPACE}", " ")
    assert "secret" not in response.text
    assert "Traceback" not in response.text
    (record,) = caplog.records
    assert record.getMessage() == "GET '/round' failed"


def test_whoever_entered_something_is_told_to_look_first() -> None:
    client = client_of(FailingRunning())
    form = {
        **BROWSER,
        "origin": "http://127.0.0.1:8080",
        "content-type": "application/x-www-form-urlencoded",
    }
    response = client.post("/round/tank/drained", content=f"token={TOKEN}", headers=form)
    assert response.status_code == 500
    assert "may have been recorded, or not" in response.text
    assert '<a class="button" href="/round">Look at the page</a>' in response.text


def test_programs_get_a_document_after_an_unexpected_error() -> None:
    client = client_of(FailingRunning())
    problem_of(client.get("/round", headers={"accept": "*/*"}), 500, "unexpected")
    problem_of(client.get("/api/v1/traps", headers=BROWSER), 500, "unexpected")


def test_a_page_about_a_failure_that_fails_too_is_a_document() -> None:
    running = FailingRunning()
    client = client_of(running)
    running.clock = None  # type: ignore[assignment]  # whatever else may be broken
    problem_of(client.get("/round", headers=BROWSER), 500, "unexpected")


def test_a_log_that_cannot_be_read_is_503_in_its_own_words(
    caplog: pytest.LogCaptureFixture,
) -> None:
    response = client_of(FullDisk()).get("/api/v1/traps")
    problem = problem_of(response, 503, "log-unavailable")
    assert problem["detail"].startswith("dripleg.db: the disk is full; make room.")
    assert "the disk is full" in caplog.text


@pytest.mark.parametrize("kind", sorted(KINDS))
def test_the_type_of_a_problem_leads_to_a_page_about_it(client: Client, kind: str) -> None:
    response = client.get(f"/problems/{kind}")
    assert response.status_code == 200
    assert KINDS[kind].title in response.text
    assert KINDS[kind].advice in response.text


def test_an_unknown_kind_of_problem_has_no_page(client: Client) -> None:
    problem_of(client.get("/problems/rain"), 404, "not-found")
