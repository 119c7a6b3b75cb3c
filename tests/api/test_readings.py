"""Recorded readings over the API."""

from __future__ import annotations

import math

import numpy as np
import pytest

from daemon.clock import HOUR_US, SECOND_US
from daemon.views import SeriesOfReadings
from tests.api.client import Client, client_of, problem_of
from tests.api.fake import NOW_US, FakeRunning, a_site

PRESSURE = "/api/v1/readings?channel=tank-gauge.pressure"


def series(channel: str, values: list[float], step_us: int = 10 * SECOND_US) -> SeriesOfReadings:
    """Readings that end just before now; NaN is a fault."""
    count = len(values)
    times = NOW_US - step_us * np.arange(count, 0, -1, dtype=np.int64)
    faults = tuple("no answer" if math.isnan(value) else "" for value in values)
    return SeriesOfReadings(channel, times, np.array(values), faults)


@pytest.fixture
def filled(running: FakeRunning) -> Client:
    running.recorded["tank-gauge.pressure"] = series(
        "tank-gauge.pressure", [7e5, math.nan, 7.1e5, 7.123e5]
    )
    return client_of(running)


def test_readings_are_two_arrays_in_si_with_faults_by_time(filled: Client) -> None:
    assert filled.get(PRESSURE).json() == {
        "channel": "tank-gauge.pressure",
        "quantity": "pressure",
        "unit": "Pa",
        "reference": "gauge",
        "from": "2026-12-01T08:00:00Z",
        "to": "2026-12-01T09:00:00Z",
        "times": [
            "2026-12-01T08:59:20Z",
            "2026-12-01T08:59:30Z",
            "2026-12-01T08:59:40Z",
            "2026-12-01T08:59:50Z",
        ],
        "values": [700000.0, None, 710000.0, 712300.0],
        "faults": [{"time": "2026-12-01T08:59:30Z", "reason": "no answer"}],
    }


def test_a_span_leaves_its_end_out(filled: Client) -> None:
    answer = filled.get(PRESSURE + "&from=2026-12-01T08:59:30Z&to=2026-12-01T08:59:50Z").json()
    assert answer["times"] == ["2026-12-01T08:59:30Z", "2026-12-01T08:59:40Z"]
    assert answer["from"] == "2026-12-01T08:59:30Z"


def test_si_values_go_out_to_the_last_bit(running: FakeRunning) -> None:
    value = 29603 * 0.01  # a count of steps, as a reading is stored
    assert repr(value) == "296.03000000000003"
    running.recorded["intake-air.temperature"] = series("intake-air.temperature", [value])
    answer = client_of(running).get("/api/v1/readings?channel=intake-air.temperature").json()
    assert answer["values"] == [value]


@pytest.mark.parametrize(
    ("channel", "si", "units", "unit", "expected"),
    [
        # by definition of the units (SI brochure, NIST SP 811 appendix B)
        ("tank-gauge.pressure", 8e5, "metric", "bar", 8.0),
        ("tank-gauge.pressure", 689475.729, "us", "psi", 100.0),
        ("intake-air.temperature", 293.15, "metric", "degC", 20.0),
        ("intake-air.temperature", 293.15, "us", "degF", 68.0),
        ("intake-air.relative_humidity", 0.5, "us", "%", 50.0),
        ("motor.contact", 1.0, "us", "1", 1.0),
        ("tank-gauge.pressure", 8e5, "si", "Pa", 8e5),
    ],
)
def test_values_are_shown_in_people_s_units_when_asked(
    running: FakeRunning, channel: str, si: float, units: str, unit: str, expected: float
) -> None:
    running.recorded[channel] = series(channel, [si])
    answer = client_of(running).get(f"/api/v1/readings?channel={channel}&units={units}").json()
    assert answer["unit"] == unit
    assert answer["values"] == [pytest.approx(expected, rel=1e-8)]


