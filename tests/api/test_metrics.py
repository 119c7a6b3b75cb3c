"""`/metrics`, read back by another program: prometheus-client's OpenMetrics parser, which refuses
names without their unit, counters without `_total`, a missing end and the like."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import pytest
from prometheus_client.metrics_core import Metric
from prometheus_client.openmetrics.parser import text_string_to_metric_families
from prometheus_client.samples import Sample

from api.openmetrics import MEDIA_TYPE, Family, written
from tests.api.client import Client, client_of
from tests.api.fake import NOW_US, FakeRunning, StillClock, a_site


def parsed(text: str) -> list[Metric]:
    return list(text_string_to_metric_families(text))  # type: ignore[no-untyped-call]  # has none


def samples(text: str) -> Iterator[Sample]:
    for family in parsed(text):
        yield from family.samples


def value(client: Client, name: str, **labels: str) -> float | None:
    """The one sample of that name that has these labels; None when there is none."""
    found = [
        each.value
        for each in samples(client.get("/metrics").text)
        if each.name == name and labels.items() <= each.labels.items()
    ]
    assert len(found) < 2, found
    return found[0] if found else None


def test_another_program_reads_every_family_with_help_type_and_unit(client: Client) -> None:
    answer = client.get("/metrics")
    assert answer.headers["content-type"] == MEDIA_TYPE
    families = parsed(answer.text)
    assert len(families) > 20
    for family in families:
        assert family.documentation
        assert family.name.startswith("dripleg_")
        assert family.name.endswith(family.unit)
    assert answer.text.endswith("\n# EOF\n")


def test_figures_are_those_of_the_views(running: FakeRunning, client: Client) -> None:
    running.problems = ("tank-gauge.pressure: no answer",)
    for bound, litres in (("p05", 0.300), ("p50", 0.410), ("p95", 0.560)):
        assert value(client, "dripleg_trap_content_litres", trap="tank", bound=bound) == litres
    assert value(client, "dripleg_trap_probability_due_ratio", trap="riser") == 0.875
    assert value(client, "dripleg_trap_drain_at_litres", trap="tank") == 0.6
    assert value(client, "dripleg_ticks_total") == 360
    assert value(client, "dripleg_healthy") == 0
    assert value(client, "dripleg_problems") == 1
    assert value(client, "dripleg_started_timestamp_seconds") == NOW_US / 1e6 - 3600
    assert value(client, "dripleg_channel_good", channel="tank-gauge.pressure") == 0
    air = value(client, "dripleg_channel_temperature_celsius", channel="intake-air.temperature")
    assert air == 20.0  # 293.15 K
    gauge = "dripleg_channel_pressure_pascals"
    assert value(client, gauge, channel="tank-gauge.pressure", reference="gauge") == 7.2e5
    assert value(client, "dripleg_leak_cubic_metres_per_second", bound="p50") == 0.0002
    assert value(client, "dripleg_site_info", site="alder-yard") == 1


def test_states_are_one_of_their_set(client: Client) -> None:
    alarm = {
        each.labels["dripleg_alarm_state"]: each.value
        for each in samples(client.get("/metrics").text)
        if each.labels.get("alarm") == "riser-drain-due"
    }
    assert sum(alarm.values()) == 1
    assert alarm["unacknowledged"] == 1
    assert set(alarm) >= {"normal", "acknowledged", "shelved", "out of service"}
    verdicts = [
        each.value
        for each in samples(client.get("/metrics").text)
        if each.labels.get("outlet") == "spray-gun" and each.name == "dripleg_outlet_verdict"
    ]
    assert sorted(verdicts) == [0, 0, 0, 1]


def test_what_is_not_known_is_left_out(running: FakeRunning, client: Client) -> None:
    running.views = [replace(running.views[0], due_p95_us=None, last_drain_us=None)]
    running.shown_outlets, running.shown_plant = [], None
    due = "dripleg_trap_due_timestamp_seconds"
    assert value(client, due, trap="tank", bound="p50") is not None
    assert value(client, due, trap="tank", bound="p95") is None
    assert value(client, "dripleg_trap_last_drain_timestamp_seconds") is None
    assert value(client, "dripleg_duty_ratio") is None


@pytest.mark.parametrize("text", ['a "quoted" name', "back\\slash", "two\nlines", "Ærø é"])
def test_odd_texts_come_back_as_they_were(text: str) -> None:
    family = Family("dripleg_site", text, "info")
    family.add(1.0, name=text)
    (read,) = parsed(written([family]))
    assert read.samples[0].labels["name"] == text
    assert read.documentation == text


def test_the_network_reads_it_with_a_key_only() -> None:
    running = FakeRunning(site=a_site("0.0.0.0"), clock=StillClock())
    assert client_of(running, "192.168.1.20").get("/metrics").status_code == 401
