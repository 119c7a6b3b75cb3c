"""How long cartridges and ice last at the recent load, for whoever asks. Pure."""

from __future__ import annotations

import numpy as np

from daemon.moisture.ensemble import Array, percentiles
from daemon.moisture.model import Model, State

LONGEST_H = 24.0 * 366.0  # beyond a year nobody plans


def hours_left(model: Model, state: State) -> dict[str, dict[str, float | None]]:
    """Hours by station, as 5, 50 and 95 %; None beyond a year, or while nothing is taken up."""
    fittings, drawn = model.fittings, state.parameters.fittings
    found = {}
    for i in fittings.drying.cartridges:
        seconds = fittings.drying.charge_left_s(state.fittings, drawn, i)
        found[model.plan.stations[i].id] = _interval(percentiles(_finite(seconds)))
    for i in fittings.baths:
        seconds = fittings.ice_left_s(state.fittings, drawn, i)
        found[model.plan.stations[i].id] = _interval(percentiles(_finite(seconds)))
    return found


def _finite(seconds: Array) -> Array:
    """Longer than anybody plans is all the same, and infinite has no percentiles."""
    hours: Array = np.minimum(seconds / 3600.0, 2.0 * LONGEST_H)
    return hours


def _interval(hours: Array) -> dict[str, float | None]:
    names = ("p05", "p50", "p95")
    return {
        name: round(float(hour), 1) if hour <= LONGEST_H else None
        for name, hour in zip(names, hours, strict=True)
    }
