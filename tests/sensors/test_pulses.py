"""The flow meter: nothing of the total is lost or made, and lost pulses are a fault."""

from __future__ import annotations

import pytest

from sensors import reasons
from sensors.emulated.hardware import EmulatedHardware
from sensors.reading import Sensor
from sensors.registry import DRIVERS
from tests.sensors.support import SECOND_US, START_US, config, fault_of, open_part, values

METER = config(
    "meter", "flow-pulses", line=22, volume_per_pulse="10 L", highest="1000 L/min", debounce="5 ms"
)
L_MIN = 1e-3 / 60


@pytest.fixture
def sensor(hardware: EmulatedHardware) -> Sensor:
    hardware.fit([METER])
    return open_part(METER, hardware)


def test_the_first_call_begins_the_count(sensor: Sensor) -> None:
    assert sensor.read(START_US) == []
    assert values(sensor.read(START_US + 10 * SECOND_US)) == {"free_air_flow": 0.0}


def test_the_volume_that_went_through_is_the_volume_that_is_read(
    hardware: EmulatedHardware,
) -> None:
    put = hardware.fit([METER])["meter.free_air_flow"]
    sensor = open_part(METER, hardware)
    put(137 * L_MIN, START_US)
    sensor.read(START_US)
    total_m3 = 0.0
    ticks = 60
    for tick in range(1, ticks + 1):
        now_us = START_US + tick * 10 * SECOND_US
        put(137 * L_MIN, now_us)
        total_m3 += values(sensor.read(now_us))["free_air_flow"] * 10
    # one pulse of 10 L may be under way at the end
    assert total_m3 == pytest.approx(137 * L_MIN * ticks * 10, abs=0.010)


def test_lost_pulses_are_a_fault(hardware: EmulatedHardware) -> None:
    put = hardware.fit([METER])["meter.free_air_flow"]
    sensor = open_part(METER, hardware)
    put(600 * L_MIN, START_US)
    sensor.read(START_US)
    hardware.line("/dev/gpiochip0", 22).lose = 3
    put(600 * L_MIN, START_US + 10 * SECOND_US)
    assert fault_of(sensor, START_US + 10 * SECOND_US) == reasons.EDGES_LOST
    put(600 * L_MIN, START_US + 20 * SECOND_US)
    found = values(sensor.read(START_US + 20 * SECOND_US))["free_air_flow"]
    assert found == pytest.approx(600 * L_MIN, abs=60 * L_MIN + 1e-6)


def test_bounce_makes_no_air(hardware: EmulatedHardware, sensor: Sensor) -> None:
    line = hardware.line("/dev/gpiochip0", 22)
    sensor.read(START_US)
    line.bounce((START_US + SECOND_US) * 1000, 0, times=8, every_ns=200_000)
    line.bounce((START_US + 2 * SECOND_US) * 1000, 1, times=8, every_ns=200_000)
    found = values(sensor.read(START_US + 10 * SECOND_US))["free_air_flow"]
    assert found == pytest.approx(0.010 / 10)


def test_a_meter_that_pulses_too_fast_is_told() -> None:
    fast = config("meter", "flow-pulses", line=22, volume_per_pulse="100 ml", highest="1000 L/min")
    ((key, remedy),) = DRIVERS["flow-pulses"].clashes(fast)
    assert key == "volume_per_pulse"
    assert "40 pulses a second" in remedy
    assert DRIVERS["flow-pulses"].clashes(METER) == ()