@pytest.mark.parametrize(("site_units", "unit"), [("metric", "bar"), ("us", "psi")])
def test_the_site_s_units_are_those_of_its_file(site_units: str, unit: str) -> None:
    site = a_site(units="us" if site_units == "us" else "metric")
    answer = client_of(FakeRunning(site=site)).get(PRESSURE + "&units=site").json()
    assert answer["unit"] == unit


def test_only_a_pressure_has_a_reference(client: Client) -> None:
    def reference(channel: str) -> str | None:
        found: str | None = client.get(f"/api/v1/readings?channel={channel}").json()["reference"]
        return found

    assert reference("intake-air.pressure") == "absolute"
    assert reference("intake-air.temperature") is None


def test_edges_of_a_contact_keep_their_fractions_of_a_second(running: FakeRunning) -> None:
    edge_us = NOW_US - 1_500_000
    running.recorded["motor.contact"] = SeriesOfReadings(
        "motor.contact", np.array([edge_us, NOW_US - 1_000_000]), np.array([1.0, 0.0]), ("", "")
    )
    answer = client_of(running).get("/api/v1/readings?channel=motor.contact").json()
    assert answer["times"] == ["2026-12-01T08:59:58.500000Z", "2026-12-01T08:59:59.000000Z"]


def test_an_unknown_channel_is_answered_with_the_known_ones(client: Client) -> None:
    response = client.get("/api/v1/readings?channel=attic.temperature")
    problem = problem_of(response, 404, "unknown-channel")
    assert 'there is no channel "attic.temperature"' in problem["detail"]
    assert "tank-gauge.pressure, motor.contact" in problem["detail"]


def test_a_channel_must_be_named(client: Client) -> None:
    problem = problem_of(client.get("/api/v1/readings"), 422, "invalid-request")
    assert problem["errors"] == [
        {"where": "query.channel", "value": "", "remedy": "it is missing; it must be sent"}
    ]


def test_other_units_than_known_are_refused(client: Client) -> None:
    problem = problem_of(client.get(PRESSURE + "&units=imperial"), 422, "invalid-request")
    assert problem["errors"][0]["remedy"] == ("it must be one of 'si', 'site', 'metric' or 'us'")


def test_a_span_too_long_for_one_answer_is_refused_with_the_limit(client: Client) -> None:
    response = client.get(PRESSURE + "&from=2026-11-01T00:00:00Z")
    problem = problem_of(response, 422, "invalid-request")
    assert problem["errors"] == [
        {
            "where": "query.from",
            "value": "729 h before to",
            "remedy": "one answer holds at most 194.4 h of this site (70000 readings at 10 s); "
            "ask for shorter spans in turn",
        }
    ]


def test_a_week_fits_in_one_answer(running: FakeRunning) -> None:
    week = 7 * 24 * HOUR_US // (10 * SECOND_US)
    running.recorded["tank-gauge.pressure"] = series("tank-gauge.pressure", [7e5] * week)
    answer = client_of(running).get(PRESSURE + "&from=2026-11-24T09:00:00Z").json()
    assert len(answer["times"]) == len(answer["values"]) == week


def test_both_bad_times_are_named(client: Client) -> None:
    response = client.get(PRESSURE + "&from=monday&to=2026-02-30T00:00:00Z")
    problem = problem_of(response, 422, "invalid-request")
    assert [point["where"] for point in problem["errors"]] == ["query.to", "query.from"]
    assert "is not a time that exists" in problem["errors"][0]["remedy"]


def test_a_year_that_no_log_reaches_is_refused(client: Client) -> None:
    response = client.get(PRESSURE + "&from=2200-01-01T00:00:00Z&to=2200-01-01T00:30:00Z")
    problem = problem_of(response, 422, "invalid-request")
    assert "outside the years 1970 to 2199" in problem["detail"]


# --- step by step


