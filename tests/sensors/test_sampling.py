"""The sampler: a thread a bus, deadlines, faults that heal, and nothing left behind."""

from __future__ import annotations

import threading
from collections.abc import Iterator

import pytest

from sensors import reasons
from sensors.emulated.hardware import EmulatedHardware
from sensors.reading import Reading, SensorFault
from sensors.registry import DRIVERS, SensorConfig
from sensors.sampling import REOPEN_AFTER, Sampler
from tests.sensors.support import SECOND_US, START_US, HandClock, config, is_bad

SERIAL = "28-0123456789ab"
INTAKE = config("intake-air", "bme280", address=0x76)
BOOTH = config("booth-air", "bme280", bus=3, address=0x77)
GAUGE = config("tank-gauge", "pressure-transducer", input=0, supply_input=3, range="0-12 bar")
PIPE = config("pipe-end", "ds18b20", serial=SERIAL)
MOTOR = config("motor", "contact", line=17)
ALL = [INTAKE, BOOTH, GAUGE, PIPE, MOTOR]
DEADLINE_S = 20.0  # real seconds; reached only where a test makes a bus hang
SHORT_S = 0.05


@pytest.fixture
def clock() -> HandClock:
    return HandClock()


@pytest.fixture
def threads() -> Iterator[None]:
    before = set(threading.enumerate())
    yield
    assert set(threading.enumerate()) <= before


class Rig:
    """A sampler on emulated hardware, ticked by hand."""

    def __init__(
        self, hardware: EmulatedHardware, clock: HandClock, sensors: list[SensorConfig]
    ) -> None:
        self.hardware = hardware
        self.clock = clock
        self.put = hardware.fit(sensors)
        self.sampler = Sampler(sensors, hardware, clock)
        self.now_us = START_US

    def tick(self, deadline_s: float = DEADLINE_S, patient: bool = True) -> list[Reading]:
        self.now_us += 10 * SECOND_US
        self.clock.now_s += 10.0
        return self.sampler.sample(self.now_us, deadline_s, patient=patient)


@pytest.fixture
def rig(threads: None, hardware: EmulatedHardware, clock: HandClock) -> Iterator[Rig]:
    made = Rig(hardware, clock, ALL)
    yield made
    assert made.sampler.close() == ()


def test_every_channel_is_read_at_the_ticks_time_in_the_sensors_order(rig: Rig) -> None:
    rig.put["tank-gauge.pressure"](8e5, 0)
    readings = rig.tick()
    assert [one.channel for one in readings] == [
        channel.name for sensor in ALL for channel in DRIVERS[sensor.driver].channels(sensor)
    ]
    assert all(one.good and one.time_us == rig.now_us for one in readings)


def test_one_thread_owns_each_bus(rig: Rig) -> None:
    rig.tick()
    names = sorted(t.name for t in threading.enumerate() if t.name.startswith("bus "))
    assert names == ["bus gpio /dev/gpiochip0", "bus i2c-1", "bus i2c-3", "bus one-wire"]


def test_a_sensor_that_fails_gives_bad_readings_and_harms_no_other(rig: Rig) -> None:
    rig.tick()
    rig.hardware.bme280(1, 0x76).silent = True
    readings = rig.tick()
    bad = [one for one in readings if not one.good]
    assert [one.channel for one in bad] == [
        "intake-air.temperature",
        "intake-air.relative_humidity",
        "intake-air.pressure",
    ]
    assert all(is_bad(one, reasons.NO_ANSWER) and one.time_us == rig.now_us for one in bad)
    assert len(readings) == len(bad) + 6


def test_a_sensor_heals_by_giving_good_readings(rig: Rig) -> None:
    part = rig.hardware.bme280(1, 0x76)
    part.silent = True
    for _ in range(2 * REOPEN_AFTER):
        assert not rig.tick()[0].good
    part.silent = False
    assert all(one.good for one in rig.tick())


def test_a_part_is_opened_anew_after_three_faults(
    rig: Rig, monkeypatch: pytest.MonkeyPatch
) -> None:
    opened = []
    original = DRIVERS["bme280"].open

    def counting(one: SensorConfig, hardware: object) -> object:
        opened.append(one.id)
        return original(one, hardware)  # type: ignore[arg-type]  # passed through

    object.__setattr__(DRIVERS["bme280"], "open", counting)
    try:
        rig.tick()
        rig.hardware.bme280(1, 0x76).stuck_busy = True
        for _ in range(REOPEN_AFTER):
            assert is_bad(rig.tick()[0], reasons.STAYS_BUSY)
        assert opened.count("intake-air") == 1
        rig.tick()
        assert opened.count("intake-air") == 2
        assert opened.count("booth-air") == 1
    finally:
        object.__setattr__(DRIVERS["bme280"], "open", original)


def test_a_bus_that_hangs_costs_its_own_sensors_only(rig: Rig) -> None:
    rig.tick()
    release = threading.Event()
    rig.hardware.i2c(1).hang = release
    try:
        readings = rig.tick(SHORT_S)
        hung_us, hung_s = rig.now_us, rig.clock.now_s
        bad = {one.channel.split(".")[0] for one in readings if not one.good}
        assert bad == {"intake-air", "tank-gauge"}
        assert all(is_bad(one, reasons.BUS_HANGS) for one in readings if not one.good)
        (hung,) = rig.sampler.hung_buses()
        assert (hung.name, hung.since_us, hung.since_s) == ("i2c-1", hung_us, hung_s)
        # it is left alone: no second transfer is begun
        operations = rig.hardware.i2c(1).operations
        assert not rig.tick(SHORT_S)[0].good
        assert rig.hardware.i2c(1).operations == operations
        assert rig.sampler.hung_buses() == (hung,)
    finally:
        rig.hardware.i2c(1).hang = None
        release.set()


