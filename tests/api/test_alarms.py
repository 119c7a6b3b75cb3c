"""Alarms, and seeing them."""

from __future__ import annotations

import pytest

from daemon.journal import Acknowledge
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


@pytest.mark.parametrize("body", [b"", b"{}", b"null"])
def test_who_has_seen_it_may_be_left_out(running: FakeRunning, client: Client, body: bytes) -> None:
    path = "/api/v1/alarms/riser-drain-due/acknowledge"
    assert client.post(path, content=body, headers=SEEN).status_code == 201
    assert running.journal[0].body == Acknowledge("riser-drain-due", "")


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
