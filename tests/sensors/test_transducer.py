"""The pressure transducer through the ADS1115: codes, the rail, and every way both fail."""

from __future__ import annotations

import math

import pytest

from sensors import reasons
from sensors.adc import VOLTS_PER_COUNT, Adc
from sensors.emulated.ads1115 import EmulatedAds1115, Rail, Transducer
from sensors.emulated.hardware import EmulatedHardware
from sensors.reading import Sensor, SensorFault
from sensors.registry import DRIVERS
from tests.sensors.support import START_US, config, fault_of, open_part, values

GAUGE = config(
    "tank-gauge",
    "pressure-transducer",
    address=0x48,
    input=0,
    supply_input=3,
    divider=0.6667,
    range="0-12 bar",
)
BLIND = config("tank-gauge", "pressure-transducer", input=0, divider=0.6667, range="0-12 bar")


@pytest.fixture
def adc(hardware: EmulatedHardware) -> EmulatedAds1115:
    hardware.fit([GAUGE])
    return hardware.ads1115(1, 0x48)


@pytest.fixture
def part(adc: EmulatedAds1115) -> Transducer:
    return adc.transducer(0, 0.0, 12e5)


@pytest.fixture
def sensor(hardware: EmulatedHardware, part: Transducer) -> Sensor:
    return open_part(GAUGE, hardware)


@pytest.mark.parametrize(
    ("volts", "code"),
    [(-0.000125, 0xFFFF), (0.0, 0x0000), (0.000125, 0x0001), (2.048, 0x4000), (4.1, 0x7FFF)],
)
def test_codes_are_those_of_the_data_sheet(
    adc: EmulatedAds1115, hardware: EmulatedHardware, volts: float, code: int
) -> None:
    # SBAS444, section 8.5.2 and table 4: one count is full scale / 2^15, -1 count is 0xFFFF, at
    # and above full scale 0x7FFF
    adc.supply_v = 5.0
    adc.inputs[1] = Rail(supply_v=volts, divider=1.0)
    bus = hardware.i2c(1)
    bus.writeto(0x48, bytes([1, 0b1101_0011, 0b1110_0011]))  # input 1, 4.096 V, single, 860/s
    hardware.wait(0.002)
    answer = bytearray(2)
    bus.writeto_then_readfrom(0x48, bytes([0]), answer)
    assert int.from_bytes(answer, "big") == code


def test_a_count_is_125_microvolts() -> None:
    # SBAS444, table 3: 125 uV at 4.096 V
    assert pytest.approx(125e-6, rel=1e-12) == VOLTS_PER_COUNT


@pytest.mark.parametrize("bar", [0.0, 0.37, 6.0, 8.0, 11.99])
@pytest.mark.parametrize("supply_v", [4.6, 5.0, 5.3])
def test_pressure_comes_back_whatever_the_rail(
    adc: EmulatedAds1115, part: Transducer, sensor: Sensor, bar: float, supply_v: float
) -> None:
    part.pressure_pa, adc.rail.supply_v = bar * 1e5, supply_v
    # half a count of 125 uV on signal and rail each: 12 bar / (0.8 * 5 V * 0.6667 / 125 uV) = 56 Pa
    # a count, and as much again for the rail; half the channel's step of 10 Pa
    assert values(sensor.read(START_US))["pressure"] == pytest.approx(bar * 1e5, abs=70.0)


def test_without_the_rail_five_volts_are_taken_and_the_channel_says_how_much_worse(
    hardware: EmulatedHardware, adc: EmulatedAds1115, part: Transducer
) -> None:
    part.pressure_pa, adc.rail.supply_v = 8e5, 4.75
    blind = open_part(BLIND, hardware)
    (channel,) = blind.channels
    error = values(blind.read(START_US))["pressure"] - 8e5
    assert -channel.give_or_take < error < -20_000
    (seeing,) = DRIVERS["pressure-transducer"].channels(GAUGE)
    assert seeing.give_or_take == pytest.approx(0.015 * 12e5)
    assert channel.give_or_take > 3 * seeing.give_or_take
    assert seeing.gauge


def test_an_absolute_range_gives_an_absolute_channel() -> None:
    one = config("x", "pressure-transducer", input=0, range="0-10 bar abs")
    (channel,) = DRIVERS["pressure-transducer"].channels(one)
    assert not channel.gauge


