"""A humidity sensor checked over a saturated salt solution, and what that teaches of its bias.

Source: L. Greenspan, "Humidity fixed points of binary saturated aqueous solutions", Journal of
Research of the National Bureau of Standards 81A (1977), sodium chloride (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace

from daemon.moisture.beliefs import bias_of
from daemon.moisture.description import Measured, VentedCell
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, standard_normal
from daemon.moisture.learning import Update
from daemon.moisture.model import Model, State
from daemon.moisture.observing import take
from daemon.moisture.plan import Plan

_TEMPERATURES_K = (293.15, 298.15, 303.15)
_HUMIDITIES = (0.755, 0.753, 0.751)
COLDEST_K, HOTTEST_K = 288.15, 308.15  # 5 K beyond the table; the slope is small
# A jar at home is not a laboratory: uneven temperature (0.3 K makes 1.4 %), salt not quite wet,
# and a check at 75 % says not all about 50 %. Common practice, no source.
GIVE_OR_TAKE = 0.015


def over_sodium_chloride(temperature_k: float) -> float:
    """Relative humidity of air over wet table salt, a fraction; 288 to 308 K, linear between."""
    low, middle, high = _TEMPERATURES_K
    if temperature_k <= middle:
        slope = (_HUMIDITIES[1] - _HUMIDITIES[0]) / (middle - low)
    else:
        slope = (_HUMIDITIES[2] - _HUMIDITIES[1]) / (high - middle)
    return _HUMIDITIES[1] + slope * (temperature_k - middle)


def uses(plan: Plan, channel: str) -> Iterator[Measured]:
    """Where the line uses a humidity channel."""
    for station in plan.stations:
        source = station.relative_humidity
        if isinstance(source, Measured) and source.channel == channel:
            yield source
        cell = station.measured_dew_point
        if isinstance(cell, VentedCell) and cell.relative_humidity.channel == channel:
            yield cell.relative_humidity


def learn(model: Model, state: State, channel: str, give_or_take: float, bias: float) -> State:
    """The state after a check that found a channel to read `bias` too high.

    Whatever else is believed together with that bias moves with it.
    """
    unit = give_or_take * HALF_WIDTH_TO_SD
    if unit <= 0.0:
        return state
    before = state.beliefs[bias_of(channel)]
    sd, members = GIVE_OR_TAKE * HALF_WIDTH_TO_SD, before.size
    # a part that is far off is off: its bias is not taken for chance
    surprise = abs(bias / unit - float(before.mean())) / math.hypot(before.std(ddof=1), sd / unit)
    widened = before.mean() + max(1.0, surprise / 2.0) * (before - before.mean())
    state = replace(state, beliefs={**state.beliefs, bias_of(channel): widened})
    name = f"salt check of {channel}"
    noise = standard_normal(model.plan.line.seed, name, members, state.time_us)
    expected = widened * unit
    update = Update(expected, bias + sd * noise - expected, float(expected.var(ddof=1)) + sd * sd)
    return take(model, state, list(state.beliefs), update)
