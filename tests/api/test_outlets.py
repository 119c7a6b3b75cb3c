"""The outlets: margins, verdicts, and what gauges and blotters showed."""

from __future__ import annotations

import pytest

from daemon.clock import MINUTE_US
from daemon.journal import Blotter, Gauge
from tests.api.client import Client, client_of, problem_of
from tests.api.fake import NOW_US, FakeRunning, a_site

MARGIN = "/api/v1/outlets/spray-gun/margin"
BLOTTER = "/api/v1/outlets/spray-gun/blotter"
GAUGE = "/api/v1/outlets/spray-gun/gauge"


def test_outlets_come_with_margins_reasons_and_what_a_verdict_speaks_of(client: Client) -> None:
    response = client.get("/api/v1/outlets")
    assert response.status_code == 200
    (gun,) = response.json()
    assert gun["outlet"] == "spray-gun"
    assert gun["verdict"] == "unknown"
    assert gun["speaks_of"].startswith("water only")
    air = gun["air"]
    assert air["verdict"] == "care"
    assert air["reasons"] == ["At the hose the air is 4.2 K above its dew point."]
    assert air["pressure_gauge_bar"] == 3.0
    assert air["pressure_dew_point_c"] == {"p05": 7.0, "p50": 8.0, "p95": 9.0}
    assert air["line_margin_k"] == {"p05": 3.6, "p50": 4.2, "p95": 6.0}
    assert air["carried_liquid_g_m3"] == {"p05": 0.0, "p50": 0.01, "p95": 0.033}
    assert air["iso_8573_1_humidity"] == "in the range of class 7 (estimate, humidity only)"
    surface = gun["surface"]
    assert surface["relative_humidity_percent"] == {"p05": 52.0, "p50": 55.0, "p95": 58.0}
    assert surface["surface_margin_k"] is None
    assert surface["by_gauge_until"] == "2026-12-01T09:20:00Z"
    assert surface["ahead"] == [
        {"at": "2026-12-01T10:00:00Z", "surface_margin_k": {"p05": 4.0, "p50": 6.5, "p95": 9.5}}
    ]
    assert gun["blotter"] == {"result": "clean", "at": "2026-12-01T08:00:00Z"}


def test_one_margin_is_the_same_object_as_in_the_list(client: Client) -> None:
    assert client.get(MARGIN).json() == client.get("/api/v1/outlets").json()[0]


@pytest.mark.parametrize("query", ["surface_c=18.5", "surface_f=65.3"])
def test_a_surface_that_somebody_measured_is_judged(client: Client, query: str) -> None:
    found = client.get(f"{MARGIN}?{query}").json()
    assert found["verdict"] == "care"
    assert found["surface"]["surface_c"] == {"p05": 17.5, "p50": 18.5, "p95": 19.5}


@pytest.mark.parametrize(
    ("query", "words"),
    [
        ("surface_c=18&surface_f=65", "surface_c is said too"),
        ("surface_c=200", "send -40 to 80 degC"),
        ("surface_f=-100", "send -40 to 80 degC"),
        ("surface_c=nan", "it must be a finite number"),
    ],
)
def test_a_surface_that_cannot_be_is_refused_in_words(
    client: Client, query: str, words: str
) -> None:
    problem = problem_of(client.get(f"{MARGIN}?{query}"), 422, "invalid-request")
    assert words in problem["detail"]


def test_an_unknown_outlet_is_answered_with_the_known_ones(client: Client) -> None:
    for response in (
        client.get("/api/v1/outlets/attic/margin"),
        client.post("/api/v1/outlets/attic/blotter", json={"result": "clean"}),
        client.post("/api/v1/outlets/attic/gauge", json={"spread_k": 4}),
    ):
        problem = problem_of(response, 404, "unknown-outlet")
        assert 'no outlet "attic"; those of this site are: spray-gun' in problem["detail"]


def test_there_is_no_margin_before_the_first_tick(running: FakeRunning, client: Client) -> None:
    running.shown_outlets.clear()
    assert client.get("/api/v1/outlets").json() == []
    for path in (MARGIN, f"{MARGIN}?surface_c=18"):
        response = client.get(path)
        problem_of(response, 503, "no-estimate-yet")
        assert response.headers["retry-after"] == "10"


