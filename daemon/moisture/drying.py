"""Dryers and rated separators of one line: whether they run, their load, what they take out."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from daemon.moisture import air, dryers
from daemon.moisture.conditions import Conditions, Held, Offsets
from daemon.moisture.description import Desiccant, Fixed, Measured, Refrigerated
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array
from daemon.moisture.fitted import Bed
from daemon.moisture.fitting_beliefs import FittingParameters, rated_flow
from daemon.moisture.fitting_state import FittingState, Moment, Prepared
from daemon.moisture.plan import Plan
from daemon.moisture.power import Mask, Told, foreseen, switched, works

LOAD_S = 120.0  # a dryer's cold mass, or a bowl, does not feel a burst of air: estimate
MOST_PURGED = 0.9  # of the air that comes to twin beds


class Drying:
    """The dryers and rated stations of one line. All of its methods are pure."""

    def __init__(self, plan: Plan) -> None:
        self.plan = plan
        self.period_us = round(plan.line.period_s * 1e6)
        stations = plan.stations
        self.dryers = [(i, s.dryer) for i, s in enumerate(stations) if s.dryer is not None]
        self.rated = [i for i, s in enumerate(stations) if rated_flow(s) is not None]
        desiccants = [(i, d) for i, d in self.dryers if isinstance(d, Desiccant)]
        self.cartridges = [i for i, d in desiccants if d.holds is not None]
        self.twins = [i for i, d in desiccants if d.holds is None]

    def charge_at_start(self, parameters: FittingParameters) -> Array:
        """What each cartridge holds before the first tick, kg, (cartridges, members)."""
        charge = np.zeros((len(self.cartridges), self.plan.line.members))
        for row, i in enumerate(self.cartridges):
            dryer = self.plan.stations[i].dryer
            assert isinstance(dryer, Desiccant)
            charge[row] = np.minimum(dryer.held_at_start_kg, parameters.holds_kg[row])
        return charge

    def switched(
        self, state: FittingState, told: Mapping[str, Told], is_open: bool, to_us: int
    ) -> FittingState:
        """Which dryers run at the end of a step, and since when."""
        if not self.dryers:
            return state
        power = tuple(
            switched(
                before,
                dryer.power,
                told.get(dryer.power.contact or "", ()),
                is_open,
                to_us,
                self.period_us,
            )
            for (_, dryer), before in zip(self.dryers, state.power, strict=True)
        )
        return replace(state, power=power)

    def foreseen(self, state: FittingState, is_open: bool, at_us: int) -> FittingState:
        """Which dryers will run at a time to come: as they do now, but for the shop's hours."""
        if not self.dryers:
            return state
        power = tuple(
            foreseen(before, dryer.power, is_open, at_us)
            for (_, dryer), before in zip(self.dryers, state.power, strict=True)
        )
        return replace(state, power=power)

    def purged_share(self, state: FittingState, parameters: FittingParameters) -> Array | None:
        """Of the air that comes to each purging dryer, what it blows off, (purging, members).

        Twin beds blow off a share of their rated flow for as long as they run, however little
        air is used: at a low flow that is most of it.
        """
        if not self.plan.purging:
            return None
        numbers = {i: number for number, (i, _) in enumerate(self.dryers)}
        shares = np.zeros((len(self.plan.purging), self.plan.line.members))
        for row, i in enumerate(self.plan.purging):
            if not state.power[numbers[i]].off:
                rated = self.rated.index(i)
                blown = parameters.purge[self.twins.index(i)] * parameters.rated_kg_per_s[rated]
                load = state.load[rated]
                part = np.where(load > 0.0, blown / np.maximum(load, 1e-12), 0.0)
                shares[row] = np.minimum(part, MOST_PURGED)
        return shares

    def prepare(self, step: Prepared, state: FittingState, parameters: FittingParameters) -> None:
        """What dryers and separators make of a step."""
        moment = step.moment
        if self.rated:
            keeps = -math.expm1(-moment.dt_s / LOAD_S)
            flow = moment.moved.into[self.rated] / moment.dt_s
            step.load = state.load + (flow - state.load) * keeps
            self._separate(step, parameters)
        if self.dryers:
            step.saturated = moment.saturated.copy()
            step.overloaded = tuple(
                self._dry(number, step, state, parameters) for number in range(len(self.dryers))
            )

    def _separate(self, step: Prepared, parameters: FittingParameters) -> None:
        """Separators beyond their rated flow keep less."""
        step.separation = step.separation.copy()
        for row, i in enumerate(self.rated):
            if self.plan.stations[i].dryer is None:
                load = step.load[row] / parameters.rated_kg_per_s[row]
                step.separation[i] = dryers.separation_at(
                    step.separation[i], load, parameters.falls[row]
                )

    def _dry(
        self,
        number: int,
        step: Prepared,
        state: FittingState,
        parameters: FittingParameters,
    ) -> float:
        """One dryer; gives the share of members in which it is overloaded."""
        moment = step.moment
        i, dryer = self.dryers[number]
        warms_us = dryers.WARMS_UP_US if isinstance(dryer, Refrigerated) else 0
        on = works(state.power[number], parameters.power[number], warms_us, moment.to_us)
        if not on.any():
            return 0.0
        load = self._load_of(number, step, parameters)
        dew_point = parameters.dew_point_k[number]
        if isinstance(dryer, Refrigerated):
            rise = dryers.dew_point_rise(load, dryer.dew_point.value)
            dew_point = np.minimum(
                dew_point + rise * parameters.overload[number],
                np.maximum(dew_point, moment.now.temperature_k[self.plan.parent[i]]),
            )
        ratio = air.saturated_humidity_ratio_unchecked(dew_point, moment.now.pressure_pa[i])
        if isinstance(dryer, Refrigerated):
            wet = step.saturated[i]
            step.saturated[i] = np.where(on, np.minimum(wet, ratio), wet)
        else:
            step.fitted.beds[i] = self._bed(i, on, ratio, load, state, parameters)
        return float(np.count_nonzero(on & (load > 1.0)) / on.size)

    def _load_of(self, number: int, step: Prepared, parameters: FittingParameters) -> Array:
        """A dryer's flow as a share of what it can take now, (members,); 0 where nothing is said.

        Twin beds are taken to feel pressure and inlet temperature as refrigerated dryers do.
        """
        i, _ = self.dryers[number]
        if i not in self.rated:
            return np.zeros(step.moment.now.temperature_k[i].shape)
        row = self.rated.index(i)
        takes = self.takes(number, step.moment)
        load: Array = step.load[row] / (parameters.rated_kg_per_s[row] * takes)
        return load

    def takes(self, number: int, moment: Moment) -> Array:
        """What a dryer can take, as a share of its rated flow, (members,)."""
        i, dryer = self.dryers[number]
        now = moment.now
        gauge = now.pressure_pa[i] - now.pressure_pa[0]
        inlet = now.temperature_k[self.plan.parent[i]]
        asked = np.full(inlet.shape, self.asked_of(dryer))
        return dryers.correction(gauge, inlet, self.around_of(number, moment), asked)

    def asked_of(self, dryer: Refrigerated | Desiccant) -> float:
        """The pressure dew point at which a dryer's rating is taken, K."""
        refrigerated = isinstance(dryer, Refrigerated)
        return dryer.dew_point.value if refrigerated else dryers.RATED_DEW_POINT_K

    def around_of(self, number: int, moment: Moment) -> Array:
        """The temperature around a dryer; around twin beds, which do not feel it, the rated one."""
        i, dryer = self.dryers[number]
        if isinstance(dryer, Refrigerated):
            return self.around(i, moment.now, moment.held, moment.offsets, moment.to_us)
        return np.full(moment.now.temperature_k[0].shape, dryers.RATED_AROUND_K)

    def _bed(
        self,
        i: int,
        on: Mask,
        ratio: Array,
        load: Array,
        state: FittingState,
        parameters: FittingParameters,
    ) -> Bed:
        if i in self.twins:
            takes = 1.0 / np.maximum(load, 1.0)
            return Bed(ratio, on, takes, np.full(ratio.shape, np.inf))
        row = self.cartridges.index(i)
        room = np.maximum(parameters.holds_kg[row] - state.charge[row], 0.0)
        return Bed(ratio, on, np.ones(ratio.shape), room)

    def around(
        self, i: int, now: Conditions, held: Mapping[str, Held], offsets: Offsets, at_us: int
    ) -> Array:
        """The temperature of the air around a dryer, K, (members,): the intake's by default."""
        source = self.plan.stations[i].around
        intake: Array = now.temperature_k[0]
        if isinstance(source, Fixed):
            return np.full(intake.shape, source.value)
        if isinstance(source, Measured):
            last = held.get(source.channel)
            if last is not None and not last.stale(at_us, self.period_us):
                bias = offsets.channels[source.channel]
                measured: Array = last.value + bias * (source.give_or_take * HALF_WIDTH_TO_SD)
                return measured
        return intake

    # ---- cartridges ----

    def taken(self, step: Prepared) -> Array:
        """What each cartridge took up in a step, kg, (cartridges, members)."""
        nothing = np.zeros(self.plan.line.members)
        beds = [step.fitted.beds.get(i) for i in self.cartridges]
        return np.array(
            [nothing if bed is None or bed.taken is None else bed.taken for bed in beds]
        )

    def charge_left_s(self, state: FittingState, parameters: FittingParameters, i: int) -> Array:
        """How long the cartridge at station `i` lasts at the recent load, s, (members,)."""
        row = self.cartridges.index(i)
        left = np.maximum(parameters.holds_kg[row] - state.charge[row], 0.0)
        return lasts_s(left, state.uptake[row])

    def spent_share(self, state: FittingState, parameters: FittingParameters, i: int) -> float:
        """The share of members in which a cartridge has no charge left."""
        row = self.cartridges.index(i)
        spent = state.charge[row] >= parameters.holds_kg[row] * (1.0 - 1e-9)
        return float(np.count_nonzero(spent) / spent.size)


def lasts_s(left: Array, rate: Array) -> Array:
    """How long something lasts at a rate, s; infinite where nothing goes."""
    seconds: Array = np.where(rate > 0.0, left / np.maximum(rate, 1e-30), np.inf)
    return seconds
