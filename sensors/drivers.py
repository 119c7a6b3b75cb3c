"""Imports every driver, so that `import sensors.drivers` fills `sensors.registry.DRIVERS`."""

from __future__ import annotations

from sensors import bme280, contact, ds18b20, transducer

__all__ = ["bme280", "contact", "ds18b20", "transducer"]
