"""What checkpoints of earlier versions lack: filled in, so that an upgrade loses nothing.

A field that gets a default needs nothing here. One whose value hangs on others gets it here, and a
checkpoint as the version before wrote it joins those that the tests keep.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np


def completed(name: str, values: dict[str, Any]) -> dict[str, Any]:
    """The fields of one record as they were kept, with those that it did not have then.

    Records within it are made already.
    """
    if name == "AirState" and "ratio" not in values:
        # the stock's humidity ratio, once taken anew at every tick: see "State"
        return {**values, "ratio": np.full_like(values["stored"], np.nan)}
    if name == "State" and np.isnan(values["air"].ratio).any():
        air = values["air"]
        return {**values, "air": replace(air, ratio=values["water"].vapor / air.stored)}
    if name == "FittingState" and "low_since_us" not in values:
        # how slowly its pressure fell was not looked at then
        return {**values, "low_since_us": values["empty_since_us"]}
    return values