def test_steps_give_mean_least_and_greatest(filled: Client) -> None:
    answer = filled.get(PRESSURE + "&step=20&from=2026-12-01T08:59:00Z").json()
    assert answer == {
        "channel": "tank-gauge.pressure",
        "quantity": "pressure",
        "unit": "Pa",
        "reference": "gauge",
        "from": "2026-12-01T08:59:00Z",
        "to": "2026-12-01T09:00:00Z",
        "step_s": 20.0,
        "times": ["2026-12-01T08:59:00Z", "2026-12-01T08:59:20Z", "2026-12-01T08:59:40Z"],
        "mean": [None, 7e5, 711150.0],
        "least": [None, 7e5, 7.1e5],
        "greatest": [None, 7e5, 712300.0],
        "count": [0, 1, 2],
        "bad": [0, 1, 0],
    }


def test_the_mean_of_a_contact_is_its_share_of_the_time(running: FakeRunning) -> None:
    begin = NOW_US - 60 * SECOND_US
    offsets = np.array([0, 15, 30, 45, 45.5]) * SECOND_US
    running.recorded["motor.contact"] = SeriesOfReadings(
        "motor.contact",
        begin + offsets.astype(np.int64),
        np.array([1.0, 1.0, 1.0, 0.0, 0.0]),
        ("",) * 5,
    )
    answer = client_of(running).get(
        "/api/v1/readings?channel=motor.contact&step=60&from=2026-12-01T08:59:00Z"
    )
    assert answer.json()["mean"] == [0.75]  # of the samples three in five are 1


def test_steps_are_shown_in_people_s_units_when_asked(filled: Client) -> None:
    answer = filled.get(PRESSURE + "&step=60&units=metric&from=2026-12-01T08:59:00Z").json()
    assert (answer["unit"], answer["greatest"]) == ("bar", [7.123])


def test_without_from_the_last_24_steps_are_given_at_whole_multiples(filled: Client) -> None:
    answer = filled.get(PRESSURE + "&step=3600&to=2026-12-01T08:59:50Z").json()
    assert len(answer["times"]) == 24
    assert (answer["from"], answer["to"]) == ("2026-11-30T09:00:00Z", "2026-12-01T09:00:00Z")


def test_a_year_by_the_hour_fits_in_one_answer(client: Client) -> None:
    answer = client.get(PRESSURE + "&step=3600&from=2025-12-01T09:00:00Z").json()
    assert len(answer["times"]) == len(answer["mean"]) == 365 * 24


@pytest.mark.parametrize("step", ["15", "0", "-3600", "3600.5", "31622410", "1e300"])
def test_a_step_must_be_a_number_of_sampling_periods(client: Client, step: str) -> None:
    problem = problem_of(client.get(PRESSURE + f"&step={step}"), 422, "invalid-request")
    (error,) = problem["errors"]
    assert error["where"] == "query.step"
    assert "a whole number of sampling periods of 10 s" in error["remedy"]


@pytest.mark.parametrize("step", ["nan", "inf", "hour"])
def test_a_step_must_be_a_number(client: Client, step: str) -> None:
    problem = problem_of(client.get(PRESSURE + f"&step={step}"), 422, "invalid-request")
    assert problem["errors"][0]["where"] == "query.step"


def test_too_many_steps_are_refused_with_the_limit(client: Client) -> None:
    response = client.get(PRESSURE + "&step=3600&from=2024-12-01T09:00:00Z")
    problem = problem_of(response, 422, "invalid-request")
    assert "at most 10000 steps; ask for longer steps" in problem["errors"][0]["remedy"]


@pytest.mark.parametrize(
    "query", ["&step=1800&from=2026-11-01T00:00:00Z", "&step=3600&from=2026-11-01T00:10:00Z"]
)
def test_long_spans_want_whole_hours(client: Client, query: str) -> None:
    problem = problem_of(client.get(PRESSURE + query), 422, "invalid-request")
    assert "ask for a multiple of 3600 from a full hour on" in problem["errors"][0]["remedy"]


@pytest.mark.parametrize("step", ["1e308", "-1e308", "1e300", "0", "-10"])
def test_a_step_beyond_all_reason_is_refused(client: Client, step: str) -> None:
    response = client.get(f"/api/v1/readings?channel=tank-gauge.pressure&step={step}")
    problem_of(response, 422, "invalid-request")