def test_what_a_bus_says_late_is_dropped_and_then_it_is_read_again(rig: Rig) -> None:
    rig.tick()
    release = threading.Event()
    rig.hardware.i2c(1).hang = release
    rig.hardware.bme280(1, 0x76).temperature_k = 310.0
    rig.tick(SHORT_S)
    rig.hardware.i2c(1).hang = None
    release.set()
    _until(lambda: not rig.sampler.hung_buses())
    rig.hardware.bme280(1, 0x76).temperature_k = 290.0
    readings = rig.tick()
    assert readings[0].value == pytest.approx(290.0, abs=0.01)
    assert readings[0].time_us == rig.now_us
    assert rig.sampler.hung_buses() == ()


def _until(true: object) -> None:
    """Give other threads the processor until something is so."""
    assert callable(true)
    pause = threading.Event()
    for _ in range(2000):
        if true():
            return
        pause.wait(0.001)
    raise AssertionError("it never came to be")


def test_a_slow_bus_holds_no_tick_up_and_tells_its_own_time(
    threads: None, hardware: EmulatedHardware, clock: HandClock
) -> None:
    rig = Rig(hardware, clock, [PIPE, MOTOR])
    gate = threading.Event()
    original = DRIVERS["ds18b20"].open

    class Slow:
        def __init__(self, one: SensorConfig, hardware: object) -> None:
            self.inner = original(one, hardware)  # type: ignore[arg-type]  # passed through
            self.id, self.channels = self.inner.id, self.inner.channels

        def read(self, now_us: int) -> object:
            gate.wait()
            return self.inner.read(now_us)

        def close(self) -> None:
            self.inner.close()

    object.__setattr__(DRIVERS["ds18b20"], "open", Slow)
    try:
        first = rig.tick(patient=False)
        assert [one.channel for one in first] == ["motor.contact"]
        asked_us = rig.now_us
        clock.now_s += 0.75
        gate.set()
        bus = rig.sampler._buses["one-wire"]
        _until(lambda: bus.job is not None and bus.job.done)
        clock.now_s -= 0.75
        pipe = next(one for one in rig.tick(patient=False) if one.channel.startswith("pipe"))
        assert pipe.good
        assert pipe.time_us == asked_us + 750_000
    finally:
        gate.set()
        object.__setattr__(DRIVERS["ds18b20"], "open", original)
        assert rig.sampler.close() == ()


def test_a_slow_bus_that_never_ends_is_hung_after_its_own_limit(
    threads: None, hardware: EmulatedHardware, clock: HandClock, monkeypatch: pytest.MonkeyPatch
) -> None:
    rig = Rig(hardware, clock, [PIPE])
    gate = threading.Event()
    monkeypatch.setattr("sensors.ds18b20.Ds18b20.read", lambda _self, _now_us: gate.wait() and None)
    try:
        assert rig.tick(patient=False) == []
        assert rig.sampler.hung_buses() == ()
        assert is_bad(rig.tick(patient=False)[0], reasons.BUS_HANGS)  # 10 s later: limit is 7 s
        assert [one.name for one in rig.sampler.hung_buses()] == ["one-wire"]
    finally:
        gate.set()
        rig.sampler.close()


def test_a_mistake_in_a_driver_is_a_fault_and_not_the_end(
    rig: Rig, monkeypatch: pytest.MonkeyPatch
) -> None:
    def broken(*_: object) -> None:
        raise TypeError("a mistake")

    monkeypatch.setattr("sensors.bme280.Bme280._measure", broken)
    assert is_bad(rig.tick()[0], reasons.DRIVER_FAILED)
    monkeypatch.undo()
    assert rig.tick()[0].good


def test_edges_of_a_contact_come_with_the_tick_that_follows_them(rig: Rig) -> None:
    rig.tick()
    rig.put["motor.contact"](1.0, rig.now_us + 3 * SECOND_US)
    motor = [one for one in rig.tick() if one.channel == "motor.contact"]
    assert [(one.value, one.time_us - rig.now_us) for one in motor] == [
        (1.0, -7 * SECOND_US + 20_000),
        (1.0, 0),
    ]


def test_closing_says_which_bus_still_hangs(
    hardware: EmulatedHardware, clock: HandClock, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("sensors.sampling.CLOSE_WAIT_S", 0.01)
    rig = Rig(hardware, clock, [INTAKE])
    release = threading.Event()
    hardware.i2c(1).hang = release
    rig.tick(SHORT_S)
    assert rig.sampler.close() == ("i2c-1",)
    release.set()
    monkeypatch.setattr("sensors.sampling.CLOSE_WAIT_S", 5.0)
    assert rig.sampler.close() == ()


def test_a_closed_sampler_refuses_to_sample(hardware: EmulatedHardware, clock: HandClock) -> None:
    sampler = Sampler([], hardware, clock)
    assert sampler.sample(START_US, 1.0) == []
    sampler.close()
    with pytest.raises(RuntimeError, match="closed"):
        sampler.sample(START_US, 1.0)


def test_a_fault_names_the_sensor_and_what_was_found() -> None:
    fault = SensorFault("tank-gauge", reasons.SUPPLY, "4.20 V")
    assert str(fault) == "tank-gauge: supply out of range (4.20 V)"
