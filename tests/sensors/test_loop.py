"""4-20 mA transmitters: the live zero, and what a broken loop looks like."""

from __future__ import annotations

import pytest

from sensors import reasons
from sensors.emulated.hardware import EmulatedHardware
from sensors.registry import DRIVERS
from tests.sensors.support import START_US, config, fault_of, open_part, values

LINE = config("line-gauge", "pressure-loop", input=1, range="0-16 bar")
DRYER = config("dryer", "dew-point-loop", input=2, range="-60 to 20 degC")


@pytest.mark.parametrize("bar", [0.0, 7.3, 16.0])
def test_a_pressure_comes_back(hardware: EmulatedHardware, bar: float) -> None:
    hardware.fit([LINE])["line-gauge.pressure"](bar * 1e5, 0)
    found = values(open_part(LINE, hardware).read(START_US))["pressure"]
    # half a count of 125 uV across 150 ohm is 0.42 uA, of 16 mA for 16 bar: 42 Pa; half a step
    assert found == pytest.approx(bar * 1e5, abs=42 + 5)


@pytest.mark.parametrize("celsius", [-60.0, -23.4, 3.0, 20.0])
def test_a_dew_point_comes_back(hardware: EmulatedHardware, celsius: float) -> None:
    hardware.fit([DRYER])["dryer.dew_point"](celsius + 273.15, 0)
    found = values(open_part(DRYER, hardware).read(START_US))["dew_point"]
    assert found == pytest.approx(celsius + 273.15, abs=0.0021 + 0.005)


@pytest.mark.parametrize(
    ("milliamps", "fraction"), [(4.0, 0.0), (8.0, 0.25), (12.0, 0.5), (20.0, 1.0)]
)
def test_the_scale_is_four_to_twenty(
    hardware: EmulatedHardware, milliamps: float, fraction: float
) -> None:
    # IEC 60381-1 (from memory): 4 mA at the lower end, 20 mA at the upper
    loop = hardware.ads1115(1, 0x48).loop(1, 0.0, 16e5, 150.0)
    loop.failed_ma = milliamps
    found = values(open_part(LINE, hardware).read(START_US))["pressure"]
    assert found == pytest.approx(fraction * 16e5, abs=47)


@pytest.mark.parametrize(
    ("milliamps", "reason"),
    [(0.0, reasons.SIGNAL_LOW), (3.6, reasons.SIGNAL_LOW), (21.0, reasons.SIGNAL_HIGH)],
)
@pytest.mark.parametrize("one", [LINE, DRYER], ids=["pressure", "dew point"])
def test_a_current_outside_the_signal_is_a_fault(
    hardware: EmulatedHardware, one: object, milliamps: float, reason: str
) -> None:
    # NAMUR NE 43 (from memory)
    chosen = LINE if one is LINE else DRYER
    sensor_input = chosen.settings["input"]
    hardware.fit([chosen])
    hardware.ads1115(1, 0x48).loop(sensor_input, 0, 1, 150.0).failed_ma = milliamps
    assert fault_of(open_part(chosen, hardware)) == reason


@pytest.mark.parametrize("milliamps", [3.85, 20.4])
def test_a_signal_just_past_its_ends_is_still_one(
    hardware: EmulatedHardware, milliamps: float
) -> None:
    hardware.fit([DRYER])
    hardware.ads1115(1, 0x48).loop(2, 0, 1, 150.0).failed_ma = milliamps
    assert open_part(DRYER, hardware).read(START_US)[0].good


def test_the_resistor_is_part_of_the_error() -> None:
    (channel,) = DRIVERS["pressure-loop"].channels(LINE)
    # 1 % of range and 1.25 % for a resistor of 1 % at the upper end, as independent errors
    assert channel.give_or_take == pytest.approx(0.016008 * 16e5, rel=1e-3)
    assert channel.gauge


def test_a_range_of_another_kind_is_refused() -> None:
    with pytest.raises(ValueError, match="temperature"):
        config("dryer", "dew-point-loop", input=2, range="0-16 bar")
