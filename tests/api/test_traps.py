"""What the traps hold."""

from __future__ import annotations

from dataclasses import replace

from daemon.clock import HOUR_US
from tests.api.client import Client, problem_of
from tests.api.fake import NOW_US, FakeRunning


def test_traps_come_in_line_order_with_interval_levels_and_due(client: Client) -> None:
    response = client.get("/api/v1/traps")
    assert response.status_code == 200
    tank, riser = response.json()
    assert tank == {
        "trap": "tank",
        "at": "2026-12-01T08:59:55Z",
        "p05_ml": 300,
        "p50_ml": 410,
        "p95_ml": 560,
        "capacity_ml": 15000,
        "drain_at_ml": 600,
        "probability_due": 0.125,
        "due": {
            "p05": "2026-12-01T16:00:00Z",
            "p50": "2026-12-01T17:00:00Z",
            "p95": "2026-12-01T17:00:00Z",
            "because": "calendar",
        },
        "since": "last drain",
    }
    assert riser["due"] == {
        "p05": "2026-12-01T09:00:00Z",
        "p50": "2026-12-01T09:00:00Z",
        "p95": "2026-12-01T11:00:00Z",
        "because": "volume",
    }


def test_one_trap_is_the_same_object_as_in_the_list(client: Client) -> None:
    one = client.get("/api/v1/traps/riser").json()
    assert one == client.get("/api/v1/traps").json()[1]


def test_there_are_no_traps_before_the_first_tick(running: FakeRunning, client: Client) -> None:
    running.views.clear()
    assert client.get("/api/v1/traps").json() == []
    response = client.get("/api/v1/traps/tank")
    problem = problem_of(response, 503, "no-estimate-yet")
    assert problem["detail"] == "Ask again after the next sampling period."
    assert response.headers["retry-after"] == "10"


def test_an_unknown_trap_is_answered_with_the_known_ones(client: Client) -> None:
    problem = problem_of(client.get("/api/v1/traps/attic"), 404, "unknown-trap")
    assert problem["detail"].startswith(
        'there is no trap "attic"; those of this site are: tank, riser.'
    )


def test_a_station_without_a_trap_is_not_a_trap(client: Client) -> None:
    problem_of(client.get("/api/v1/traps/intake"), 404, "unknown-trap")


def test_a_trap_that_is_counted_without_an_earlier_state_says_since_when(
    running: FakeRunning, client: Client
) -> None:
    running.views[1] = replace(running.views[1], counted_from_us=NOW_US - HOUR_US)
    tank, riser = client.get("/api/v1/traps").json()
    assert "counted_from" not in tank
    assert riser["counted_from"] == "2026-12-01T08:00:00Z"


def test_a_trap_says_what_volume_waits_to_be_confirmed(
    running: FakeRunning, client: Client
) -> None:
    running.views[1] = replace(running.views[1], questioned_kg=0.2)
    tank, riser = client.get("/api/v1/traps").json()
    assert "questioned_ml" not in tank
    assert riser["questioned_ml"] == 200


def test_only_a_drain_that_empties_itself_says_how_likely_it_is_stuck(
    running: FakeRunning, client: Client
) -> None:
    running.views[1] = replace(running.views[1], chance_stuck=0.0213)
    tank, riser = client.get("/api/v1/traps").json()
    assert "chance_stuck" not in tank
    assert riser["chance_stuck"] == 0.021
    assert client.get("/api/v1/traps/riser").json() == riser
