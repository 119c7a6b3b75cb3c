"""Every way a part fails, through the whole daemon: named in two periods, nothing left behind."""

from __future__ import annotations

import math
import threading
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from daemon.clock import SystemClock
from daemon.shell import Shell
from daemon.site.reader import parse_site
from daemon.site.types import Site
from daemon.store.store import Store
from sensors import reasons
from sensors.dew_point_modbus import port_of
from sensors.emulated.hardware import EmulatedHardware
from sensors.reading import Reading
from sensors.registry import DRIVERS, SensorConfig
from sensors.sampling import HungBus, Sampler
from tests.daemon.shops import BEGUN_US, PERIOD_US
from tests.daemon.test_shell import HandClock
from tests.sensors.contract_cases import CASES, SERIAL, Case, modbus

LINE = """
[[sensor]]
id = "any"
driver = "ds18b20"
serial = "28-0123456789ff"

[model]
members = 16
"""
DEADLINE_S = 20.0


def shop(*sensors: SensorConfig) -> Site:
    """A tank and nothing else, and these sensors."""
    site = parse_site(LINE, "line.toml")
    channels = {
        channel.name: channel for one in sensors for channel in DRIVERS[one.driver].channels(one)
    }
    return replace(site, sensors=sensors, channels=channels)


class Patient:
    """Waits for slow buses too, as the hand clock's periods take no time."""

    def __init__(self, sampler: Sampler) -> None:
        self._sampler = sampler

    def sample(self, now_us: int, deadline_s: float) -> list[Reading]:
        return self._sampler.sample(now_us, DEADLINE_S, patient=True)

    def hung_buses(self) -> tuple[HungBus, ...]:
        return self._sampler.hung_buses()


class Rig:
    """A shell over real drivers and emulated parts."""

    def __init__(self, path: Path, case: Case, hardware: EmulatedHardware) -> None:
        self.case, self.hardware = case, hardware
        site = shop(case.config)
        self.put = hardware.fit([case.config])
        self.clock = HandClock(BEGUN_US)
        self.sampler = Sampler(site.sensors, hardware, SystemClock().monotonic)
        self.store = Store.open(path, site.channels)
        self.shell = Shell(site, self.clock, Patient(self.sampler), self.store)
        self.number = 0

    def tick(self) -> None:
        self.clock.wall_us = BEGUN_US + self.number * PERIOD_US
        self.shell.tick(self.clock.wall_us)
        self.number += 1

    def set(self) -> None:
        at_us = self.clock.wall_us + self.case.set_after_us
        for quantity, (value, _) in self.case.values.items():
            self.put[f"{self.case.config.id}.{quantity}"](value, at_us)

    def close(self) -> None:
        assert self.sampler.close() == ()
        self.store.close()


@pytest.fixture
def rigs(tmp_path: Path, hardware: EmulatedHardware) -> Iterator[Callable[[Case], Rig]]:
    before = set(threading.enumerate())
    made: list[Rig] = []

    def make(case: Case) -> Rig:
        made.append(Rig(tmp_path / "line.db", case, hardware))
        return made[-1]

    yield make
    for rig in made:
        rig.close()
    assert set(threading.enumerate()) <= before
    assert hardware.locked_buses() == ()


@pytest.fixture
def hardware() -> Iterator[EmulatedHardware]:
    with EmulatedHardware() as parts:
        yield parts


BREAKS = [
    pytest.param(case, fault, id=f"{case.config.driver} {fault}")
    for case in CASES
    for fault in case.breaks
]


@pytest.mark.parametrize(("case", "fault"), BREAKS)
def test_every_fault_is_on_record_with_its_name_within_two_periods(
    case: Case, fault: str, rigs: Callable[[Case], Rig]
) -> None:
    rig = rigs(case)
    for _ in range(3):
        rig.set()
        rig.tick()
    act, reason = case.breaks[fault]
    act(rig.hardware)
    shown = set()
    for _ in range(2):
        rig.tick()
        shown |= {one.fault for one in rig.shell.health().channels if one.fault}
    assert shown == {reason}
    after_us = BEGUN_US + 2 * PERIOD_US
    for channel in DRIVERS[case.config.driver].channels(case.config):
        series = rig.shell.readings(channel.name, after_us + 1, after_us + 10 * PERIOD_US)
        assert reason in series.faults
        told = zip(series.values, series.faults, strict=True)
        assert all(math.isnan(value) for value, bad in told if bad)
    assert rig.shell.health().last_tick_us == rig.clock.wall_us  # the tick went on
    assert rig.sampler.hung_buses() == ()


def by_driver(driver: str) -> Case:
    return next(case for case in CASES if case.config.driver == driver)


def another_chip(hardware: EmulatedHardware) -> None:
    """A BMP280, which has no humidity, is plugged in where the BME280 was."""
    part = hardware.bme280(1, 0x76)
    part.brown_out()
    part.chip_id = 0x58


def damaged(hardware: EmulatedHardware) -> None:
    part = hardware.bme280(1, 0x76)
    part.damage_calibration(0x8B, 5)
    part.brown_out()


