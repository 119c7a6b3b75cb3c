"""What a vendor's driver raises, as one SensorFault with a stable reason."""

from __future__ import annotations

import errno
from collections.abc import Iterator
from contextlib import contextmanager

from sensors import reasons
from sensors.reading import SensorFault

# what the kernel says when a part does not acknowledge, or when nobody lets go of the bus
_NOT_THERE = {
    errno.EREMOTEIO,
    errno.ENXIO,
    errno.ENODEV,
    errno.ETIMEDOUT,
    errno.EIO,
    errno.EAGAIN,
}


@contextmanager
def faults(sensor: str) -> Iterator[None]:
    """Inside, whatever a vendor's driver or the kernel raises becomes a SensorFault."""
    try:
        yield
    except SensorFault:
        raise
    except ImportError as error:
        raise SensorFault(sensor, reasons.LIBRARY_MISSING, str(error)) from error
    except OSError as error:
        known = error.errno in _NOT_THERE
        reason = reasons.NO_ANSWER if known else reasons.BUS_UNOPENED
        raise SensorFault(sensor, reason, str(error)) from error
    except (ValueError, RuntimeError) as error:
        raise SensorFault(sensor, _reason(error), str(error)) from error
    except ArithmeticError as error:  # the BME280 library divides by a calibration word
        raise SensorFault(sensor, reasons.CALIBRATION, str(error)) from error


def _reason(error: Exception) -> str:
    """The vendors' libraries say these two with built-in exceptions; others are our mistake."""
    text = str(error)
    if text.startswith("No I2C device at address"):
        return reasons.NO_ANSWER
    if text.startswith("Failed to find BME280"):
        return reasons.WRONG_CHIP
    return reasons.DRIVER_FAILED
