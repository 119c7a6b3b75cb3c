"""Puts in the emulated part of each configured sensor, with a setter for each of its channels."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterable
from typing import TYPE_CHECKING

from daemon import units
from sensors.dew_point_modbus import port_of
from sensors.emulated.meter import EmulatedMeter
from sensors.keys import PressureRange
from sensors.registry import SensorConfig

if TYPE_CHECKING:
    from sensors.emulated.hardware import EmulatedHardware

# a channel's setter: (value in SI, wall-clock microseconds)
Setter = Callable[[float, int], None]
Setters = dict[str, Setter]


def fit(hardware: EmulatedHardware, sensors: Iterable[SensorConfig]) -> Setters:
    """A setter for every channel of these sensors, by its name."""
    setters: Setters = {}
    for config in sensors:
        setters |= _FITTERS[config.driver](hardware, config)
    return setters


def _attribute(part: object, name: str) -> Setter:
    def put(value: float, _now_us: int) -> None:
        setattr(part, name, value)

    return put


def _bme280(hardware: EmulatedHardware, config: SensorConfig) -> Setters:
    part = hardware.bme280(config.settings["bus"], config.settings["address"])
    return {
        f"{config.id}.temperature": _attribute(part, "temperature_k"),
        f"{config.id}.relative_humidity": _attribute(part, "relative_humidity"),
        f"{config.id}.pressure": _attribute(part, "pressure_pa"),
    }


def _transducer(hardware: EmulatedHardware, config: SensorConfig) -> Setters:
    settings = config.settings
    adc = hardware.ads1115(settings["bus"], settings["address"])
    span = settings["range"]
    part = adc.transducer(settings["input"], span.lowest_pa, span.highest_pa, settings["divider"])
    if settings["supply_input"] is not None:
        adc.read_rail(settings["supply_input"], settings["divider"])
    return {f"{config.id}.pressure": _attribute(part, "pressure_pa")}


def _loop(hardware: EmulatedHardware, config: SensorConfig) -> Setters:
    settings = config.settings
    adc = hardware.ads1115(settings["bus"], settings["address"])
    span, resistor_ohm = settings["range"], settings["resistor_ohm"]
    if isinstance(span, PressureRange):
        part = adc.loop(settings["input"], span.lowest_pa, span.highest_pa, resistor_ohm)
        return {f"{config.id}.pressure": _attribute(part, "value")}
    part = adc.loop(settings["input"], span.lowest_k, span.highest_k, resistor_ohm)
    return {f"{config.id}.dew_point": _attribute(part, "value")}


def _ds18b20(hardware: EmulatedHardware, config: SensorConfig) -> Setters:
    part = hardware.ds18b20(config.settings["serial"])
    return {f"{config.id}.temperature": _attribute(part, "temperature_k")}


def _mlx90614(hardware: EmulatedHardware, config: SensorConfig) -> Setters:
    part = hardware.mlx90614(config.settings["bus"], config.settings["address"])
    return {f"{config.id}.temperature": _attribute(part, "object_k")}


def _contact(hardware: EmulatedHardware, config: SensorConfig) -> Setters:
    line = hardware.line(config.settings["chip"], config.settings["line"])
    closed = int(config.settings["closed"] == "high")

    def put(value: float, now_us: int) -> None:
        line.set(now_us * 1000, closed if value else 1 - closed)

    put(0.0, 0)
    return {f"{config.id}.contact": put}


def _pulses(hardware: EmulatedHardware, config: SensorConfig) -> Setters:
    line = hardware.line(config.settings["chip"], config.settings["line"])
    meter = EmulatedMeter(line, config.settings["volume_per_pulse"])

    def put(value: float, now_us: int) -> None:
        meter.set(value, now_us * 1000)

    return {f"{config.id}.free_air_flow": put}


def _modbus(hardware: EmulatedHardware, config: SensorConfig) -> Setters:
    device = hardware.modbus(port_of(config)).device(config.settings["device"])
    setters: Setters = {}
    for quantity, place in config.settings["registers"].items():

        def put(value: float, _now_us: int, place: object = place) -> None:
            device.put(place.kind, place.at, place.encode(value))  # type: ignore[attr-defined]

        put(293.15, 0)
        setters[f"{config.id}.{quantity}"] = put
    return setters


def _mqtt(hardware: EmulatedHardware, config: SensorConfig) -> Setters:
    settings = config.settings
    quantity = settings["quantity"]

    def put(value: float, now_us: int) -> None:
        shown: object = _in_unit(value, settings["unit"], quantity)
        for name in reversed(settings["field"].split(".") if settings["field"] else []):
            shown = {name: shown}
        hardware.inbox().post(settings["topic"], json.dumps(shown).encode(), now_us)

    return {f"{config.id}.{quantity}": put}


def _in_unit(value: float, unit: str, quantity: str) -> float:
    if quantity in ("relative_humidity", "contact"):
        return value * 100.0 if unit == "%" else value
    kind: units.Kind = (
        "pressure"
        if quantity == "pressure"
        else "flow"
        if quantity == "free_air_flow"
        else "temperature"
    )
    return units.from_si(value, unit, kind)


_FITTERS: dict[str, Callable[[EmulatedHardware, SensorConfig], Setters]] = {
    "bme280": _bme280,
    "vented-cell": _bme280,
    "pressure-transducer": _transducer,
    "pressure-loop": _loop,
    "dew-point-loop": _loop,
    "ds18b20": _ds18b20,
    "mlx90614": _mlx90614,
    "contact": _contact,
    "float-switch": _contact,
    "drained-button": _contact,
    "flow-pulses": _pulses,
    "dew-point-modbus": _modbus,
    "mqtt-channel": _mqtt,
}
