"""Taking back a drain over the API."""

from __future__ import annotations

from daemon.clock import MINUTE_US
from daemon.journal import Undo
from tests.api.client import Client, problem_of
from tests.api.fake import FakeRunning

DRAINS = "/api/v1/traps/tank/drains"


def drained(client: Client) -> int:
    seq: int = client.post(DRAINS, json={"volume_ml": 380, "by": "AM"}).json()["seq"]
    return seq


def test_a_drain_is_taken_back_with_the_same_initials(running: FakeRunning, client: Client) -> None:
    seq = drained(client)
    running.clock.time_us += MINUTE_US
    answer = client.post(f"{DRAINS}/{seq}/undo", json={"by": "AM"})
    assert answer.status_code == 201
    assert running.journal[-1].body == Undo("tank", seq, "AM")
    assert answer.json()["undone"] == "2026-12-01T09:01:00Z"
    assert answer.json()["seq"] == seq


def test_the_list_of_drains_shows_what_was_taken_back(client: Client) -> None:
    seq, other = drained(client), drained(client)
    client.post(f"{DRAINS}/{seq}/undo", json={"by": "AM"})
    listed = {drain["seq"]: drain["undone"] for drain in client.get(DRAINS).json()}
    assert listed == {seq: "2026-12-01T09:00:00Z", other: None}


def test_asked_again_it_is_answered_alike(client: Client) -> None:
    seq = drained(client)
    first = client.post(f"{DRAINS}/{seq}/undo", json={"by": "AM"})
    again = client.post(f"{DRAINS}/{seq}/undo", json={"by": "AM"})
    assert (first.status_code, again.status_code) == (201, 200)
    assert first.json() == again.json()


def test_a_drain_without_initials_is_taken_back_without(client: Client) -> None:
    seq = client.post(DRAINS, json={}).json()["seq"]
    assert client.post(f"{DRAINS}/{seq}/undo", json={}).status_code == 201


def test_why_not_is_said(running: FakeRunning, client: Client) -> None:
    seq = drained(client)
    other = client.post(f"{DRAINS}/{seq}/undo", json={"by": "BK"})
    problem = problem_of(other, 409, "cannot-be-undone")
    assert '"AM"' in problem["detail"]
    assert '"BK"' in problem["detail"]
    running.clock.time_us += 11 * MINUTE_US
    late = client.post(f"{DRAINS}/{seq}/undo", json={"by": "AM"})
    assert "recorded 11 minutes ago" in problem_of(late, 409, "cannot-be-undone")["detail"]
    absent = client.post(f"{DRAINS}/99/undo", json={})
    assert "entry 99 is no drain of tank" in problem_of(absent, 409, "cannot-be-undone")["detail"]
    nowhere = client.post(f"/api/v1/traps/barrel/drains/{seq}/undo", json={})
    problem_of(nowhere, 404, "unknown-trap")
    assert not running.undoings()
