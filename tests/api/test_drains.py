"""Recording a drain, and reading the drains back."""

from __future__ import annotations

from typing import Any

import pytest

from daemon.journal import Drain
from tests.api.client import Client, problem_of
from tests.api.fake import NOW_US, FakeRunning

DRAINS = "/api/v1/traps/tank/drains"


def test_an_empty_object_records_an_emptied_trap_now(running: FakeRunning, client: Client) -> None:
    response = client.post(DRAINS, json={})
    assert response.status_code == 201
    assert response.json() == {
        "seq": 1,
        "trap": "tank",
        "at": "2026-12-01T09:00:00Z",
        "written": "2026-12-01T09:00:00Z",
        "outcome": "emptied",
        "volume_ml": None,
        "by": "",
        "look": "",
        "key": "",
        "said": "",
        "undone": None,
    }
    assert running.journal[0].body == Drain("tank")


def test_everything_said_is_kept(running: FakeRunning, client: Client) -> None:
    body = {
        "outcome": "partly",
        "volume_ml": 380,
        "at": "2026-12-01T10:30:00+02:00",
        "by": "AM",
        "look": "milky",
        "key": "phone-7c1e",
    }
    answer = client.post(DRAINS, json=body).json()
    assert answer == {
        "seq": 1,
        "trap": "tank",
        "written": "2026-12-01T09:00:00Z",
        **body,
        "at": "2026-12-01T08:30:00Z",
        "said": "",
        "undone": None,
    }
    kept = running.journal[0].body
    assert isinstance(kept, Drain)
    assert kept.volume_kg == pytest.approx(0.38)
    assert kept == Drain("tank", "partly", kept.volume_kg, "AM", "milky")
    assert running.journal[0].at_us == NOW_US - 30 * 60_000_000


@pytest.mark.parametrize(
    ("volume", "unit", "kg"),
    [
        (380, "ml", 0.38),
        (0.38, "L", 0.38),
        # NIST Handbook 44, appendix C: 1 US fluid ounce = 29.573 53 ml, 1 gallon = 3.785 412 L
        (13, "oz", 13 * 0.02957353),
        (0.5, "gal", 0.5 * 3.785412),
    ],
)
def test_a_volume_in_other_units_is_converted(
    running: FakeRunning, client: Client, volume: float, unit: str, kg: float
) -> None:
    assert client.post(DRAINS, json={"volume": volume, "unit": unit}).status_code == 201
    body = running.journal[0].body
    assert isinstance(body, Drain)
    assert body.volume_kg == pytest.approx(kg, rel=1e-6)


def test_a_volume_of_nothing_is_a_trap_found_empty(running: FakeRunning, client: Client) -> None:
    assert client.post(DRAINS, json={"volume_ml": 0}).json()["outcome"] == "empty"
    assert running.journal[0].body == Drain("tank", "empty", 0.0)


def test_what_a_measured_drain_has_taught_is_told(running: FakeRunning, client: Client) -> None:
    running.said = "tank: you measured 380 ml, expected 410 ml (300 to 560 ml)"
    assert client.post(DRAINS, json={"volume_ml": 380}).json()["said"] == running.said


def test_the_same_key_again_is_answered_with_the_first_entry(
    running: FakeRunning, client: Client
) -> None:
    first = client.post(DRAINS, json={"volume_ml": 380, "key": "k1"})
    running.clock.time_us += 60_000_000
    again = client.post(DRAINS, json={"volume_ml": 380, "key": "k1"})
    assert (first.status_code, again.status_code) == (201, 200)
    assert again.json() == first.json()
    assert len(running.journal) == 1


def test_the_same_key_for_another_drain_is_refused(running: FakeRunning, client: Client) -> None:
    client.post(DRAINS, json={"volume_ml": 380, "key": "k1"})
    response = client.post(DRAINS, json={"volume_ml": 90, "key": "k1"})
    problem = problem_of(response, 409, "key-reused")
    assert 'the key "k1" was used before' in problem["detail"]
    assert len(running.journal) == 1


def test_a_phone_a_little_ahead_is_believed(running: FakeRunning, client: Client) -> None:
    assert client.post(DRAINS, json={"at": "2026-12-01T09:02:00Z"}).status_code == 201
    assert running.journal[0].at_us == NOW_US + 120_000_000


