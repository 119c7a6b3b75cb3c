"""What programs that watch machines collect: `/metrics` in the OpenMetrics text format."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import get_args

from fastapi import APIRouter, Response

from api.openmetrics import MEDIA_TYPE, Family, written
from api.problems import answered_by
from api.routes.running import TheDaemon
from daemon.alarms import AlarmState
from daemon.unit_tables import ZERO_CELSIUS_K
from daemon.views import Health, Interval, OutletView, PlantView, Running, TrapView, Verdict
from sensors.reading import Quantity

router = APIRouter(tags=["site"])

L_PER_KG = 1.0  # of water
S_PER_US = 1e-6
G_PER_KG = 1e3
BOUNDS = ("p05", "p50", "p95")
# by quantity: the family's end, its unit, and what is taken off the value in SI
_CHANNELS: dict[Quantity, tuple[str, str, float]] = {
    "temperature": ("temperature_celsius", "celsius", ZERO_CELSIUS_K),
    "relative_humidity": ("relative_humidity_ratio", "ratio", 0.0),
    "pressure": ("pressure_pascals", "pascals", 0.0),
    "contact": ("contact_closed", "", 0.0),
    "dew_point": ("dew_point_celsius", "celsius", ZERO_CELSIUS_K),
    "free_air_flow": ("free_air_flow_cubic_metres_per_second", "cubic_metres_per_second", 0.0),
}


class OpenMetrics(Response):
    """An answer in that format."""

    media_type = MEDIA_TYPE


@router.get(
    "/metrics",
    summary="Figures for programs that watch machines",
    response_class=OpenMetrics,
    responses={
        200: {"content": {MEDIA_TYPE: {"schema": {"type": "string"}}}},
        **answered_by("keys-needed", "wrong-host", "log-unavailable", "unexpected"),
    },
)
def get_metrics(daemon: TheDaemon) -> OpenMetrics:
    """Traps, margins, alarms, channels, plant and health in the OpenMetrics text format.

    An estimate is three samples, by the label `bound`: p05, p50, p95. What is not known is left
    out.
    """
    return OpenMetrics(written(families(daemon)))


def families(daemon: Running) -> Iterator[Family]:
    """Every family; those without samples too."""
    site = Family("dripleg_site", "What this is the record of.", "info")
    site.add(1.0, site=daemon.site.id, name=daemon.site.name)
    yield site
    health = daemon.health()
    yield from _health(health)
    yield from _traps(daemon.traps())
    yield from _outlets(daemon.outlets())
    yield _alarms(daemon)
    yield from _channels(daemon, health)
    plant = daemon.plant()
    if plant is not None:
        yield from _plant(plant)


def _one(name: str, text: str, value: float | None, unit: str = "") -> Family:
    family = Family(name, text, unit=unit)
    family.add(value)
    return family


def _interval(
    family: Family, interval: Interval | None, times: float = 1.0, less: float = 0.0, **of: str
) -> None:
    if interval is not None:
        for bound, value in zip(BOUNDS, interval.values, strict=True):
            family.add(round(value * times - less, 6), **of, bound=bound)


def _health(health: Health) -> Iterator[Family]:
    yield _one("dripleg_healthy", "1 while the daemon does its job.", float(health.ok))
    yield _one("dripleg_problems", "What is wrong: how many things.", len(health.problems))
    yield _one(
        "dripleg_started_timestamp_seconds",
        "When the daemon began.",
        health.started_us * S_PER_US,
        "seconds",
    )
    last_us = health.last_tick_us
    yield _one(
        "dripleg_last_tick_timestamp_seconds",
        "When the sensors were last read and reckoned with.",
        None if last_us is None else last_us * S_PER_US,
        "seconds",
    )
    ticks = Family("dripleg_ticks", "Ticks since the daemon began.", "counter")
    ticks.add(health.ticks)
    yield ticks
    waiting = "Messages that the broker has not yet acknowledged."
    yield _one("dripleg_outbox_messages", waiting, health.outbox_waiting, "messages")
    connected = None if health.mqtt == "off" else float(health.mqtt == "connected")
    yield _one("dripleg_broker_connected", "1 while the broker is there.", connected)


def _traps(views: Sequence[TrapView]) -> Iterator[Family]:
    held = Family("dripleg_trap_content_litres", "Water in the trap.", unit="litres")
    capacity = Family("dripleg_trap_capacity_litres", "What it can hold.", unit="litres")
    drain_at = Family("dripleg_trap_drain_at_litres", "At what it is due.", unit="litres")
    chance = Family(
        "dripleg_trap_probability_due_ratio", "The chance that it holds that much.", unit="ratio"
    )
    stuck = Family(
        "dripleg_trap_probability_stuck_ratio", "Of a drain that empties itself.", unit="ratio"
    )
    due = Family(
        "dripleg_trap_due_timestamp_seconds", "When it is expected to be due.", unit="seconds"
    )
    last = Family(
        "dripleg_trap_last_drain_timestamp_seconds", "When it was last drained.", unit="seconds"
    )
    for view in views:
        trap = view.trap
        _interval(held, Interval(view.p05_kg, view.p50_kg, view.p95_kg), L_PER_KG, trap=trap)
        capacity.add(view.capacity_kg * L_PER_KG, trap=trap)
        drain_at.add(view.drain_at_kg * L_PER_KG, trap=trap)
        chance.add(view.probability_due, trap=trap)
        stuck.add(view.chance_stuck, trap=trap)
        times_us = (view.due_p05_us, view.due_p50_us, view.due_p95_us)
        for bound, time_us in zip(BOUNDS, times_us, strict=True):
            due.add(None if time_us is None else time_us * S_PER_US, trap=trap, bound=bound)
        drained_us = view.last_drain_us
        last.add(None if drained_us is None else drained_us * S_PER_US, trap=trap)
    yield from (held, capacity, drain_at, chance, stuck, due, last)


def _outlets(views: Sequence[OutletView]) -> Iterator[Family]:
    line = Family(
        "dripleg_outlet_line_margin_kelvins", "How far the line is from wet.", unit="kelvins"
    )
    surface = Family(
        "dripleg_outlet_surface_margin_kelvins", "How far the surface is from wet.", unit="kelvins"
    )
    dew_point = Family(
        "dripleg_outlet_pressure_dew_point_celsius",
        "The frost point at and below 0.",
        unit="celsius",
    )
    carried = Family(
        "dripleg_outlet_carried_liquid_grams_per_cubic_metre",
        "Liquid carried along, per reference cubic metre.",
        unit="grams_per_cubic_metre",
    )
    verdict = Family(
        "dripleg_outlet_verdict", "Whether it is dry enough: of water only.", "stateset"
    )
    for view in views:
        of, air = view.outlet, view.air
        _interval(line, air.line_margin_k, outlet=of)
        _interval(surface, view.surface.surface_margin_k, outlet=of)
        _interval(dew_point, air.pressure_dew_point_k, less=ZERO_CELSIUS_K, outlet=of)
        _interval(carried, air.carried_kg_per_m3, G_PER_KG, outlet=of)
        verdict.state(get_args(Verdict), view.verdict, outlet=of)
    yield from (line, surface, dew_point, carried, verdict)


def _alarms(daemon: Running) -> Family:
    family = Family("dripleg_alarm_state", "How each alarm stands.", "stateset")
    for alarm in daemon.alarms():
        labels = {"alarm": alarm.id, "kind": alarm.kind, "priority": alarm.priority}
        family.state(get_args(AlarmState), alarm.state, **labels)
    return family


def _channels(daemon: Running, health: Health) -> Iterator[Family]:
    good = Family("dripleg_channel_good", "1 while the channel is believed.")
    heard = Family(
        "dripleg_channel_last_good_timestamp_seconds", "Of its last good reading.", unit="seconds"
    )
    values = {
        quantity: Family(f"dripleg_channel_{end}", "The last good reading.", unit=unit)
        for quantity, (end, unit, _) in _CHANNELS.items()
    }
    for channel in health.channels:
        good.add(float(not channel.fault), channel=channel.channel)
        time_us = channel.time_us
        heard.add(None if time_us is None else time_us * S_PER_US, channel=channel.channel)
        described = daemon.site.channels.get(channel.channel)
        if described is None or channel.value is None:
            continue
        labels = {"channel": channel.channel}
        if described.quantity == "pressure":
            labels["reference"] = "gauge" if described.gauge else "absolute"
        value = round(channel.value - _CHANNELS[described.quantity][2], 9)
        values[described.quantity].add(value, **labels)
    yield from (good, heard, *values.values())


def _plant(plant: PlantView) -> Iterator[Family]:
    leak = Family(
        "dripleg_leak_cubic_metres_per_second",
        "Reference air lost while the shop is closed.",
        unit="cubic_metres_per_second",
    )
    _interval(leak, plant.leak_m3_per_s)
    delivered = Family(
        "dripleg_delivered_cubic_metres_per_second",
        "Reference air that the compressor makes while it runs.",
        unit="cubic_metres_per_second",
    )
    _interval(delivered, plant.delivered_m3_per_s)
    yield from (leak, delivered)
    yield _one("dripleg_duty_ratio", "Share of working hours that it ran.", plant.duty, "ratio")
