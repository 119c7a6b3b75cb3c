"""What drivers, libraries and the kernel raise, as one fault with a stable reason."""

from __future__ import annotations

import errno
import importlib
import sys

import pytest

from sensors import reasons
from sensors.guard import faults
from sensors.hardware import RealHardware
from sensors.modbus import ModbusPort
from sensors.reading import SensorFault
from tests.sensors.support import config, open_part


@pytest.mark.parametrize(
    ("error", "reason"),
    [
        (OSError(errno.EREMOTEIO, "Remote I/O error"), reasons.NO_ANSWER),
        (OSError(errno.ETIMEDOUT, "Connection timed out"), reasons.NO_ANSWER),
        (FileNotFoundError(errno.ENOENT, "No such file"), reasons.BUS_UNOPENED),
        (PermissionError(errno.EACCES, "Permission denied"), reasons.BUS_UNOPENED),
        (OSError(errno.EBUSY, "Device or resource busy"), reasons.BUS_UNOPENED),
        (ValueError("No I2C device at address: 0x76"), reasons.NO_ANSWER),
        (RuntimeError("Failed to find BME280! Chip ID 0x58"), reasons.WRONG_CHIP),
        (ValueError("something else"), reasons.DRIVER_FAILED),
        (RuntimeError("something else"), reasons.DRIVER_FAILED),
        (ZeroDivisionError("float division by zero"), reasons.CALIBRATION),
        (ModuleNotFoundError("No module named 'gpiod'"), reasons.LIBRARY_MISSING),
    ],
)
def test_an_error_becomes_a_fault(error: Exception, reason: str) -> None:
    with pytest.raises(SensorFault) as caught, faults("tank"):
        raise error
    assert caught.value.reason == reason
    assert str(error) in str(caught.value)
    assert caught.value.__cause__ is error


def test_a_fault_passes_as_it_is() -> None:
    fault = SensorFault("tank", reasons.SUPPLY)
    with pytest.raises(SensorFault) as caught, faults("other"):
        raise fault
    assert caught.value is fault


def test_a_machine_without_gpiod_says_what_is_missing(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "gpiod", None)
    with pytest.raises(SensorFault, match=r"library missing.*gpiod"):
        open_part(config("motor", "contact", line=17), RealHardware())


@pytest.mark.parametrize("missing", ["pymodbus.client", "serial"])
def test_a_machine_without_the_modbus_extra_says_what_is_missing(
    missing: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    # loaded whole first: what is loaded without a module keeps lacking it when it is back
    importlib.import_module("pymodbus.client")
    monkeypatch.setitem(sys.modules, missing, None)
    reader = RealHardware().modbus(ModbusPort("/dev/ttyUSB97"))
    with pytest.raises(SensorFault, match="library missing"), faults("dryer"):
        reader.read("input", 1, 0, 1)
