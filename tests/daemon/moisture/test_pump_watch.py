"""When a compressor without a contact ran, told from its tank's pressure."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np
import pytest

from daemon.advance import Core
from daemon.clock import HOUR_US, SECOND_US
from daemon.moisture.flow import PumpWatch
from daemon.replay import replay
from sensors.reading import Reading
from tests.daemon.shops import BEGUN_US, SITE, a_tick, site

SPAN_PA = 2e5
TANK_L, DELIVERED_L_MIN = 100.0, 150.0


@dataclass
class Tank:
    """A tank between 6 and 8 bar, stepped every tenth of a second: what its gauge says, and when
    the compressor really ran, both in microseconds."""

    told: list[tuple[int, float]] = field(default_factory=list)
    ran: list[tuple[int, int]] = field(default_factory=list)

    def duty(self, from_us: int) -> float:
        """The share of the time from then on."""
        return overlap(self.ran, from_us) / (self.told[-1][0] - from_us)


def overlap(spans: Sequence[tuple[int, int]], from_us: int) -> int:
    return sum(max(0, until - max(start, from_us)) for start, until in spans)


def cycling(demand_l_min: float, hours: float, period_s: float, noise_pa: float) -> Tank:
    generator = np.random.default_rng(1)
    tank, gauge_pa, on, since_us = Tank(), 6.3e5, True, 0
    every = round(period_s * 10)
    for step in range(round(hours * 36_000) + 1):
        now_us = step * 100_000
        if step % every == 0:
            tank.told.append((now_us, gauge_pa + generator.normal(0.0, 1.0) * noise_pa))
        gauge_pa += (DELIVERED_L_MIN * on - demand_l_min) / 600.0 / TANK_L * 1e5
        if (on and gauge_pa >= 8e5) or (not on and gauge_pa <= 6e5):
            if on:
                tank.ran.append((since_us, now_us))
            on, since_us = not on, now_us
    return tank


def booked(told: Sequence[tuple[int, float]]) -> list[tuple[int, int]]:
    watch, spans = PumpWatch(), []
    for time_us, pressure_pa in told:
        watch, from_us, until_us = watch.told(pressure_pa, time_us, SPAN_PA)
        if until_us > from_us:
            spans.append((from_us, until_us))
    return spans


def joined(spans: Sequence[tuple[int, int]]) -> list[tuple[int, int]]:
    """Spans that touch, as one."""
    found: list[tuple[int, int]] = []
    for start, until in spans:
        if found and found[-1][1] == start:
            found[-1] = (found[-1][0], until)
        else:
            found.append((start, until))
    return found


@pytest.mark.parametrize(
    ("demand_l_min", "period_s", "noise_pa", "within"),
    [
        (70.0, 10.0, 0.0, 0.04),
        (70.0, 10.0, 500.0, 0.04),
        (110.0, 10.0, 500.0, 0.04),
        (20.0, 2.0, 0.0, 0.03),
        (20.0, 2.0, 1000.0, 0.03),
        (110.0, 2.0, 1000.0, 0.03),
    ],
)
def test_the_time_that_it_ran_is_found_within_a_few_per_cent(
    demand_l_min: float, period_s: float, noise_pa: float, within: float
) -> None:
    tank = cycling(demand_l_min, 5.0, period_s, noise_pa)
    duty = tank.duty(HOUR_US)
    assert duty == pytest.approx(demand_l_min / DELIVERED_L_MIN, abs=0.02)  # conservation of air
    assert overlap(booked(tank.told), HOUR_US) / (4 * HOUR_US) == pytest.approx(duty, rel=within)


@pytest.mark.parametrize("demand_l_min", [20.0, 70.0, 110.0])
@pytest.mark.parametrize("period_s", [2.0, 10.0])
def test_every_pump_up_is_found_and_right_to_a_reading_at_each_end(
    demand_l_min: float, period_s: float
) -> None:
    tank = cycling(demand_l_min, 4.0, period_s, 200.0)
    found = [span for span in joined(booked(tank.told)) if span[0] > HOUR_US]
    true = [span for span in tank.ran if span[0] > HOUR_US]
    assert len(found) in (len(true), len(true) + 1)  # the last may still go on
    for (start, until), (began, ended) in zip(found, true, strict=False):
        assert abs(start - began) <= period_s * SECOND_US
        assert abs(until - ended) <= period_s * SECOND_US


def test_spans_do_not_overlap_and_lie_in_the_past() -> None:
    told = cycling(70.0, 2.0, 10.0, 500.0).told
    spans = booked(told)
    assert all(start < until for start, until in spans)
    assert all(a[1] <= b[0] for a, b in pairwise(spans))
    watch = PumpWatch()
    for time_us, pressure_pa in told:
        watch, _, until_us = watch.told(pressure_pa, time_us, SPAN_PA)
        assert until_us == time_us


def test_a_compressor_that_runs_unloaded_makes_no_air() -> None:
    """Pressure stands at the cut-out, or falls slowly: nothing is booked."""
    generator = np.random.default_rng(2)
    still = [(n * 10 * SECOND_US, 8e5 + generator.normal(0.0, 300.0)) for n in range(2000)]
    falling = [(at_us, pressure - at_us / SECOND_US * 2.0) for at_us, pressure in still]
    assert booked(still) == booked(falling) == []


@pytest.mark.parametrize("noise_pa", [0.0, 400.0, 2000.0])
@pytest.mark.parametrize("begins", ["cut out", "resting"])
def test_a_tight_tank_that_warms_and_cools_makes_no_air(noise_pa: float, begins: str) -> None:
    """A weekend of 20 degC +- 8 K: pressure follows the temperature at constant mass (Gay-Lussac),
    0.25 bar up and down each day. After the last pump-up, noise may hide for a while that it is
    one no more: a swing of at least 0.1 bar, twelve times the noise, at a bar an hour."""
    generator = np.random.default_rng(3)
    told = []
    pump_up = cycling(70.0, 1.0, 10.0, noise_pa) if begins == "cut out" else Tank()
    if begins == "cut out":
        _, stopped_us = pump_up.ran[-1]
        told = [each for each in pump_up.told if each[0] <= stopped_us]
    from_us = told[-1][0] if told else 0
    for number in range(1, 60 * 360):
        warmer = 8.0 * np.sin(number / 360.0 / 24.0 * 2.0 * np.pi) / 293.15
        pressure = 9.0e5 * (1.0 + warmer) - 1.0e5 + generator.normal(0.0, 1.0) * noise_pa
        told.append((from_us + number * 10 * SECOND_US, pressure))
    hidden_us = round((2.0 * max(0.1e5, 12.0 * noise_pa) + 4.0 * noise_pa) / 1e5 * HOUR_US)
    assert overlap(booked(told), from_us) <= (hidden_us if begins == "cut out" else 0)


def test_a_pump_up_on_a_tank_that_has_been_warming_is_found() -> None:
    generator = np.random.default_rng(4)
    warming = [
        (n * 10 * SECOND_US, 6.2e5 + 1.5 * n + generator.normal(0.0, 200.0)) for n in range(720)
    ]
    tank = cycling(70.0, 2.0, 10.0, 200.0)
    from_us = warming[-1][0] + 10 * SECOND_US
    told = warming + [(at_us + from_us, pressure) for at_us, pressure in tank.told]
    until_us = from_us + tank.ran[-1][1]
    found = overlap(booked([each for each in told if each[0] <= until_us]), from_us)
    assert found == pytest.approx(overlap(tank.ran, 0), rel=0.04)


def test_a_rise_after_a_long_silence_is_booked_as_far_as_readings_tell() -> None:
    told = cycling(70.0, 1.0, 10.0, 0.0).told
    silent_us = told[-1][0] + HOUR_US
    later = [(silent_us + at_us, pressure) for at_us, pressure in told]
    for start, until in booked(told + later):
        assert until - start < 10 * 60 * SECOND_US or start < silent_us <= until


@pytest.mark.parametrize("demand_l_min", [40.0, 90.0])
def test_a_shop_without_a_contact_finds_its_duty_and_the_water_it_makes(
    demand_l_min: float,
) -> None:
    """Through the whole core, beside the same shop with the contact."""
    tank = cycling(demand_l_min, 2.0, 10.0, 300.0)
    told, duty = tank.told, tank.duty(HOUR_US)
    felt = {
        "intake-air.temperature": 295.15,
        "intake-air.relative_humidity": 0.7,
        "intake-air.pressure": 101_000.0,
        "pipe-end.temperature": 290.15,
    }
    with_contact = site()
    without = site(SITE.replace('running = "motor.contact"\n', ""))
    levels = np.zeros(len(told))
    rises = np.diff([pressure for _, pressure in told]) > 300.0
    levels[:-1] = rises
    drawn = []
    for shop in (with_contact, without):
        readings: list[Reading] = []
        for (at_us, pressure), level in zip(told, levels, strict=True):
            values = felt | {"tank-gauge.pressure": pressure, "motor.contact": float(level)}
            readings += a_tick(shop, BEGUN_US + at_us, values)
        result = replay(Core(shop), readings, [])
        hours = [mark.hour for mark in result.marks if mark.hour is not None][1:]
        drawn.append(sum(float(np.median(hour.drawn_kg)) for hour in hours))
        on_s = sum(float(np.median(hour.on_s)) for hour in hours)
        if shop is without:
            assert on_s / 3600.0 == pytest.approx(duty, rel=0.06)
    assert drawn[1] == pytest.approx(drawn[0], rel=0.08)


def test_a_pressure_that_turns_between_readings_tells_no_duty() -> None:
    """A small tank read once a minute, up and down by the minute: its compressor runs half of the
    time. That is taken for noise, which it might be, and nothing is booked hours later at once."""
    always_open = SITE[: SITE.index("[hours]")] + SITE[SITE.index("[compressor]") :]
    text = always_open.replace('running = "motor.contact"\n', "")
    text = text.replace('volume = "100 L"', 'volume = "50 L"')
    shop = site(text.replace('name = "Birch Works"', 'name = "B"\nsample_every = "60 s"'))
    readings: list[Reading] = []
    for minute in range(12 * 60 + 1):
        # the last turns go a little higher than all before them
        pressure = 6.2e5 if minute % 2 else (7.8e5 if minute < 600 else 7.9e5)
        readings += a_tick(
            shop, BEGUN_US + minute * 60 * SECOND_US, {"tank-gauge.pressure": pressure}
        )
    marks = replay(Core(shop), readings, []).marks
    hours = [mark.hour.on_s / 3600.0 for mark in marks if mark.hour is not None]
    assert len(hours) == 12
    for duty in hours:
        assert duty.max() <= 1.0
        assert np.percentile(duty, 5) < 0.5 < np.percentile(duty, 95)