def test_a_blotter_test_is_in_the_journal_when_it_is_answered(
    running: FakeRunning, client: Client
) -> None:
    sent = {"result": "water", "at": "2026-12-01T08:55:00Z", "by": "AM", "key": "b1"}
    response = client.post(BLOTTER, json=sent)
    assert response.status_code == 201
    assert response.json() == {
        "seq": 1,
        "outlet": "spray-gun",
        "result": "water",
        "at": "2026-12-01T08:55:00Z",
        "written": "2026-12-01T09:00:00Z",
        "by": "AM",
        "key": "b1",
    }
    assert running.journal[0].body == Blotter("spray-gun", "water", "AM")
    again = client.post(BLOTTER, json=sent)
    assert (again.status_code, again.json()["seq"]) == (200, 1)


@pytest.mark.parametrize(
    ("body", "words"),
    [
        ({"result": "damp"}, "body.result"),
        ({}, "body.result: it is missing"),
        ({"result": "clean", "at": "2026-12-01T10:00:00Z"}, "ahead of this machine's clock"),
        ({"result": "clean", "at": "now"}, "not an RFC 3339 time"),
    ],
)
def test_a_blotter_test_that_cannot_be_is_refused_in_words(
    client: Client, body: dict[str, object], words: str
) -> None:
    problem = problem_of(client.post(BLOTTER, json=body), 422, "invalid-request")
    assert words in problem["detail"]


@pytest.mark.parametrize("body", [{"spread_k": 4.0}, {"spread_f": 7.2}])
def test_a_gauge_reading_is_in_the_journal_when_it_is_answered(
    running: FakeRunning, client: Client, body: dict[str, object]
) -> None:
    response = client.post(GAUGE, json={**body, "valid_min": 45, "by": "AM", "key": "g1"})
    assert response.status_code == 201
    assert response.json()["spread_k"] == pytest.approx(4.0)
    assert response.json()["valid_min"] == 45.0
    told = running.journal[0].body
    assert isinstance(told, Gauge)
    assert (told.outlet, told.valid_s, told.by) == ("spray-gun", 2700.0, "AM")
    again = client.post(GAUGE, json={**body, "valid_min": 45, "by": "AM", "key": "g1"})
    assert (again.status_code, again.json()["seq"]) == (200, 1)


@pytest.mark.parametrize(
    ("body", "words"),
    [
        ({}, "send the spread once"),
        ({"spread_k": 3.0, "spread_f": 5.4}, "send the spread once"),
        ({"spread_k": 90.0}, "-20 to 60 K"),
        ({"spread_f": -90.0}, "-20 to 60 K"),
        ({"spread_k": 3.0, "valid_min": 0.5}, "1 to 480 minutes"),
        ({"spread_k": 3.0, "at": "2026-12-01T10:00:00Z"}, "ahead of this machine's clock"),
    ],
)
def test_a_gauge_reading_that_cannot_be_is_refused_in_words(
    client: Client, body: dict[str, object], words: str
) -> None:
    problem = problem_of(client.post(GAUGE, json=body), 422, "invalid-request")
    assert words in problem["detail"]


def test_what_is_told_of_an_outlet_may_be_a_little_ahead(
    running: FakeRunning, client: Client
) -> None:
    running.clock.time_us = NOW_US - MINUTE_US
    sent = {"result": "clean", "at": "2026-12-01T09:00:00Z"}
    assert client.post(BLOTTER, json=sent).status_code == 201


@pytest.mark.parametrize("path", [BLOTTER, GAUGE])
def test_nothing_is_written_over_the_network_without_a_key(path: str) -> None:
    running = FakeRunning(site=a_site(host="192.168.7.20"))
    client = client_of(running, "192.168.7.20:8080")
    problem_of(client.post(path, json={"result": "clean"}), 401, "keys-needed")
    assert running.journal == []


def test_the_site_names_the_sensors_at_an_outlet(client: Client) -> None:
    (outlet,) = client.get("/api/v1/site").json()["outlets"]
    assert (outlet["slab"], outlet["surface"]) == (None, None)
