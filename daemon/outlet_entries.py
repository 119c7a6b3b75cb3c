"""What gauges and blotters tell of an outlet, and the hourly memory of the air around it. Pure."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from daemon.clock import HOUR_US
from daemon.journal import Blotter, Gauge
from daemon.moisture import blotting, margin
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array, standard_normal
from daemon.outlet_air import Described, OutletAir
from daemon.outlet_record import HOURS_KEPT, GaugeHeld, OutletRecord
from daemon.state import CoreState

GAUGE_GIVE_OR_TAKE_K = 0.5  # of a painter's gauge, 95 %; common practice
CONTRADICTION_SIGMAS = 5.0


class OutletEntries:
    """Changes the outlets' records of one site."""

    def __init__(self, air: OutletAir) -> None:
        self.air = air
        self._by_id = {outlet.id: outlet for outlet in air.outlets}

    def blotter(self, state: CoreState, told: Blotter) -> CoreState:
        """A stain stands until a clean test; of water, both are learned from."""
        outlet = self._by_id.get(told.outlet)
        if outlet is None:
            return state
        record, now_us = state.outlets[told.outlet], state.time_us
        if told.result != "oil":
            stained = told.result == "water"
            model = blotting.observe(self.air.model, state.model, outlet.way.outlet, stained)
            state = replace(state, model=model)
        match told.result:
            case "clean":
                record = replace(record, clean_us=now_us, water_us=-1, oil_us=-1)
            case "water":
                record = replace(record, water_us=now_us)
            case "oil":
                record = replace(record, oil_us=now_us)
        return _with(state, told.outlet, replace(record, looked_us=-1))

    def gauge(self, state: CoreState, told: Gauge) -> CoreState:
        """An observation of the surface margin, give or take half a kelvin, for a stated time."""
        outlet = self._by_id.get(told.outlet)
        if outlet is None:
            return state
        held = self._held(state, outlet, told)
        return _with(state, outlet.id, replace(state.outlets[outlet.id], gauge=held, looked_us=-1))

    def _held(self, state: CoreState, outlet: Described, told: Gauge) -> GaugeHeld:
        line, now_us = self.air.model.plan.line, state.time_us
        sd = GAUGE_GIVE_OR_TAKE_K * HALF_WIDTH_TO_SD
        place = standard_normal(line.seed, f"gauge of {outlet.id}", line.members, now_us)
        observed = told.spread_k + sd * place
        until_us = now_us + round(told.valid_s * 1e6)
        room = self.air.around(state, outlet)
        if room is None or any(self.air.faults(state, outlet.air_channels)):
            return GaugeHeld(now_us, until_us, told.spread_k, "margin", observed)
        dew_point_k = margin.dew_point_around(room)
        surface_k = self.air.sensed_surface_k(state, outlet)
        if surface_k is None or any(self.air.faults(state, (outlet.surface_channel,))):
            return GaugeHeld(now_us, until_us, told.spread_k, "surface", dew_point_k + observed)
        expected = surface_k - dew_point_k
        correction, sigmas = observe(expected, observed, told.spread_k, sd)
        contradicts = sigmas > CONTRADICTION_SIGMAS
        return GaugeHeld(now_us, until_us, told.spread_k, "correction", correction, contradicts)

    def hour(self, state: CoreState) -> CoreState:
        """Keep the air around every outlet as it is at this full hour."""
        outlets = dict(state.outlets)
        for outlet in self.air.outlets:
            if not outlet.air_channels:
                continue
            record = outlets[outlet.id]
            past = record.past.copy()
            past[state.time_us // HOUR_US % HOURS_KEPT] = self._now(state, outlet)
            outlets[outlet.id] = replace(record, past=past)
        return replace(state, outlets=outlets)

    def _now(self, state: CoreState, outlet: Described) -> tuple[float, float]:
        room = self.air.around(state, outlet)
        if room is None or any(self.air.faults(state, outlet.air_channels)):
            return math.nan, math.nan
        return float(np.median(room.temperature_k)), float(np.median(room.ratio))


def observe(expected: Array, observed: Array, reading: float, sd: float) -> tuple[Array, float]:
    """A stochastic ensemble Kalman update of one quantity, (members,).

    Burgers, van Leeuwen, Evensen, Mon. Wea. Rev. 126 (1998), with a scalar observation.

    Returns
    -------
    (array, float)
        What each member is to be corrected by, and how many standard deviations the reading is off.
    """
    variance = float(np.var(expected, ddof=1))
    total = variance + sd * sd
    gain = variance / total
    correction: Array = gain * (observed - expected)
    return correction, abs(reading - float(np.mean(expected))) / math.sqrt(total)


def _with(state: CoreState, outlet: str, record: OutletRecord) -> CoreState:
    return replace(state, outlets={**state.outlets, outlet: record})
