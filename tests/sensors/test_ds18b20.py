"""The DS18B20 driver against its data sheet and against what the kernel shows of a bad part."""

from __future__ import annotations

from pathlib import Path

import pytest

from sensors import reasons
from sensors.ds18b20 import crc8, decode
from sensors.emulated.ds18b20 import shift_register_crc
from sensors.emulated.hardware import EmulatedHardware
from tests.sensors.support import START_US, config, fault_of, open_part, values

SERIAL = "28-0123456789ab"
PIPE = config("pipe-end", "ds18b20", serial=SERIAL)


def scratchpad(word: int, byte_6: int, configuration: int = 0x7F) -> bytes:
    eight = word.to_bytes(2, "little") + bytes((0x4B, 0x46, configuration, 0xFF, byte_6, 0x10))
    return eight + bytes([crc8(eight)])


@pytest.mark.parametrize(
    ("word", "celsius"),
    [
        (0x07D0, 125.0),
        (0x0550, 85.0),
        (0x0191, 25.0625),
        (0x00A2, 10.125),
        (0x0008, 0.5),
        (0x0000, 0.0),
        (0xFFF8, -0.5),
        (0xFF5E, -10.125),
        (0xFE6F, -25.0625),
        (0xFC90, -55.0),
    ],
)
def test_the_temperature_table_of_the_data_sheet(word: int, celsius: float) -> None:
    # DS18B20 data sheet 19-7487, table 1 (temperature/data relationship), to the bit
    assert decode(scratchpad(word, byte_6=0x10 - (word & 0xF))) == celsius + 273.15


def test_the_checksum_of_a_published_scratchpad() -> None:
    # Linux, Documentation/w1/slaves/w1_therm.rst: 72 01 4b 46 7f ff 0e 10 : crc=57 YES, 23.125 degC
    pad = bytes.fromhex("72014b467fff0e10 57".replace(" ", ""))
    assert crc8(pad[:8]) == pad[8]
    assert shift_register_crc(pad[:8]) == pad[8]
    assert decode(pad) == 23.125 + 273.15


@pytest.mark.parametrize("celsius", [-55.0, -10.5, 0.0, 21.3125, 85.0, 124.9375])
def test_a_probe_comes_back_to_the_bit(hardware: EmulatedHardware, celsius: float) -> None:
    hardware.ds18b20(SERIAL).temperature_k = celsius + 273.15
    read = values(open_part(PIPE, hardware).read(START_US))
    assert read["temperature"] == pytest.approx(celsius + 273.15, abs=0.0051)


def test_an_outlet_can_really_be_at_85_degrees(hardware: EmulatedHardware) -> None:
    sensor = open_part(PIPE, hardware)
    hardware.ds18b20(SERIAL).temperature_k = 85.0 + 273.15
    assert values(sensor.read(START_US))["temperature"] == pytest.approx(358.15)
    hardware.ds18b20(SERIAL).fail("reset")
    assert fault_of(sensor) == reasons.NOT_MEASURED


def test_lower_resolutions_ignore_the_bits_they_leave_undefined() -> None:
    assert decode(scratchpad(0x0197, 0x0C, 0x1F)) == 25.0 + 273.15  # 9 bits: three are undefined


@pytest.mark.parametrize(
    ("fault", "reason"),
    [
        ("silent", reasons.NO_ANSWER),
        ("empty", reasons.NO_ANSWER),
        ("checksum", reasons.BAD_CHECKSUM),
        ("ones", reasons.ALL_ONES),
        ("zeros", reasons.ALL_ZEROS),
        ("reset", reasons.NOT_MEASURED),
        ("starved", reasons.NOT_MEASURED),
    ],
)
def test_every_fault_is_named_and_heals(
    hardware: EmulatedHardware, fault: str, reason: str
) -> None:
    part = hardware.ds18b20(SERIAL)
    sensor = open_part(PIPE, hardware)
    part.fail(fault)
    assert fault_of(sensor) == reason
    part.fail()
    assert values(sensor.read(START_US))["temperature"] == pytest.approx(293.15, abs=0.04)


def test_a_part_of_another_kind_is_refused(hardware: EmulatedHardware) -> None:
    with pytest.raises(ValueError, match=reasons.WRONG_CHIP):
        decode(scratchpad(0x0191, 0x0C, configuration=0x00))


def test_half_a_file_is_no_reading(hardware: EmulatedHardware, tmp_path: Path) -> None:
    sensor = open_part(PIPE, hardware)
    hardware.ds18b20(SERIAL)
    (tmp_path / SERIAL / "w1_slave").write_text("72 01 4b 46", encoding="ascii")
    assert fault_of(sensor) == reasons.NO_ANSWER


@pytest.mark.parametrize("serial", ["28-0123456789AB", "10-0123456789ab", "28-0123", 28])
def test_a_serial_that_is_none_is_refused(serial: object) -> None:
    with pytest.raises(ValueError, match="/sys/bus/w1/devices"):
        config("x", "ds18b20", serial=serial)
