"""Imports every driver, so that `import sensors.drivers` fills `sensors.registry.DRIVERS`."""

from __future__ import annotations

from sensors import (
    bme280,
    contact,
    dew_point_modbus,
    ds18b20,
    loop,
    mlx90614,
    mqtt_channel,
    pulses,
    transducer,
)

__all__ = [
    "bme280",
    "contact",
    "dew_point_modbus",
    "ds18b20",
    "loop",
    "mlx90614",
    "mqtt_channel",
    "pulses",
    "transducer",
]