@pytest.mark.parametrize(
    ("driver", "act", "reason"),
    [
        ("bme280", another_chip, reasons.WRONG_CHIP),
        ("bme280", damaged, reasons.CALIBRATION),
        ("ds18b20", lambda h: h.ds18b20(SERIAL).fail("starved"), reasons.NOT_MEASURED),
        ("dew-point-loop", lambda h: _input(h, 2, "wire_off", True), reasons.SIGNAL_LOW),
        ("pressure-loop", lambda h: _input(h, 1, "failed_ma", 3.5), reasons.SIGNAL_LOW),
        ("dew-point-modbus", lambda h: modbus(h).registers.clear(), reasons.ERROR_ANSWER),
    ],
)
def test_what_is_found_when_a_part_is_opened_anew_is_named_in_two_periods(
    driver: str,
    act: Callable[[EmulatedHardware], None],
    reason: str,
    rigs: Callable[[Case], Rig],
) -> None:
    rig = rigs(by_driver(driver))
    rig.set()
    rig.tick()
    act(rig.hardware)
    rig.tick()
    rig.tick()
    assert {one.fault for one in rig.shell.health().channels} == {reason}


def _input(hardware: EmulatedHardware, number: int, name: str, value: object) -> None:
    setattr(hardware.ads1115(1, 0x48).inputs[number], name, value)


def test_a_contact_that_bounces_closes_once(rigs: Callable[[Case], Rig]) -> None:
    rig = rigs(by_driver("contact"))
    rig.tick()
    rig.tick()
    line = rig.hardware.line("/dev/gpiochip0", 17)
    line.bounce((rig.clock.wall_us + 3_000_000) * 1000, 0, times=5, every_ns=400_000)
    rig.tick()
    series = rig.shell.readings("switch.contact", BEGUN_US, rig.clock.wall_us + 1)
    assert series.values.tolist() == [0.0, 0.0, 1.0, 1.0]
    assert not any(series.faults)
    closed_after_us = int(series.times_us[2]) - (BEGUN_US + PERIOD_US)
    assert 3_000_000 <= closed_after_us <= 3_050_000


HEALING = [case for case in CASES if "silent" in case.breaks]


@pytest.mark.parametrize("case", HEALING, ids=lambda case: case.config.driver)
def test_a_part_that_comes_back_is_opened_anew_and_its_alarm_returns(
    case: Case, rigs: Callable[[Case], Rig]
) -> None:
    rig = rigs(case)
    rig.set()
    rig.tick()
    case.breaks["silent"][0](rig.hardware)
    for _ in range(5):
        rig.tick()
    alarm = f"{case.config.id}-sensor-fault"
    (raised,) = [each for each in rig.shell.alarms() if each.id == alarm]
    assert raised.state == "unacknowledged"
    assert "no answer" in raised.text
    heal(rig)
    for _ in range(8):
        rig.set()
        rig.tick()
    (returned,) = [each for each in rig.shell.alarms() if each.id == alarm]
    assert returned.state == "returned unacknowledged"
    health = rig.shell.health()
    assert not [one for one in health.channels if one.fault]


def heal(rig: Rig) -> None:
    """Plug the part in again."""
    config, hardware = rig.case.config, rig.hardware
    if config.driver == "ds18b20":
        hardware.ds18b20(config.settings["serial"]).fail("")
    elif config.driver == "dew-point-modbus":
        hardware.modbus(port_of(config)).device(config.settings["device"]).silent = False
    else:
        part = hardware.i2c(1).parts[config.settings["address"]]
        part.silent = False  # type: ignore[attr-defined]  # every emulated part has it


def test_a_hung_bus_is_in_health_within_two_periods_and_ticks_go_on(tmp_path: Path) -> None:
    before = set(threading.enumerate())
    site = parse_site(
        '[site]\nsample_every = "1 s"\n[[sensor]]\nid = "air"\ndriver = "bme280"\n'
        '[[sensor]]\nid = "motor"\ndriver = "contact"\nline = 17\n[model]\nmembers = 16\n',
        "line.toml",
    )
    with EmulatedHardware() as hardware:
        hardware.fit(site.sensors)
        clock = HandClock(BEGUN_US)
        sampler = Sampler(site.sensors, hardware, SystemClock().monotonic)
        with Store.open(tmp_path / "line.db", site.channels) as store:
            shell = Shell(site, clock, sampler, store)

            def tick(number: int) -> None:
                clock.wall_us = BEGUN_US + number * 1_000_000
                shell.tick(clock.wall_us)

            tick(0)
            tick(1)
            assert shell.health().ok
            release = hardware.i2c(1).hang = threading.Event()
            tick(2)
            tick(3)
            health = shell.health()
            assert any("i2c-1 has not answered since" in each for each in health.problems)
            faults = {one.channel: one.fault for one in health.channels}
            assert faults["air.pressure"] == "bus does not answer"
            assert faults["motor.contact"] == ""  # another bus
            assert health.last_tick_us == clock.wall_us
            hardware.i2c(1).hang = None
            release.set()
            for number in range(4, 40):
                tick(number)
                if shell.health().ok:
                    break
            assert shell.health().ok
        assert sampler.close() == ()
    assert set(threading.enumerate()) <= before
