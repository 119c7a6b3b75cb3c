"""The BME280 driver against the data sheet and against every way the part fails."""

from __future__ import annotations

import pytest

from sensors import reasons
from sensors.emulated.bme280 import Calibration, EmulatedBme280
from sensors.emulated.hardware import EmulatedHardware
from sensors.reading import Sensor, SensorFault
from tests.sensors.support import START_US, config, fault_of, open_part, values

AIR = config("intake-air", "bme280", address=0x76)


@pytest.fixture
def part(hardware: EmulatedHardware) -> EmulatedBme280:
    return hardware.bme280(1, 0x76)


@pytest.fixture
def sensor(hardware: EmulatedHardware, part: EmulatedBme280) -> Sensor:
    return open_part(AIR, hardware)


class ExamplePart(EmulatedBme280):
    """Answers with raw words instead of surroundings."""

    words = (415148, 519888, 30000)

    def encode(self, t: int = 1, p: int = 1, h: int = 1) -> bytes:
        pressure, temperature, humidity = self.words
        return (
            (pressure << 4).to_bytes(3, "big")
            + (temperature << 4).to_bytes(3, "big")
            + humidity.to_bytes(2, "big")
        )


def test_the_published_compensation_example_comes_out(hardware: EmulatedHardware) -> None:
    # Bosch Sensortec, compensation example of the pressure sensor with the same words and code
    # (BST-BMP280-DS001, section 3.12): 25.08 degC, 100653.27 Pa. One step of the channels: 0.01 K,
    # 1 Pa (the integer code of the example and the double code differ by 0.02 Pa).
    hardware.i2c(1).parts[0x76] = ExamplePart()
    read = values(open_part(AIR, hardware).read(START_US))
    assert read["temperature"] == pytest.approx(25.08 + 273.15, abs=0.0051)
    assert read["pressure"] == pytest.approx(100653.27, abs=0.51)


@pytest.mark.parametrize("temperature_c", [-39.9, -10.0, 0.0, 21.37, 40.0, 84.9])
@pytest.mark.parametrize("humidity", [0.02, 0.5, 0.98])
@pytest.mark.parametrize("pressure", [30_100.0, 84_500.0, 101_325.0, 109_900.0])
def test_surroundings_come_back_within_the_resolution(
    part: EmulatedBme280, sensor: Sensor, temperature_c: float, humidity: float, pressure: float
) -> None:
    part.temperature_k = temperature_c + 273.15
    part.relative_humidity, part.pressure_pa = humidity, pressure
    read = values(sensor.read(START_US))
    # BST-BME280-DS002, section 1: 0.01 K, 0.008 %RH; 16 bits of pressure at oversampling x1 are
    # 2.62 Pa (section 3.4.2); each half a step, and half a step of the channel
    assert read["temperature"] == pytest.approx(part.temperature_k, abs=0.005 + 0.005)
    assert read["relative_humidity"] == pytest.approx(humidity, abs=0.5 * 0.00016 + 0.00005)
    assert read["pressure"] == pytest.approx(pressure, abs=0.5 * 2.62 + 0.5 + 0.6)


def test_a_reading_is_one_conversion_in_six_operations_or_fewer(
    hardware: EmulatedHardware, sensor: Sensor
) -> None:
    bus = hardware.i2c(1)
    before = bus.operations
    sensor.read(START_US)
    assert 0 < bus.operations - before <= 6


def test_the_three_values_are_of_one_instant_and_the_part_sleeps_after(
    part: EmulatedBme280, sensor: Sensor
) -> None:
    sensor.read(START_US)
    assert part.mode == 0
    assert part.conversions == 1
    sensor.read(START_US + 1)
    assert part.conversions == 2


def test_an_absent_part_does_not_answer(hardware: EmulatedHardware) -> None:
    hardware.i2c(1)
    with pytest.raises(SensorFault, match="intake-air: no answer") as caught:
        open_part(AIR, hardware)
    assert caught.value.reason == reasons.NO_ANSWER


def test_another_chip_on_the_address_is_refused(
    hardware: EmulatedHardware, part: EmulatedBme280
) -> None:
    part.chip_id = 0x58  # a BMP280: no humidity
    with pytest.raises(SensorFault) as caught:
        open_part(AIR, hardware)
    assert caught.value.reason == reasons.WRONG_CHIP
    assert "0x58" in str(caught.value)


def test_a_part_that_falls_silent_is_a_fault_and_heals(
    part: EmulatedBme280, sensor: Sensor
) -> None:
    part.silent = True
    assert fault_of(sensor) == reasons.NO_ANSWER
    part.silent = False
    assert values(sensor.read(START_US))["temperature"] == pytest.approx(293.15)


@pytest.mark.parametrize("opened", [True, False])
@pytest.mark.parametrize("high", [True, False])
def test_dead_lines_are_named(
    hardware: EmulatedHardware, part: EmulatedBme280, opened: bool, high: bool
) -> None:
    reason = reasons.ALL_ONES if high else reasons.ALL_ZEROS
    sensor = open_part(AIR, hardware) if opened else None
    part.lines_high, part.lines_low = high, not high
    if sensor is not None:
        assert fault_of(sensor) == reason
    else:
        with pytest.raises(SensorFault) as caught:
            open_part(AIR, hardware)
        assert caught.value.reason == reason


