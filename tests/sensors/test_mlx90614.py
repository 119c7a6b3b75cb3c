"""The infrared thermometer: its checksum, its counts and its faults."""

from __future__ import annotations

import pytest

from sensors import reasons
from sensors.emulated.hardware import EmulatedHardware
from sensors.emulated.mlx90614 import EmulatedMlx90614, long_division_pec
from sensors.mlx90614 import packet_error_code
from sensors.reading import Sensor, SensorFault
from tests.sensors.support import START_US, config, fault_of, open_part, values

PANEL = config("panel", "mlx90614")


@pytest.fixture
def part(hardware: EmulatedHardware) -> EmulatedMlx90614:
    return hardware.mlx90614(1, 0x5A)


@pytest.fixture
def sensor(hardware: EmulatedHardware, part: EmulatedMlx90614) -> Sensor:
    return open_part(PANEL, hardware)


def test_the_checksum_example_of_the_data_sheet() -> None:
    # MLX90614 data sheet 3901090614, section 8.4.3.1 (read word example): B4 07 B5 D2 3A -> 30
    message = bytes.fromhex("B407B5D23A")
    assert packet_error_code(message) == 0x30
    assert long_division_pec(message) == 0x30


def test_the_checksum_of_the_crc_catalogue() -> None:
    # CRC-8/SMBUS, check value over "123456789" in the CRC RevEng catalogue (from memory): 0xF4
    assert packet_error_code(b"123456789") == 0xF4


def test_the_word_of_the_example_is_its_temperature(part: EmulatedMlx90614, sensor: Sensor) -> None:
    # the same example: 0x3AD2 counts of 0.02 K are 301.16 K
    part.object_k = 301.16
    assert values(sensor.read(START_US))["temperature"] == pytest.approx(0x3AD2 * 0.02, abs=1e-9)


@pytest.mark.parametrize("celsius", [-70.0, -0.02, 0.0, 21.34, 379.9])
def test_temperatures_come_back_within_a_count(
    part: EmulatedMlx90614, sensor: Sensor, celsius: float
) -> None:
    part.object_k = celsius + 273.15
    found = values(sensor.read(START_US))["temperature"]
    assert found == pytest.approx(celsius + 273.15, abs=0.0101)


def test_another_chip_on_the_address_fails_the_checksum(hardware: EmulatedHardware) -> None:
    hardware.i2c(1).parts[0x5A] = EmulatedMlx90614(address=0x77)
    assert fault_of(open_part(PANEL, hardware)) == reasons.BAD_CHECKSUM


@pytest.mark.parametrize(
    ("attribute", "value", "reason"),
    [
        ("silent", True, reasons.NO_ANSWER),
        ("lines_high", True, reasons.ALL_ONES),
        ("lines_low", True, reasons.ALL_ZEROS),
        ("bad_checksum", True, reasons.BAD_CHECKSUM),
        ("flipped_data_bit", 3, reasons.BAD_CHECKSUM),
        ("flipped_data_bit", 15, reasons.BAD_CHECKSUM),
        ("not_valid", True, reasons.NOT_MEASURED),
    ],
)
def test_every_fault_is_named_and_heals(
    part: EmulatedMlx90614, sensor: Sensor, attribute: str, value: object, reason: str
) -> None:
    before = getattr(part, attribute)
    setattr(part, attribute, value)
    assert fault_of(sensor) == reason
    setattr(part, attribute, before)
    assert values(sensor.read(START_US))["temperature"] == pytest.approx(293.15, abs=0.011)


def test_an_absent_part_does_not_answer(hardware: EmulatedHardware) -> None:
    with pytest.raises(SensorFault) as caught:
        open_part(PANEL, hardware)
    assert caught.value.reason == reasons.NO_ANSWER