@pytest.mark.parametrize("supply_v", [4.2, 4.45, 5.45, 5.6, 9.0])
def test_a_sagging_or_high_rail_is_named(
    adc: EmulatedAds1115, sensor: Sensor, supply_v: float
) -> None:
    adc.rail.supply_v = supply_v
    assert fault_of(sensor) == reasons.SUPPLY


def test_a_wire_off_is_a_signal_below_the_range(part: Transducer, sensor: Sensor) -> None:
    part.wire_off = True
    assert fault_of(sensor) == reasons.SIGNAL_LOW


def test_a_pressure_far_above_the_range_is_named(part: Transducer, sensor: Sensor) -> None:
    part.pressure_pa = 14e5
    assert fault_of(sensor) == reasons.SIGNAL_HIGH


@pytest.mark.parametrize(("own_supply_v", "volts"), [(5.0, 4.2), (3.3, 3.61), (3.3, 5.0)])
def test_a_voltage_beyond_the_inputs_is_no_reading(
    hardware: EmulatedHardware, adc: EmulatedAds1115, own_supply_v: float, volts: float
) -> None:
    # SBAS444, section 6.1: no input more than 0.3 V above the supply
    adc.supply_v = own_supply_v
    adc.inputs[1] = Rail(supply_v=volts, divider=1.0)
    with pytest.raises(SensorFault, match="more than the converter can take"):
        Adc("x", hardware, 1, 0x48).volts(1)


def test_an_absent_converter_does_not_answer(hardware: EmulatedHardware) -> None:
    with pytest.raises(SensorFault) as caught:
        open_part(GAUGE, hardware)
    assert caught.value.reason == reasons.NO_ANSWER


def test_faults_of_the_converter_are_named_and_heal(
    adc: EmulatedAds1115, part: Transducer, sensor: Sensor
) -> None:
    part.pressure_pa = 8e5
    for attribute, reason in [
        ("silent", reasons.NO_ANSWER),
        ("lines_high", reasons.ALL_ONES),
        ("lines_low", reasons.ALL_ZEROS),
        ("stuck_busy", reasons.STAYS_BUSY),
    ]:
        setattr(adc, attribute, True)
        assert fault_of(sensor) == reason
        setattr(adc, attribute, False)
        assert math.isclose(values(sensor.read(START_US))["pressure"], 8e5, abs_tol=70)


@pytest.mark.parametrize("bit", [0, 4, 15])
def test_a_bit_flipped_on_the_way_is_seen(
    adc: EmulatedAds1115, part: Transducer, sensor: Sensor, bit: int
) -> None:
    part.pressure_pa = 5e5
    adc.flipped_data_bit = bit
    assert fault_of(sensor) == reasons.DOES_NOT_REPEAT


def test_a_reset_between_conversion_and_result_is_named(
    adc: EmulatedAds1115, sensor: Sensor
) -> None:
    adc.resets_while_converting = True
    assert fault_of(sensor) == reasons.WAS_RESET


@pytest.mark.parametrize(
    ("text", "lowest", "highest", "gauge"),
    [
        ("0-12 bar", 0.0, 12e5, True),
        ("0 to 150 psi", 0.0, 1_034_213.6, True),
        ("0-10 bar abs", 0.0, 1e6, False),
        ("-1..9 bar", -1e5, 9e5, True),
        ("0-1.6 MPa", 0.0, 1.6e6, True),
    ],
)
def test_ranges_as_labels_say_them(text: str, lowest: float, highest: float, gauge: bool) -> None:
    span = config("x", "pressure-transducer", input=0, range=text).settings["range"]
    assert (span.lowest_pa, span.highest_pa) == pytest.approx((lowest, highest), rel=1e-7)
    assert span.gauge is gauge


@pytest.mark.parametrize("text", ["12 bar", "12-0 bar", "0-12 L", 12, "-2-0 bar", "-1-9 bar abs"])
def test_a_range_that_is_none_is_refused_with_a_remedy(text: object) -> None:
    with pytest.raises(ValueError, match=r"write|lower end|like"):
        config("x", "pressure-transducer", input=0, range=text)
