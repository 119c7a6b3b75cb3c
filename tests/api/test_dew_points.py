"""Measured dew points: an interval, or "below", or why there is none. Figures are invented."""

from __future__ import annotations

from daemon.views import DewPointView
from tests.api.client import Client
from tests.api.fake import NOW_US, FakeRunning


def view(
    low_k: float | None, middle_k: float | None, high_k: float | None, fault: str = ""
) -> DewPointView:
    return DewPointView("riser", "cell", NOW_US, 801_325.0, low_k, middle_k, high_k, fault)


def test_an_interval_is_given_at_the_line_s_pressure(running: FakeRunning, client: Client) -> None:
    running.shown_dew_points.append(view(260.31, 276.15, 284.95))
    assert client.get("/api/v1/dew-points").json() == [
        {
            "station": "riser",
            "sensor": "cell",
            "at": "2026-12-01T09:00:00Z",
            "pressure_abs_bar": 8.013,
            "low_c": -12.8,
            "middle_c": 3.0,
            "high_c": 11.8,
            "below_c": None,
            "fault": "",
        }
    ]


def test_what_is_only_known_to_be_below_says_nothing_more(
    running: FakeRunning, client: Client
) -> None:
    running.shown_dew_points.append(view(None, None, 274.85))
    (said,) = client.get("/api/v1/dew-points").json()
    assert said["below_c"] == 1.7
    assert said["low_c"] is said["middle_c"] is said["high_c"] is None


def test_a_fault_is_said_instead_of_a_number(running: FakeRunning, client: Client) -> None:
    running.shown_dew_points.append(view(None, None, None, "cell.pressure is not usable: frozen"))
    (said,) = client.get("/api/v1/dew-points").json()
    assert [said[key] for key in ("low_c", "middle_c", "high_c", "below_c")] == [None] * 4
    assert said["fault"] == "cell.pressure is not usable: frozen"


def test_without_such_a_sensor_there_is_nothing(client: Client) -> None:
    assert client.get("/api/v1/dew-points").json() == []