NUMBER = "it must be an ordinary number, without quotes"
REFUSED: list[tuple[dict[str, Any], str, str, str]] = [
    (
        {"volume_ml": -5},
        "body.volume_ml",
        "-5 ml",
        "a volume is 0 or more; send what the cup read",
    ),
    (
        {"volume_ml": 30001},
        "body.volume_ml",
        "30001 ml",
        'more than twice what the trap "tank" holds (15000 ml); check the figure and its unit, '
        "or correct the trap's capacity in the site file",
    ),
    (
        {"volume": 8, "unit": "gal"},
        "body.volume",
        "8 gal",
        'more than twice what the trap "tank" holds (3.96258 gal); check the figure and its unit, '
        "or correct the trap's capacity in the site file",
    ),
    (
        {"outcome": "empty", "volume_ml": 4},
        "body.outcome",
        '"empty"',
        'water came out, so the trap was not found empty; say "emptied" or "partly"',
    ),
    (
        {"outcome": "emptied", "volume_ml": 0},
        "body.outcome",
        '"emptied"',
        'nothing came out; say "empty", or leave the volume out if it was not measured',
    ),
    (
        {"outcome": "cleaned"},
        "body.outcome",
        '"cleaned"',
        "it must be one of 'emptied', 'empty' or 'partly'",
    ),
    (
        {"look": "green"},
        "body.look",
        '"green"',
        "it must be one of 'clear', 'milky', 'oily' or 'rusty'",
    ),
    (
        {"volume": 3},
        "body.unit",
        "",
        "a volume needs its unit beside it: ml, L, oz or gal",
    ),
    ({"unit": "oz"}, "body.unit", "oz", "there is no volume for this unit; send both"),
    (
        {"volume": 3, "unit": "pt"},
        "body.unit",
        '"pt"',
        "it must be one of 'ml', 'L', 'oz' or 'gal'",
    ),
    (
        {"volume": 3, "unit": "oz", "volume_ml": 90},
        "body.volume",
        "3.0",
        "volume_ml is said too; send one",
    ),
    (
        {"at": "2026-12-01T09:02:01Z"},
        "body.at",
        '"2026-12-01T09:02:01Z"',
        "it is ahead of this machine's clock (2026-12-01T09:00:00Z); record a drain after it has "
        "happened, and check the clocks",
    ),
    (
        {"at": "yesterday"},
        "body.at",
        '"yesterday"',
        '"yesterday" is not an RFC 3339 time with an offset; write it like 2026-03-02T07:10:00Z; '
        "in an address + is written %2B",
    ),
    (
        {"at": "2200-01-01T00:00:00Z"},
        "body.at",
        '"2200-01-01T00:00:00Z"',
        "it is outside the years 1970 to 2199; correct the year",
    ),
    ({"volume_ml": "380"}, "body.volume_ml", '"380"', NUMBER),
    ({"volume_ml": True}, "body.volume_ml", "True", NUMBER),
    (
        {"volumeml": 380},
        "body.volumeml",
        "380",
        "there is no such field here; leave it out, or correct its name",
    ),
    ({"by": "A" * 41}, "body.by", f'"{"A" * 41}"', "at most 40 characters are kept here"),
    (
        {"by": "A\nM"},
        "body.by",
        '"A\N{REPLACEMENT CHARACTER}M"',
        "it has characters that cannot be kept (control characters)",
    ),
    (
        {"key": "k" * 201},
        "body.key",
        f'"{"k" * 77}..."',
        "at most 200 characters are kept here",
    ),
    ({"key": ""}, "body.key", '""', "it is empty; leave it out, or say something"),
]


@pytest.mark.parametrize(("body", "where", "value", "remedy"), REFUSED)
def test_an_impossible_drain_is_refused_with_field_value_and_remedy(
    running: FakeRunning, client: Client, body: dict[str, Any], where: str, value: str, remedy: str
) -> None:
    problem = problem_of(client.post(DRAINS, json=body), 422, "invalid-request")
    assert problem["errors"] == [{"where": where, "value": value, "remedy": remedy}]
    assert remedy in problem["detail"]
    assert running.journal == []


def test_twice_the_capacity_is_still_taken(client: Client) -> None:
    assert client.post(DRAINS, json={"volume_ml": 30000}).status_code == 201


