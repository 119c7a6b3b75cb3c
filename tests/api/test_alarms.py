"""Alarms, and seeing them."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from daemon.journal import Acknowledge, Shelve, Unshelve
from tests.api.client import Client, problem_of
from tests.api.fake import FakeRunning

SEEN = {"content-type": "application/json"}


def test_only_alarms_that_are_not_normal_are_listed(client: Client) -> None:
    alarms = client.get("/api/v1/alarms").json()
    assert [alarm["state"] for alarm in alarms] == [
        "unacknowledged",
        "acknowledged",
        "returned unacknowledged",
    ]
    assert alarms[0] == {
        "id": "riser-drain-due",
        "kind": "drain-due",
        "source": "riser",
        "state": "unacknowledged",
        "priority": "medium",
        "since": "2026-12-01T08:55:00Z",
        "shelved_until": None,
        "text": "riser: about 170 ml (140-210 ml); drain it",
    }


def test_all_alarms_are_listed_when_asked_for(client: Client) -> None:
    states = {alarm["id"]: alarm["state"] for alarm in client.get("/api/v1/alarms?all=true").json()}
    assert len(states) == 4
    assert states["tank-drain-due"] == "normal"


def test_all_must_be_true_or_false(client: Client) -> None:
    problem = problem_of(client.get("/api/v1/alarms?all=perhaps"), 422, "invalid-request")
    assert problem["errors"] == [
        {"where": "query.all", "value": '"perhaps"', "remedy": "it must be true or false"}
    ]


@pytest.mark.parametrize("alarm", ["riser-drain-due", "old-drain-due"])
def test_an_acknowledgement_is_committed_and_the_alarm_follows(
    running: FakeRunning, client: Client, alarm: str
) -> None:
    response = client.post(f"/api/v1/alarms/{alarm}/acknowledge", json={"by": "AM"})
    assert response.status_code == 201
    assert response.json() == {
        "seq": 1,
        "alarm": alarm,
        "at": "2026-12-01T09:00:00Z",
        "by": "AM",
    }
    assert running.journal[0].body == Acknowledge(alarm, "AM")
    running.tick()
    again = client.post(f"/api/v1/alarms/{alarm}/acknowledge", json={})
    problem_of(again, 409, "nothing-to-acknowledge")


def test_who_has_seen_it_may_be_left_out(running: FakeRunning, client: Client) -> None:
    path = "/api/v1/alarms/riser-drain-due/acknowledge"
    assert client.post(path, content=b"{}", headers=SEEN).status_code == 201
    assert running.journal[0].body == Acknowledge("riser-drain-due", "")


@pytest.mark.parametrize("body", [b"", b"null"])
def test_an_object_must_be_sent_all_the_same(
    running: FakeRunning, client: Client, body: bytes
) -> None:
    """As the description says: a body is asked for."""
    path = "/api/v1/alarms/riser-drain-due/acknowledge"
    problem = problem_of(client.post(path, content=body, headers=SEEN), 422, "invalid-request")
    assert problem["errors"][0]["where"] == "body"
    assert running.journal == []


@pytest.mark.parametrize(
    ("alarm", "state"), [("tank-drain-due", "normal"), ("spare-drain-due", "acknowledged")]
)
def test_an_alarm_that_waits_for_nobody_cannot_be_acknowledged(
    running: FakeRunning, client: Client, alarm: str, state: str
) -> None:
    response = client.post(f"/api/v1/alarms/{alarm}/acknowledge", json={})
    problem = problem_of(response, 409, "nothing-to-acknowledge")
    assert problem["detail"] == (
        f'the alarm "{alarm}" is {state}. Only an alarm that is unacknowledged or returned '
        "unacknowledged can be acknowledged."
    )
    assert running.journal == []


def test_an_unknown_alarm_is_answered_with_the_known_ones(client: Client) -> None:
    response = client.post("/api/v1/alarms/attic/acknowledge", json={})
    problem = problem_of(response, 404, "unknown-alarm")
    assert (
        'there is no alarm "attic"; those of this site are: tank-drain-due, riser-drain-due, '
        "spare-drain-due, old-drain-due"
    ) in problem["detail"]


def test_an_unknown_field_is_refused(running: FakeRunning, client: Client) -> None:
    response = client.post("/api/v1/alarms/riser-drain-due/acknowledge", json={"from": "AM"})
    problem = problem_of(response, 422, "invalid-request")
    assert problem["errors"][0]["where"] == "body.from"
    assert running.journal == []


# ---- put off ----

SHELVE, UNSHELVE = (
    "/api/v1/alarms/riser-drain-due/shelve",
    "/api/v1/alarms/riser-drain-due/unshelve",
)


@pytest.mark.parametrize(
    ("said", "seconds"), [("2 h", 7200.0), ("45 min", 2700.0), (30, 1800.0), (1.5, 90.0)]
)
def test_an_alarm_is_put_off_and_says_until_when(
    running: FakeRunning, client: Client, said: object, seconds: float
) -> None:
    response = client.post(SHELVE, json={"for": said, "by": "AM"})
    assert response.status_code == 201
    assert running.journal[0].body == Shelve("riser-drain-due", seconds, "AM")
    running.tick()
    (alarm,) = (a for a in client.get("/api/v1/alarms").json() if a["source"] == "riser")
    assert alarm["state"] == "shelved"
    assert alarm["shelved_until"] == response.json()["until"]


def test_the_answer_says_the_end_and_the_same_key_records_nothing_twice(
    running: FakeRunning, client: Client
) -> None:
    body = {"for": "2 h", "by": "AM", "key": "phone-7"}
    first = client.post(SHELVE, json=body)
    assert first.json() == {
        "seq": 1,
        "alarm": "riser-drain-due",
        "at": "2026-12-01T09:00:00Z",
        "until": "2026-12-01T11:00:00Z",
        "by": "AM",
        "key": "phone-7",
    }
    again = client.post(SHELVE, json=body)
    assert (again.status_code, again.json()) == (200, first.json())
    assert len(running.journal) == 1


@pytest.mark.parametrize(
    ("said", "words"),
    [
        ("25 h", "from 1 min to 1 day"),
        ("10 s", "from 1 min to 1 day"),
        (0, "from 1 min to 1 day"),
        (-5, "from 1 min to 1 day"),
        ("soon", "soon"),
        ("2 bar", "2 bar"),
        (True, "body.for"),
        (None, "body.for"),
    ],
)
def test_a_time_that_cannot_be_is_refused(
    running: FakeRunning, client: Client, said: object, words: str
) -> None:
    response = client.post(SHELVE, json={"for": said})
    problem = problem_of(response, 422, "invalid-request")
    assert words in str(problem["errors"])
    assert running.journal == []


def test_an_urgent_alarm_is_put_off_for_an_hour_at_most(client: Client) -> None:
    path = "/api/v1/alarms/old-drain-due/shelve"  # of high priority
    problem = problem_of(client.post(path, json={"for": "61 min"}), 422, "invalid-request")
    assert "from 1 min to 1 h" in problem["detail"]
    assert client.post(path, json={"for": "1 h"}).status_code == 201


@pytest.mark.parametrize("state", ["suppressed by design", "out of service"])
def test_what_says_nothing_cannot_be_put_off(
    running: FakeRunning, client: Client, state: Any
) -> None:
    riser = running.standing["riser-drain-due"]
    running.standing["riser-drain-due"] = replace(riser, state=state)
    problem_of(client.post(SHELVE, json={"for": 30}), 409, "cannot-be-shelved")


def test_putting_off_can_be_ended(running: FakeRunning, client: Client) -> None:
    problem_of(client.post(UNSHELVE, json={}), 409, "not-shelved")
    client.post(SHELVE, json={"for": 30})
    running.tick()
    assert client.post(UNSHELVE, json={"by": "AM"}).status_code == 201
    assert running.journal[1].body == Unshelve("riser-drain-due", "AM")


def test_an_alarm_that_is_not_there_cannot_be_put_off(client: Client) -> None:
    for action, body in (("shelve", {"for": 30}), ("unshelve", {})):
        problem_of(client.post(f"/api/v1/alarms/none/{action}", json=body), 404, "unknown-alarm")
