"""Measured dew points over several ticks: what `Sensing` gathers of them one by one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from daemon.moisture import air, dew_sensors
from daemon.moisture.along import Stretch
from daemon.moisture.along_course import Bools, Course
from daemon.moisture.along_water import WaterAlong
from daemon.moisture.description import Measured, VentedCell
from daemon.moisture.ensemble import Array
from daemon.moisture.observing import Gathered, Observed
from daemon.moisture.plan import Plan


def gathered(
    plan: Plan, observed: Mapping[str, Observed], found: Stretch, ticks: int
) -> Mapping[str, Observed]:
    """What the sensors said in the first ticks, and what was believed there."""
    which = dew_sensors.stations(plan)
    if not which:
        return observed
    after = dict(observed)
    for i in which:
        source = plan.stations[i].measured_dew_point
        if source is None or not _speaks(source, found.course):
            continue
        chosen = ~contradicting(plan, found, i)[:ticks]
        if chosen.any():
            name = plan.stations[i].id
            before = after.get(name, Observed())
            after[name] = replace(before, hour=_hour(before.hour, source, found, i, chosen))
    return after


def contradicting(plan: Plan, found: Stretch, station: int) -> Bools:
    """In which ticks a dew point cannot be, as `dew_sensors.contradicts` has it, (ticks,)."""
    source, values = plan.stations[station].measured_dew_point, found.course.values
    ticks = len(found.course.times_us)
    if source is None or not _speaks(source, found.course):
        return np.zeros(ticks, bool)
    beliefs = found.before.beliefs
    if isinstance(source, Measured):
        bias_k, width_k = dew_sensors.bias_and_width(beliefs, source)
        low_k = values[source.channel] - bias_k - width_k
        above: Bools = low_k > found.conditions.temperature_k[station].max(axis=1)
        return above
    bias, width = dew_sensors.bias_and_width(beliefs, source.relative_humidity)
    humidity = values[source.relative_humidity.channel] - bias - width
    bias_k, width_k = dew_sensors.bias_and_width(beliefs, source.temperature)
    ratio = air.humidity_ratio_unchecked(
        values[source.temperature.channel] - bias_k - width_k,
        values[source.pressure.channel],
        np.clip(humidity, 0.0, 1.0),
    )
    wet: Bools = (humidity > 0.0) & (ratio > found.saturated[station].max(axis=1))
    return wet


def _speaks(source: Measured | VentedCell, course: Course) -> bool:
    """Whether none of its channels is silent: it is so at all ticks, or at none."""
    return not any(course.silent.get(name, True) for name in dew_sensors.channels_of(source))


def _hour(
    hour: Gathered | None,
    source: Measured | VentedCell,
    found: Stretch,
    station: int,
    chosen: Bools,
) -> Gathered:
    """An hour's sums with those of the chosen ticks."""
    dt_s = found.model.period_us / 1e6
    count, values = len(chosen), found.course.values
    if isinstance(source, Measured):
        readings, cell_k, cell_pa = values[source.channel], np.zeros(count), np.zeros(count)
    else:
        readings = values[source.relative_humidity.channel]
        cell_k, cell_pa = values[source.temperature.channel], values[source.pressure.channel]
    told = [float(each[:count][chosen].sum()) * dt_s for each in (readings, cell_k, cell_pa)]
    believed = [
        each[:count][chosen].sum(axis=0) * dt_s
        for each in (leaving_ratios(found.water, station), found.conditions.pressure_pa[station])
    ]
    seconds, reading_s, kelvin_s, pascal_s = float(np.count_nonzero(chosen)) * dt_s, *told
    if hour is None:
        return Gathered(seconds, reading_s, kelvin_s, pascal_s, *believed)
    return Gathered(
        hour.seconds + seconds,
        hour.reading + reading_s,
        hour.cell_k + kelvin_s,
        hour.cell_pa + pascal_s,
        hour.ratio + believed[0],
        hour.pressure_pa + believed[1],
    )


def leaving_ratios(water: WaterAlong, station: int) -> Array:
    """The humidity ratio of the air that last left a station, after every tick."""
    through, vapor = water.air.moved.through[station], water.places[station].vapor_out
    moving = through > 0.0
    if moving.all():
        ratio: Array = vapor / through
        return ratio
    before = water.state.leaving_ratio[station]
    rows = np.concatenate(
        (before[None], np.where(moving, vapor / np.where(moving, through, 1.0), 0))
    )
    last = np.where(moving, np.arange(1, len(through) + 1)[:, None], 0)
    last = np.maximum.accumulate(last, axis=0)
    found: Array = np.take_along_axis(rows, last, axis=0)
    return found