def test_a_conversion_that_never_ends_is_given_up(
    hardware: EmulatedHardware, part: EmulatedBme280, sensor: Sensor
) -> None:
    part.stuck_busy = True
    before = hardware.i2c(1).time_s
    assert fault_of(sensor) == reasons.STAYS_BUSY
    assert hardware.i2c(1).time_s - before < 0.05


def test_a_part_that_lost_power_is_a_fault_once_and_then_set_up_anew(
    part: EmulatedBme280, sensor: Sensor
) -> None:
    sensor.read(START_US)
    part.brown_out()
    assert fault_of(sensor) == reasons.WAS_RESET
    part.temperature_k = 300.0
    assert values(sensor.read(START_US))["temperature"] == pytest.approx(300.0, abs=0.01)


def test_a_part_swapped_for_another_is_read_with_its_own_calibration(
    part: EmulatedBme280, sensor: Sensor
) -> None:
    sensor.read(START_US)
    part.replace(Calibration(t=(28200, 26500, 50), h=(75, 355, 0, 330, 0, 30)))
    part.temperature_k = 285.0
    assert fault_of(sensor) == reasons.WAS_RESET
    read = values(sensor.read(START_US))
    assert read["temperature"] == pytest.approx(285.0, abs=0.01)
    assert read["relative_humidity"] == pytest.approx(0.5, abs=2e-4)


@pytest.mark.parametrize("bit", [0, 13, 30, 63])
def test_a_bit_flipped_on_the_way_is_seen(part: EmulatedBme280, sensor: Sensor, bit: int) -> None:
    part.flipped_data_bit = bit
    assert fault_of(sensor) == reasons.DOES_NOT_REPEAT


@pytest.mark.parametrize("bit", [0, 77, 191])
def test_a_bit_flipped_in_the_calibration_is_seen_at_opening(
    hardware: EmulatedHardware, part: EmulatedBme280, bit: int
) -> None:
    part.flipped_calibration_bit = bit
    with pytest.raises(SensorFault) as caught:
        open_part(AIR, hardware)
    assert caught.value.reason == reasons.CALIBRATION


@pytest.mark.parametrize(
    "words",
    [
        (0x80000, 0x80000, 30000),
        (415148, 0x80000, 0x8000),
        (0x80000, 0x80000, 0x8000),
        (0, 519888, 30000),
        (415148, 0xFFFFF, 30000),
        (415148, 519888, 0xFFFF),
    ],
)
def test_a_skipped_measurement_is_refused(
    hardware: EmulatedHardware, words: tuple[int, int, int]
) -> None:
    # BST-BME280-DS002, section 5.4.7 to 5.4.9: the registers' values when not measured
    example = ExamplePart()
    example.words = words
    hardware.i2c(1).parts[0x76] = example
    assert fault_of(open_part(AIR, hardware)) == reasons.NOT_MEASURED


def test_one_word_at_its_power_on_value_can_be_true(hardware: EmulatedHardware) -> None:
    example = ExamplePart()
    example.words = (415148, 0x80000, 30000)
    hardware.i2c(1).parts[0x76] = example
    read = values(open_part(AIR, hardware).read(START_US))
    # computed with the data sheet's code by hand, once, for the example's calibration
    assert read["temperature"] == pytest.approx(273.15 + 26.46, abs=0.01)


def test_a_value_beyond_the_operating_range_is_bad(part: EmulatedBme280, sensor: Sensor) -> None:
    part.pressure_pa = 20_000.0
    pressure = sensor.read(START_US)[2]
    assert not pressure.good
    assert pressure.fault.startswith("out of range")


def test_close_may_be_called_twice_and_a_read_opens_again(sensor: Sensor) -> None:
    sensor.close()
    sensor.close()
    assert len(sensor.read(START_US)) == 3


def test_a_bit_that_changed_in_the_parts_memory_is_seen_when_it_is_opened_again(
    part: EmulatedBme280, sensor: Sensor
) -> None:
    sensor.read(START_US)
    part.damage_calibration(0x8B, 5)
    part.brown_out()
    assert fault_of(sensor) == reasons.WAS_RESET
    for _ in range(3):
        assert fault_of(sensor) == reasons.CALIBRATION
    part.damage_calibration(0x8B, 5)
    assert values(sensor.read(START_US))["temperature"] == pytest.approx(293.15, abs=0.01)


def test_twelve_channels_take_less_than_60_ms_of_bus_time(hardware: EmulatedHardware) -> None:
    # the waits for conversions counted in; SCL at 100 kHz, the kernel's default on a Pi
    readers = []
    for number in (1, 3):
        for address in (0x76, 0x77):
            one = config(f"air-{number}-{address}", "bme280", bus=number, address=address)
            hardware.fit([one])
            readers.append(open_part(one, hardware))
    buses = [hardware.i2c(number) for number in (1, 3)]
    before = [bus.busy_s for bus in buses]
    waited = buses[0].waited_s
    channels = sum(len(sensor.read(START_US)) for sensor in readers)
    assert channels == 12
    busy_s = sum(bus.busy_s - first for bus, first in zip(buses, before, strict=True))
    assert busy_s + (buses[0].waited_s - waited) < 0.060
