"""What measured dew points say, for whoever looks: at the line's pressure, as an interval."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from daemon.channel_faults import unusable
from daemon.contradictions import Contradictions
from daemon.moisture import dew_sensors
from daemon.moisture.model import Model
from daemon.state import CoreState
from daemon.views import DewPointView


def dew_point_views(
    model: Model, contradictions: Contradictions, state: CoreState
) -> Iterator[DewPointView]:
    """One view a station that has such a sensor, in line order. Costly: not for every tick."""
    against = contradictions.found(state)
    for i in dew_sensors.stations(model.plan):
        station = model.plan.stations[i]
        assert station.measured_dew_point is not None
        channels = dew_sensors.channels_of(station.measured_dew_point)
        sensor = channels[0].rpartition(".")[0]
        faults = [unusable(state, name, model.period_us) for name in channels]
        fault = next((each for each in (*faults, against.get(sensor, "")) if each), "")
        inner = state.model
        said = dew_sensors.measured(model.plan, inner.beliefs, inner.held, inner.conditions, i)
        yield DewPointView(
            station=station.id,
            sensor=sensor,
            at_us=state.time_us,
            pressure_pa=float(np.median(inner.conditions.pressure_pa[i])),
            low_k=None if fault or said is None else said.low_k,
            middle_k=None if fault or said is None else said.middle_k,
            high_k=None if fault or said is None else said.high_k,
            fault=fault,
        )
