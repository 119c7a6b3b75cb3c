"""The cases of the contract suite: for each driver a config, values, and every way it can fail."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

from sensors import reasons
from sensors.dew_point_modbus import port_of
from sensors.emulated.hardware import EmulatedHardware
from sensors.registry import SensorConfig
from tests.sensors.support import SECOND_US, config

Break = Callable[[EmulatedHardware], None]
CHIP = "/dev/gpiochip0"
SERIAL = "28-0123456789ab"
PERIOD_US = 10 * SECOND_US


def attribute(find: Callable[[EmulatedHardware], Any], name: str, value: object = True) -> Break:
    return lambda hardware: setattr(find(hardware), name, value)


def call(find: Callable[[EmulatedHardware], Any], name: str, *args: object) -> Break:
    def act(hardware: EmulatedHardware) -> None:
        getattr(find(hardware), name)(*args)

    return act


@dataclass(frozen=True)
class Case:
    """One driver with its part."""

    config: SensorConfig
    values: Mapping[str, tuple[float, float]]  # by quantity: value, how near
    breaks: Mapping[str, tuple[Break, str]]  # by fault: how to, the reason
    set_after_us: int = SECOND_US  # after the last look


def bme(hardware: EmulatedHardware) -> Any:
    return hardware.bme280(1, 0x76)


def adc(hardware: EmulatedHardware) -> Any:
    return hardware.ads1115(1, 0x48)


def probe(hardware: EmulatedHardware) -> Any:
    return hardware.ds18b20(SERIAL)


def infrared(hardware: EmulatedHardware) -> Any:
    return hardware.mlx90614(1, 0x5A)


def line(hardware: EmulatedHardware) -> Any:
    return hardware.line(CHIP, 17)


def modbus(hardware: EmulatedHardware) -> Any:
    return hardware.modbus(port_of(MODBUS)).device(1)


def swings(hardware: EmulatedHardware, seconds: int = 3) -> None:
    """A line that changes a few times after the last look."""
    one = line(hardware)
    level = one.level_at(one.now_ns)
    for second in range(1, seconds + 1):
        level = 1 - level
        one.set(one.now_ns + second * 1_000_000_000, level)


def lose(count: int) -> Break:
    def act(hardware: EmulatedHardware) -> None:
        line(hardware).lose = count
        swings(hardware)

    return act


def i2c_breaks(find: Callable[[EmulatedHardware], Any]) -> dict[str, tuple[Break, str]]:
    return {
        "silent": (attribute(find, "silent"), reasons.NO_ANSWER),
        "all ones": (attribute(find, "lines_high"), reasons.ALL_ONES),
        "all zeros": (attribute(find, "lines_low"), reasons.ALL_ZEROS),
    }


BME_BREAKS = {
    **i2c_breaks(bme),
    "stuck busy": (attribute(bme, "stuck_busy"), reasons.STAYS_BUSY),
    "brown-out": (call(bme, "brown_out"), reasons.WAS_RESET),
    "flipped data bit": (attribute(bme, "flipped_data_bit", 20), reasons.DOES_NOT_REPEAT),
}
ADC_BREAKS = {
    **i2c_breaks(adc),
    "stuck busy": (attribute(adc, "stuck_busy"), reasons.STAYS_BUSY),
    "brown-out": (attribute(adc, "resets_while_converting"), reasons.WAS_RESET),
    "flipped data bit": (attribute(adc, "flipped_data_bit", 7), reasons.DOES_NOT_REPEAT),
}
LINE_BREAKS: dict[str, tuple[Break, str]] = {
    "gone": (attribute(line, "missing"), reasons.NO_ANSWER),
    "lost edges": (lose(1), reasons.EDGES_LOST),
}
MODBUS = config(
    "dryer-m",
    "dew-point-modbus",
    port="/dev/ttyUSB0",
    registers={"dew_point": {"at": 0, "scale": 0.1}},
)
MQTT = config("other", "mqtt-channel", topic="a/b", quantity="temperature", unit="degC",
              silent_after="20 s")  # fmt: skip
AIR_VALUES = {
    "temperature": (290.0, 0.0101),
    "relative_humidity": (0.61, 2e-4),
    "pressure": (99_000.0, 2.4),
}

CASES = [
    Case(config("air", "bme280"), AIR_VALUES, BME_BREAKS),
    Case(config("cell", "vented-cell"), {**AIR_VALUES, "relative_humidity": (0.05, 2e-4)},
         BME_BREAKS),
    Case(
        config("tank", "pressure-transducer", input=0, supply_input=3, range="0-12 bar"),
        {"pressure": (7.7e5, 70.0)},
        {
            **ADC_BREAKS,
            "supply sag": (lambda h: setattr(adc(h).rail, "supply_v", 4.3), reasons.SUPPLY),
            "wire off": (lambda h: setattr(adc(h).inputs[0], "wire_off", True), reasons.SIGNAL_LOW),
        },
    ),
    Case(
        config("line", "pressure-loop", input=1, range="0-16 bar"),
        {"pressure": (7.7e5, 47.0)},
        {
            **ADC_BREAKS,
            "wire off": (lambda h: setattr(adc(h).inputs[1], "wire_off", True), reasons.SIGNAL_LOW),
        },
    ),
    Case(
        config("dryer", "dew-point-loop", input=2, range="-60 to 20 degC"),
        {"dew_point": (253.15, 0.0071)},
        {
            **ADC_BREAKS,
            "failed": (lambda h: setattr(adc(h).inputs[2], "failed_ma", 21.5), reasons.SIGNAL_HIGH),
        },
    ),
    Case(
        config("pipe", "ds18b20", serial=SERIAL),
        {"temperature": (288.4, 0.0363)},
        {
            "silent": (call(probe, "fail", "silent"), reasons.NO_ANSWER),
            "empty file": (call(probe, "fail", "empty"), reasons.NO_ANSWER),
            "bad checksum": (call(probe, "fail", "checksum"), reasons.BAD_CHECKSUM),
            "all ones": (call(probe, "fail", "ones"), reasons.ALL_ONES),
            "all zeros": (call(probe, "fail", "zeros"), reasons.ALL_ZEROS),
            "brown-out": (call(probe, "fail", "reset"), reasons.NOT_MEASURED),
        },
    ),
    Case(
        config("panel", "mlx90614"),
        {"temperature": (281.0, 0.0101)},
        {
            **i2c_breaks(infrared),
            "bad checksum": (attribute(infrared, "bad_checksum"), reasons.BAD_CHECKSUM),
            "flipped data bit": (attribute(infrared, "flipped_data_bit", 5), reasons.BAD_CHECKSUM),
            "brown-out": (call(infrared, "brown_out"), reasons.NOT_MEASURED),
        },
    ),
    *(
        Case(config("switch", driver, line=17, **more), {"contact": (1.0, 0.0)}, LINE_BREAKS)
        for driver, more in (
            ("contact", {}),
            ("float-switch", {"trap": "tank", "closes_at": "80 ml", "debounce": "100 ms"}),
            ("drained-button", {"trap": "tank"}),
        )
    ),
    Case(
        config("meter", "flow-pulses", line=17, volume_per_pulse="1 L", highest="1000 L/min"),
        {"free_air_flow": (0.002, 1.01e-4)},
        LINE_BREAKS,
        set_after_us=PERIOD_US,  # a meter's pulses are those of the flow until it is set
    ),
    Case(
        MODBUS,
        {"dew_point": (253.1, 0.056)},
        {
            "silent": (attribute(modbus, "silent"), reasons.NO_ANSWER),
            "all ones": (attribute(modbus, "lines_high"), reasons.ALL_ONES),
            "bad checksum": (attribute(modbus, "bad_checksum"), reasons.BAD_CHECKSUM),
            "error": (attribute(modbus, "exception_code", 4), reasons.ERROR_ANSWER),
        },
    ),
    Case(MQTT, {"temperature": (290.0, 0.0051)}, {}),
]  # fmt: skip