def test_every_impossible_point_is_named_at_once(client: Client) -> None:
    body = {"volume_ml": -1, "at": "2027-01-01T00:00:00Z", "outcome": "empty"}
    problem = problem_of(client.post(DRAINS, json=body), 422, "invalid-request")
    places = [point["where"] for point in problem["errors"]]
    assert places == ["body.volume_ml", "body.at", "body.outcome"]


def test_a_time_before_the_log_is_refused_in_the_journal_s_words(client: Client) -> None:
    response = client.post(DRAINS, json={"at": "2026-10-01T00:00:00Z"})
    problem = problem_of(response, 422, "invalid-request")
    assert problem["detail"].startswith("the time is before the log begins, 2026-11-01T09:00:00Z")


JSON_SAYS = {"content-type": "application/json"}


@pytest.mark.parametrize(
    ("content", "status", "kind", "words"),
    [
        (b"", 422, "invalid-request", "body: it is missing"),
        (b"null", 422, "invalid-request", "body: send a JSON object"),
        (b"[]", 422, "invalid-request", "body: send a JSON object"),
        (b'{"volume_ml"', 422, "invalid-request", "Expecting ':' delimiter, at character 13"),
        (b'{"volume_ml": NaN}', 422, "invalid-request", "nan: it must be a finite number"),
        (b'{"volume_ml": 1e999}', 422, "invalid-request", "inf: it must be a finite number"),
        (b'{"by": "\\ud800"}', 422, "invalid-request", "it is not valid Unicode text"),
        (b'{"\\ud800": 1}', 422, "invalid-request", "it is not valid Unicode text"),
        (b'{"by": "\xff"}', 400, "unreadable-request", "Send one JSON object in UTF-8"),
        (b"[" * 9000, 400, "unreadable-request", "Send one JSON object in UTF-8"),
        (b'{"volume_ml": ' + b"9" * 5000 + b"}", 400, "unreadable-request", "Send one JSON"),
    ],
)
def test_a_body_that_is_no_drain_is_refused(
    running: FakeRunning, client: Client, content: bytes, status: int, kind: str, words: str
) -> None:
    response = client.post(DRAINS, content=content, headers=JSON_SAYS)
    assert words in problem_of(response, status, kind)["detail"]
    assert running.journal == []


def test_a_drain_of_an_unknown_trap_is_not_found(client: Client) -> None:
    problem_of(client.post("/api/v1/traps/attic/drains", json={}), 404, "unknown-trap")
    problem_of(client.get("/api/v1/traps/attic/drains"), 404, "unknown-trap")


def test_drains_are_listed_between_two_times(client: Client) -> None:
    for hour in (6, 7, 8):
        client.post(DRAINS, json={"at": f"2026-12-01T0{hour}:00:00Z"})
    client.post("/api/v1/traps/riser/drains", json={})

    def hours(query: str) -> list[str]:
        return [drain["at"][11:13] for drain in client.get(DRAINS + query).json()]

    assert hours("") == ["06", "07", "08"]
    assert hours("?from=2026-12-01T07:00:00Z") == ["07", "08"]
    assert hours("?to=2026-12-01T07:00:00Z") == ["06"]
    assert hours("?from=2026-12-01T07:00:00Z&to=2026-12-01T07:30:00%2B00:00") == ["07"]


def test_a_drain_dated_a_little_ahead_is_listed(client: Client) -> None:
    client.post(DRAINS, json={"at": "2026-12-01T09:01:00Z"})
    assert len(client.get(DRAINS).json()) == 1


def test_a_span_that_ends_before_it_begins_is_refused(client: Client) -> None:
    response = client.get(DRAINS + "?from=2026-12-01T08:00:00Z&to=2026-12-01T07:00:00Z")
    problem = problem_of(response, 422, "invalid-request")
    assert problem["errors"] == [
        {
            "where": "query.from",
            "value": "2026-12-01T08:00:00Z",
            "remedy": "it is not before to (2026-12-01T07:00:00Z); give an earlier from",
        }
    ]


def test_a_plus_sign_lost_in_an_address_is_explained(client: Client) -> None:
    response = client.get(DRAINS + "?from=2026-12-01T08:00:00+01:00")
    problem = problem_of(response, 422, "invalid-request")
    assert problem["errors"][0]["value"] == '"2026-12-01T08:00:00 01:00"'
    assert problem["errors"][0]["remedy"].endswith("in an address + is written %2B")
