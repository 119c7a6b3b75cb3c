"""What every driver must do, whatever its part: one suite over all of them."""

from __future__ import annotations

import subprocess
import sys
import threading
from collections.abc import Callable, Iterator

import pytest

from sensors import reasons
from sensors.emulated.hardware import EmulatedHardware
from sensors.reading import Reading
from sensors.registry import DRIVERS
from sensors.sampling import Sampler
from tests.sensors.contract_cases import CASES, CHIP, PERIOD_US, Case
from tests.sensors.support import START_US, HandClock

DEADLINE_S = 20.0


class Rig:
    """A sampler over one part."""

    def __init__(self, case: Case, hardware: EmulatedHardware) -> None:
        self.case = case
        self.hardware = hardware
        self.put = hardware.fit([case.config])
        self.clock = HandClock()
        self.sampler = Sampler([case.config], hardware, self.clock)
        self.now_us = START_US
        self.tick()  # edges, pulses and messages count from the first look on

    def set(self) -> None:
        for quantity, (value, _) in self.case.values.items():
            self.put[f"{self.case.config.id}.{quantity}"](
                value, self.now_us + self.case.set_after_us
            )

    def tick(self) -> list[Reading]:
        self.now_us += PERIOD_US
        self.clock.now_s += 10.0
        return self.sampler.sample(self.now_us, DEADLINE_S, patient=True)


def name_of(case: Case) -> str:
    return case.config.driver


@pytest.fixture
def rigs(hardware: EmulatedHardware) -> Iterator[Callable[[Case], Rig]]:
    before = set(threading.enumerate())
    made: list[Rig] = []

    def make(case: Case) -> Rig:
        made.append(Rig(case, hardware))
        return made[-1]

    yield make
    for rig in made:
        assert rig.sampler.close() == ()
    assert set(threading.enumerate()) <= before


def test_every_driver_has_a_case() -> None:
    assert {case.config.driver for case in CASES} == set(DRIVERS)


@pytest.mark.parametrize("case", CASES, ids=name_of)
def test_a_value_goes_in_and_comes_out(case: Case, rigs: Callable[[Case], Rig]) -> None:
    rig = rigs(case)
    rig.set()
    rig.tick()
    rig.set()
    last = {one.channel: one for one in rig.tick()}
    for quantity, (value, near) in case.values.items():
        one = last[f"{case.config.id}.{quantity}"]
        assert one.good, one
        assert one.value == pytest.approx(value, abs=near)


@pytest.mark.parametrize("case", CASES, ids=name_of)
def test_readings_are_of_its_channels_in_steps_and_in_time(
    case: Case, rigs: Callable[[Case], Rig]
) -> None:
    rig = rigs(case)
    channels = {one.name: one for one in DRIVERS[case.config.driver].channels(case.config)}
    after_us = rig.now_us
    for _ in range(3):
        rig.set()
        for one in rig.tick():
            channel = channels[one.channel]
            assert after_us < one.time_us <= rig.now_us
            assert channel.lowest <= one.value <= channel.highest
            assert one.value == round(one.value / channel.step) * channel.step
        after_us = rig.now_us


BREAKS = [
    pytest.param(case, fault, id=f"{case.config.driver} {fault}")
    for case in CASES
    for fault in case.breaks
]


@pytest.mark.parametrize(("case", "fault"), BREAKS)
def test_every_fault_is_named_within_two_periods(
    case: Case, fault: str, rigs: Callable[[Case], Rig]
) -> None:
    rig = rigs(case)
    rig.set()
    rig.tick()
    act, reason = case.breaks[fault]
    act(rig.hardware)
    found = [one.fault for _ in range(2) for one in rig.tick() if not one.good]
    assert found
    assert set(found) == {reason}
    assert rig.sampler.hung_buses() == ()


# a device on MQTT that has not spoken yet is told by its silence, in its own test
WIRED = [case for case in CASES if case.config.driver != "mqtt-channel"]


@pytest.mark.parametrize("case", WIRED, ids=name_of)
def test_a_part_that_was_never_there_is_a_fault_from_the_first_tick(
    case: Case, hardware: EmulatedHardware
) -> None:
    if case.config.settings.get("line") == 17:
        hardware.line(CHIP, 17).missing = True
    sampler = Sampler([case.config], hardware, HandClock())
    try:
        readings = sampler.sample(START_US, DEADLINE_S, patient=True)
        assert len(readings) == len(DRIVERS[case.config.driver].channels(case.config))
        assert {one.fault for one in readings} == {reasons.NO_ANSWER}
    finally:
        assert sampler.close() == ()


@pytest.mark.parametrize("case", CASES, ids=name_of)
def test_closing_twice_is_once(case: Case, hardware: EmulatedHardware) -> None:
    hardware.fit([case.config])
    sensor = DRIVERS[case.config.driver].open(case.config, hardware)
    sensor.close()
    sensor.close()


@pytest.mark.parametrize("driver", sorted(DRIVERS))
def test_every_key_says_what_it_means_and_refuses_nonsense(driver: str) -> None:
    for key in DRIVERS[driver].keys:
        assert key.meaning, f"{driver} {key.name}"
        with pytest.raises(ValueError, match=r"\S"):
            key.read(object())
    assert DRIVERS[driver].summary


@pytest.mark.parametrize("case", CASES, ids=name_of)
def test_defaults_are_what_their_own_reader_would_take(case: Case) -> None:
    for key in DRIVERS[case.config.driver].keys:
        if isinstance(key.default, int) and not isinstance(key.default, bool):
            assert key.read(key.default) == key.default


def test_drivers_import_no_hardware_library() -> None:
    code = (
        "import sys, sensors.drivers, sensors.hardware, sensors.emulated.hardware;"
        "bad = [m for m in sys.modules if m.split('.')[0] in "
        "('adafruit_bme280', 'adafruit_ads1x15', 'adafruit_mlx90614', 'busio', 'board', 'gpiod',"
        " 'pymodbus', 'serial', 'micropython')];"
        "print(bad); sys.exit(bool(bad))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout + done.stderr
