"""Measured dew points: what a transmitter or a vented cell says of the air, by itself.

A vented cell is a humidity sensor in air that bleeds from the line to the atmosphere: the humidity
ratio of that air is the line's, so that relative humidity, temperature and pressure in the cell
give the pressure dew point at the line's pressure. Very dry air reads nearly nothing there: where
the reading is within its uncertainty of zero, only "below X" can be said.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from daemon.moisture import air
from daemon.moisture.beliefs import Beliefs, bias_of
from daemon.moisture.conditions import Conditions, Held
from daemon.moisture.density import mole_fraction_unchecked
from daemon.moisture.description import Measured, VentedCell
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array, percentiles
from daemon.moisture.model import State
from daemon.moisture.plan import Plan

# A measured dew point contradicts what is believed where its least is above the 95th percentile by
# so much: more than rounding and a moment's lag.
WETTER_K = 1.0
DRIEST = 1e-8  # kg/kg, below every dryer's air and within the formulas' range


@dataclass(frozen=True, slots=True)
class MeasuredDewPoint:
    """A pressure dew point (frost point below 0 degC) as an interval, K.

    Without `low_k` and `middle_k` only an upper bound can be said: "below `high_k`".
    """

    low_k: float | None
    middle_k: float | None
    high_k: float


def cell_dew_point(
    relative_humidity: float,
    cell_k: float,
    cell_pa: float,
    line_pa: float,
    humidity_give_or_take: float,
    temperature_give_or_take_k: float,
) -> MeasuredDewPoint:
    """The pressure dew point of the line's air from a vented cell, both errors the same way.

    Parameters
    ----------
    relative_humidity : fraction over liquid water, as read in the cell.
    cell_k, cell_pa : temperature (K) and pressure (Pa absolute) in the cell.
    line_pa : pressure of the line (Pa absolute) at which the dew point is wanted.
    humidity_give_or_take, temperature_give_or_take_k : 95 % half-widths (k = 2).
    """

    def at(humidity: float, temperature_k: float) -> float:
        cell = np.array([[temperature_k], [cell_pa], [min(max(humidity, 0.0), 1.0)]])
        ratio = np.maximum(air.humidity_ratio_unchecked(*cell), DRIEST)
        return float(air.dew_point_unchecked(ratio, np.array([line_pa]))[0])

    width = humidity_give_or_take
    high_k = at(relative_humidity + width, cell_k + temperature_give_or_take_k)
    if relative_humidity <= width:
        return MeasuredDewPoint(None, None, high_k)
    low_k = at(relative_humidity - width, cell_k - temperature_give_or_take_k)
    return MeasuredDewPoint(low_k, at(relative_humidity, cell_k), high_k)


def relative_humidity_in_cell(ratio: Array, cell_k: Array, cell_pa: Array) -> Array:
    """What a perfect sensor would read of air with this humidity ratio, a fraction, at most 1."""
    full = mole_fraction_unchecked(
        air.humidity_ratio_unchecked(cell_k, cell_pa, np.ones_like(cell_k))
    )
    share: Array = np.minimum(mole_fraction_unchecked(ratio) / full, 1.0)
    return share


def stations(plan: Plan) -> list[int]:
    """Those whose air's dew point is measured."""
    return [i for i, station in enumerate(plan.stations) if station.measured_dew_point is not None]


def measured(
    plan: Plan, beliefs: Beliefs, held: Mapping[str, Held], now: Conditions, station: int
) -> MeasuredDewPoint | None:
    """What the sensor at a station says now, with what is known of its bias; None when silent.

    The pressure is the middle of what is believed of the line there.
    """
    source = plan.stations[station].measured_dew_point
    if source is None or not all(channel in held for channel in channels_of(source)):
        return None
    if isinstance(source, Measured):
        bias_k, width_k = bias_and_width(beliefs, source)
        middle_k = held[source.channel].value - bias_k
        return MeasuredDewPoint(middle_k - width_k, middle_k, middle_k + width_k)
    bias, width = bias_and_width(beliefs, source.relative_humidity)
    bias_k, width_k = bias_and_width(beliefs, source.temperature)
    return cell_dew_point(
        held[source.relative_humidity.channel].value - bias,
        held[source.temperature.channel].value - bias_k,
        held[source.pressure.channel].value,
        float(np.median(now.pressure_pa[station])),
        width,
        width_k,
    )


def channels_of(source: Measured | VentedCell) -> tuple[str, ...]:
    """The channels that a measured dew point is made of."""
    if isinstance(source, Measured):
        return (source.channel,)
    return (source.relative_humidity.channel, source.temperature.channel, source.pressure.channel)


def bias_and_width(beliefs: Beliefs, source: Measured) -> tuple[float, float]:
    """The middle of what is believed of a channel's bias, and its 95 % half-width."""
    sd = source.give_or_take * HALF_WIDTH_TO_SD
    values = beliefs[bias_of(source.channel)]
    return float(values.mean()) * sd, 2.0 * float(values.std()) * sd


def contradicts(plan: Plan, state: State, station: int) -> bool:
    """Whether a dew point is above any temperature the line can have there: water would drop out.

    Not while the sensor is silent. Cheap: it is asked at every step.
    """
    source = plan.stations[station].measured_dew_point
    if source is None or not fresh(plan, state, source):
        return False
    if isinstance(source, Measured):
        bias_k, width_k = bias_and_width(state.beliefs, source)
        low_k = state.held[source.channel].value - bias_k - width_k
        return low_k > float(state.conditions.temperature_k[station].max())
    bias, width = bias_and_width(state.beliefs, source.relative_humidity)
    humidity = state.held[source.relative_humidity.channel].value - bias - width
    if humidity <= 0.0:
        return False
    bias_k, width_k = bias_and_width(state.beliefs, source.temperature)
    cell = (
        [state.held[source.temperature.channel].value - bias_k - width_k],
        [state.held[source.pressure.channel].value],
        [min(humidity, 1.0)],
    )
    ratio = air.humidity_ratio_unchecked(*(np.array(each) for each in cell))
    return float(ratio[0]) > float(state.saturated[station].max())


def wetter(plan: Plan, state: State, station: int) -> tuple[float, float] | None:
    """The least that a sensor says of a dew point, and the most that is believed there, K, where
    the first is above the second: then a dryer does not do what it is said to."""
    source = plan.stations[station].measured_dew_point
    if source is None or not fresh(plan, state, source):
        return None
    said = measured(plan, state.beliefs, state.held, state.conditions, station)
    if said is None or said.low_k is None:
        return None
    most = float(percentiles(state.water.leaving_ratio[station])[2])
    pressure_pa = np.median(state.conditions.pressure_pa[station], keepdims=True)
    most_k = float(air.dew_point_unchecked(np.array([max(most, DRIEST)]), pressure_pa)[0])
    return (said.low_k, most_k) if said.low_k > most_k + WETTER_K else None


def behind_dryer(plan: Plan, station: int) -> bool:
    """Whether a dryer in service stands there or before it."""
    while station >= 0:
        dryer = plan.stations[station].dryer
        if dryer is not None and dryer.power.in_service:
            return True
        station = plan.parent[station]
    return False


def fresh(plan: Plan, state: State, source: Measured | VentedCell) -> bool:
    period_us = round(plan.line.period_s * 1e6)
    found = [state.held.get(channel, Held()) for channel in channels_of(source)]
    return not any(one.stale(state.time_us, period_us) for one in found)
