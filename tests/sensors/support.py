"""What the sensor tests share: configs as the site file would give them, and a clock by hand."""

from __future__ import annotations

import math
from collections.abc import Sequence

import pytest

import sensors.drivers  # noqa: F401  # fills the registry
from sensors.reading import Reading, Sensor, SensorFault
from sensors.registry import DRIVERS, REQUIRED, Hardware, SensorConfig

SECOND_US = 1_000_000
START_US = 1_772_000_000 * SECOND_US  # some day in 2026


def config(identity: str, driver: str, **said: object) -> SensorConfig:
    """A checked config: the keys that are said go through the driver's readers."""
    settings = {}
    for key in DRIVERS[driver].keys:
        if key.name in said:
            settings[key.name] = key.read(said[key.name])
        else:
            assert key.default is not REQUIRED, f"{driver} needs {key.name}"
            settings[key.name] = key.default
    unknown = set(said) - set(settings)
    assert not unknown, f"{driver} has no {unknown}"
    return SensorConfig(identity, driver, settings, frozenset(said))


def open_part(one: SensorConfig, hardware: Hardware) -> Sensor:
    return DRIVERS[one.driver].open(one, hardware)


def values(readings: Sequence[Reading]) -> dict[str, float]:
    """Last value by quantity; every reading must be good."""
    for one in readings:
        assert one.good, one
    return {one.channel.rsplit(".", 1)[1]: one.value for one in readings}


def fault_of(sensor: Sensor, now_us: int = START_US) -> str:
    """The reason of the fault that a read raises."""
    with pytest.raises(SensorFault) as caught:
        sensor.read(now_us)
    assert caught.value.sensor == sensor.id
    return caught.value.reason


def is_bad(one: Reading, reason: str) -> bool:
    return math.isnan(one.value) and one.fault == reason


class HandClock:
    """Seconds that a test moves."""

    def __init__(self) -> None:
        self.now_s = 100.0

    def __call__(self) -> float:
        return self.now_s
