"""Health, and the site as understood."""

from __future__ import annotations

from dataclasses import replace

from daemon.site.types import Signal
from tests.api.client import Client, client_of
from tests.api.fake import FakeRunning, a_site


def test_health_is_200_and_says_what_every_channel_last_said(client: Client) -> None:
    response = client.get("/api/v1/health")
    assert response.status_code == 200
    assert response.json() == {
        "ok": True,
        "problems": [],
        "at": "2026-12-01T09:00:00Z",
        "started_at": "2026-12-01T08:00:00Z",
        "last_tick_at": "2026-12-01T08:59:55Z",
        "ticks": 360,
        "channels": [
            {
                "channel": "intake-air.temperature",
                "last_good_at": "2026-12-01T08:59:55Z",
                "value": 293.15,
                "unit": "K",
                "fault": "",
            },
            {
                "channel": "tank-gauge.pressure",
                "last_good_at": "2026-12-01T08:00:00Z",
                "value": 720000.0,
                "unit": "Pa",
                "fault": "no answer",
            },
        ],
        "mqtt": "connected",
        "outbox_waiting": 0,
    }


def test_what_is_wrong_makes_health_503_with_the_same_body(
    running: FakeRunning, client: Client
) -> None:
    well = client.get("/api/v1/health").json()
    running.problems = ("tank-gauge gives no answer since 08:00: look at its plug",)
    response = client.get("/api/v1/health")
    assert response.status_code == 503
    assert response.headers["content-type"] == "application/json"
    assert response.json() == {**well, "ok": False, "problems": list(running.problems)}


def test_the_site_is_shown_as_understood(client: Client) -> None:
    site = client.get("/api/v1/site").json()
    assert (site["id"], site["units"], site["sample_every_s"]) == ("alder-yard", "metric", 10.0)
    assert site["traps"] == ["tank", "riser"]
    assert [station["id"] for station in site["stations"]] == [
        "intake",
        "tank",
        "riser",
        "gun-regulator",
    ]
    tank = site["stations"][1]
    assert tank["temperature"] == {
        "how": "rise by duty",
        "station": "intake",
        "rise_at_full_duty": 20.0,
        "unit": "K",
        "time_constant_s": 1800.0,
        "give_or_take": 8.0,
    }
    assert tank["pressure"] == {
        "how": "measured",
        "channel": "tank-gauge.pressure",
        "unit": "Pa",
        "gauge": True,
        "give_or_take": 12000.0,
    }
    assert tank["volume"]["value"] == 0.1
    assert tank["trap"]["capacity_ml"] == 15000.0
    assert tank["trap"]["drain_every"] == "working day"
    assert site["stations"][2]["pressure"]["how"] == "like"
    assert site["stations"][3]["trap"] is None
    assert site["stations"][1]["fittings"] == []
    assert site["outlets"][0]["after"] == "gun-regulator"
    assert site["compressor"]["cut_out"]["value"] == 8e5
    assert site["hours"]["week"]["mon"] == ["08:00-12:00", "13:00-17:30"]
    assert site["hours"]["week"]["sun"] == []
    assert site["defaults"] == [
        {"table": "cup", "key": "reads_low_by", "value": "5 %", "because": "common practice"}
    ]
    channels = {
        channel["channel"]: channel for sensor in site["sensors"] for channel in sensor["channels"]
    }
    assert list(channels) == list(a_site().channels)
    assert channels["tank-gauge.pressure"]["reference"] == "gauge"


def test_the_broker_s_password_is_never_shown() -> None:
    secret = "correct-horse"
    running = FakeRunning(site=a_site(password=secret))
    assert running.site.mqtt is not None
    assert running.site.mqtt.password == secret
    client = client_of(running)
    for path in ("/api/v1/site", "/api/v1/health", "/"):
        assert secret not in client.get(path).text


def test_the_lamp_or_buzzer_is_shown_as_understood(running: FakeRunning, client: Client) -> None:
    assert client.get("/api/v1/site").json()["signal"] is None
    running.site = replace(
        running.site, signal=Signal("buzzer", line=17, active_high=False, priorities=("high",))
    )
    assert client.get("/api/v1/site").json()["signal"] == {
        "kind": "buzzer",
        "chip": "/dev/gpiochip0",
        "line": 17,
        "active": "low",
        "priorities": ["high"],
        "pattern": "blink",
    }
