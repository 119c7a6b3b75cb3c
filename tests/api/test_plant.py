"""The plant, reminders, forecasts and supplies. Figures are invented; conversions are by hand."""

from __future__ import annotations

from dataclasses import replace

from daemon.clock import HOUR_US
from daemon.foresight import Score
from daemon.moisture.forecast import Due
from tests.api.client import Client, problem_of
from tests.api.fake import NOW_US, FakeRunning
from tests.api.test_stations import INTAKE


def test_the_plant_tells_of_leak_and_delivery_with_units(client: Client) -> None:
    plant = client.get("/api/v1/plant").json()
    assert plant["at"] == "2026-12-01T08:59:55Z"
    assert plant["duty"] == 0.42
    # 12 L/min are 0.0002 m3/s; 0.0006 m are 0.6 mm; 0.0024 m3/s are 144 L/min
    assert plant["leak"] == {
        "reference_l_min": {"p05": 8.0, "p50": 12.0, "p95": 18.0},
        "at": "2026-11-30T23:00:00Z",
        "one_hole_mm": 0.6,
        "kwh_per_year": {"p05": 200.0, "p50": 310.0, "p95": 480.0},
        "cost_per_year": {"p05": 60.0, "p50": 93.0, "p95": 144.0},
        "currency": "EUR",
        "probability_high": 0.25,
    }
    assert plant["delivered"]["reference_l_min"] == {"p05": 132.0, "p50": 144.0, "p95": 156.0}
    assert plant["delivered"]["times"] == 7
    assert plant["delivered"]["probability_weak"] == 0.03


def test_what_was_not_measured_is_null(running: FakeRunning, client: Client) -> None:
    assert running.shown_plant is not None
    running.shown_plant = replace(
        running.shown_plant, leak_m3_per_s=None, delivered_m3_per_s=None, duty=None
    )
    plant = client.get("/api/v1/plant").json()
    assert (plant["leak"], plant["delivered"], plant["duty"]) == (None, None, None)


def test_before_the_first_tick_there_is_no_plant(running: FakeRunning, client: Client) -> None:
    running.shown_plant = None
    answer = client.get("/api/v1/plant")
    problem_of(answer, 503, "no-estimate-yet")
    assert answer.headers["retry-after"] == "10"


def test_reminders_are_the_objects_of_the_events(client: Client) -> None:
    assert client.get("/api/v1/reminders").json() == [
        {
            "id": "reminder/shift-start/2026-12-01T08:00:00Z",
            "at": "2026-12-01T08:00:00Z",
            "kind": "round",
            "source": "shift start",
            "traps": ["riser", "tank"],
            "text": "2 to drain, the tank last: about 0.6 L.",
        }
    ]


def test_forecasts_stand_beside_what_happened(running: FakeRunning, client: Client) -> None:
    running.shown_scores = [
        Score("tank", NOW_US - 48 * HOUR_US, NOW_US - 20 * HOUR_US, NOW_US, -1, NOW_US - HOUR_US)
    ]
    (score,) = client.get("/api/v1/forecasts").json()
    assert score == {
        "trap": "tank",
        "foreseen_at": "2026-11-29T09:00:00Z",
        "p05": "2026-11-30T13:00:00Z",
        "p50": "2026-12-01T09:00:00Z",
        "p95": None,  # beyond the horizon
        "reached_at": "2026-12-01T08:00:00Z",
        "held": True,
    }


def test_a_station_says_when_its_supply_is_used_up(running: FakeRunning, client: Client) -> None:
    running.shown_stations = [replace(INTAKE, station="cartridge")]
    before = client.get("/api/v1/stations").json()[0]
    assert (before["used_up"], before["hours_left"]) == (None, None)
    running.shown_supplies = {
        "cartridge": Due(NOW_US + HOUR_US, NOW_US + 30 * HOUR_US + 7, None, None)
    }
    assert client.get("/api/v1/stations").json()[0]["used_up"] == {
        "p05": "2026-12-01T10:00:00Z",
        "p50": "2026-12-02T15:00:00Z",
        "p95": None,
    }
    running.shown_hours = {"cartridge": {"p05": 310.5, "p50": 420.0, "p95": None}}
    hours = client.get("/api/v1/stations").json()[0]["hours_left"]
    assert hours == {"p05": 310.5, "p50": 420.0, "p95": None}
