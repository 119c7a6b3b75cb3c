"""Confirming a surprising drain, and parts that were changed."""

from __future__ import annotations

import pytest

from daemon.journal import Confirm, SaltCheck, Service
from tests.api.client import Client
from tests.api.fake import FakeRunning


def test_a_surprising_volume_is_confirmed(running: FakeRunning, client: Client) -> None:
    response = client.post("/api/v1/traps/tank/confirm", json={"by": "AM"})
    assert response.status_code == 201
    assert response.json() == {"seq": 1, "at": "2026-12-01T09:00:00Z"}
    assert running.journal[0].body == Confirm("tank", "AM")


@pytest.mark.parametrize(
    ("path", "body", "entry"),
    [
        ("riser", {"what": "element changed"}, Service("element changed", "riser")),
        (
            "intake",
            {"what": "sensor replaced", "sensor": "intake-air", "by": "AM"},
            Service("sensor replaced", "intake-air", "AM"),
        ),
        ("riser", {"what": "drain seen working"}, Service("drain seen working", "riser")),
    ],
)
def test_a_changed_part_is_recorded(
    running: FakeRunning, client: Client, path: str, body: dict[str, str], entry: Service
) -> None:
    response = client.post(f"/api/v1/stations/{path}/service", json=body)
    assert response.status_code == 201
    assert running.journal[0].body == entry


def test_a_salt_check_is_recorded(running: FakeRunning, client: Client) -> None:
    said = {"reads_percent": 77.1, "true_percent": 75.4, "by": "AM"}
    response = client.post("/api/v1/sensors/intake-air/salt-checks", json=said)
    assert response.status_code == 201
    check = running.journal[0].body
    assert isinstance(check, SaltCheck)
    assert (check.sensor, check.by) == ("intake-air", "AM")
    assert check.reads == pytest.approx(0.771)
    assert check.true == pytest.approx(0.754)


@pytest.mark.parametrize(
    ("path", "body", "status", "words"),
    [
        (
            "sensors/motor/salt-checks",
            {"reads_percent": 77.1, "true_percent": 75.4},
            404,
            "intake-air",
        ),
        ("sensors/intake-air/salt-checks", {"reads_percent": 771, "true_percent": 75}, 422, "100"),
        ("traps/tnak/confirm", {}, 404, "those of this site are: tank, riser"),
        ("stations/nowhere/service", {"what": "element changed"}, 404, "intake, tank"),
        ("stations/tank/service", {"what": "painted blue"}, 422, "element changed"),
        ("stations/tank/service", {"what": "element changed", "price": 3}, 422, "price"),
    ],
)
def test_what_cannot_be_is_refused_in_words(
    running: FakeRunning,
    client: Client,
    path: str,
    body: dict[str, object],
    status: int,
    words: str,
) -> None:
    response = client.post(f"/api/v1/{path}", json=body)
    assert response.status_code == status
    assert words in response.text
    assert not running.journal


def test_a_part_changed_yesterday_is_recorded_once_and_in_its_time(
    running: FakeRunning, client: Client
) -> None:
    body = {"what": "element changed", "at": "2026-11-30T17:00:00Z", "by": "AM", "key": "v1"}
    first = client.post("/api/v1/stations/tank/service", json=body)
    assert (first.status_code, first.json()["at"]) == (201, "2026-11-30T17:00:00Z")
    again = client.post("/api/v1/stations/tank/service", json=body)
    assert (again.status_code, again.json()) == (200, first.json())
    assert len(running.journal) == 1


@pytest.mark.parametrize(
    ("at", "words"), [("noon", "noon"), ("2026-12-02T09:00:00Z", "ahead of this machine's clock")]
)
def test_a_part_is_not_changed_at_a_time_that_cannot_be(
    running: FakeRunning, client: Client, at: str, words: str
) -> None:
    body = {"what": "element changed", "at": at}
    response = client.post("/api/v1/stations/tank/service", json=body)
    assert response.status_code == 422
    assert words in response.text
    assert running.journal == []
