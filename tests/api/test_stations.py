"""The line as it is now, as JSON. Figures are invented."""

from __future__ import annotations

from dataclasses import replace

from daemon.views import Interval, StationValue, StationView
from tests.api.client import Client
from tests.api.fake import NOW_US, FakeRunning

INTAKE = StationView(
    station="intake",
    kind="intake",
    after="",
    at_us=NOW_US,
    temperature=StationValue(
        Interval(292.65, 293.15, 293.65), "sensor", "sensor intake-air.temperature"
    ),
    pressure=StationValue(Interval(101.2e3, 101.3e3, 101.4e3), "default", "1013 hPa abs"),
    atmosphere_pa=101.3e3,
    relative_humidity=StationValue(Interval(0.47, 0.5, 0.53), "sensor", "sensor intake-air"),
    dew_point_k=Interval(281.5, 282.45, 283.2),
    saturated=0.0,
    trap=False,
)


def test_each_value_has_its_interval_and_its_origin(running: FakeRunning, client: Client) -> None:
    running.shown_stations.append(INTAKE)
    (said,) = client.get("/api/v1/stations").json()
    assert said["station"] == "intake"
    assert said["after"] is None
    assert said["temperature_c"] == {"p05": 19.5, "p50": 20.0, "p95": 20.5}
    assert said["temperature_from"] == {
        "origin": "sensor",
        "words": "sensor intake-air.temperature",
    }
    assert said["pressure_abs_bar"] == {"p05": 1.012, "p50": 1.013, "p95": 1.014}
    assert said["pressure_from"]["origin"] == "default"
    assert said["relative_humidity_percent"] == {"p05": 47.0, "p50": 50.0, "p95": 53.0}
    assert said["dew_point_c"]["p50"] == 9.3


def test_only_the_intake_has_a_humidity(running: FakeRunning, client: Client) -> None:
    running.shown_stations.append(replace(INTAKE, station="tank", after="intake"))
    running.shown_stations.append(replace(INTAKE, station="riser", relative_humidity=None))
    tank, riser = client.get("/api/v1/stations").json()
    assert tank["after"] == "intake"
    assert riser["relative_humidity_percent"] is None
    assert riser["relative_humidity_from"] is None


def test_before_the_first_tick_there_is_nothing(client: Client) -> None:
    assert client.get("/api/v1/stations").json() == []
