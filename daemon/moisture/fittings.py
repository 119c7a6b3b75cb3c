"""Dryers, baths, rated stations and self-emptying drains of one line, from step to step.

What stands here changes a station from what `line` makes of it: a refrigerated dryer lets air
leave drier than its own temperature would, a desiccant takes water up, a separator beyond its
rated flow keeps less, an ice bath warms once its ice is gone, a drain empties its trap. A line
without any of these passes through untouched, and at no cost.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from daemon.moisture import air, drains, dryers
from daemon.moisture.conditions import Conditions, Held, Offsets
from daemon.moisture.description import Desiccant, Fixed, Measured, Refrigerated
from daemon.moisture.drains import Opening
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array
from daemon.moisture.fitted import Bed, Fitted
from daemon.moisture.fitting_beliefs import (
    FittingParameters,
    drains_itself,
    may_be_let_down,
    rated_flow,
)
from daemon.moisture.flow import AirMoved
from daemon.moisture.plan import Plan
from daemon.moisture.power import Mask, Powered, Told, switched, works

LOAD_S = 120.0  # a dryer's cold mass, or a bowl, does not feel a burst of air: estimate
RECENT_S = 8 * 3600.0  # over how long "the recent load" of a cartridge or a bath is taken
MOST_PURGED = 0.9  # of the air that comes to twin beds


@dataclass(frozen=True, slots=True)
class FittingState:
    """What is carried from step to step. Rows are the stations of that kind in the line's order."""

    power: tuple[Powered, ...]  # a dryer each
    overloaded: tuple[float, ...]  # the share of members in which each dryer is overloaded
    load: Array  # (rated, members), kg/s of dry air, smoothed
    charge: Array  # (cartridges, members), kg of water in each
    uptake: Array  # (cartridges, members), kg/s of late
    heat: Array  # (baths, members), J that each has taken in since its ice was new
    melting: Array  # (baths, members), W of late
    begun_us: int  # since when uptake and melting are known
    draining: Array  # (drains, members), 1 while a level drain stands open
    limited: tuple[float, ...]  # per drain, the share of members in which it could not pass all
    empty_since_us: tuple[int, ...]  # per receiver with a petcock: without pressure since; -1: no


@dataclass(frozen=True, slots=True)
class Moment:
    """What the fittings look at in one step."""

    now: Conditions
    saturated: Array  # (stations, members), humidity ratio
    held: Mapping[str, Held]
    offsets: Offsets
    from_us: int
    to_us: int

    @property
    def dt_s(self) -> float:
        return (self.to_us - self.from_us) / 1e6


@dataclass(slots=True)
class Prepared:
    """One step as the fittings see it, before the water moves."""

    fitted: Fitted
    saturated: Array
    separation: Array
    load: Array
    overloaded: tuple[float, ...]


class Fittings:
    """The fittings of one line. All of its methods are pure."""

    def __init__(self, plan: Plan) -> None:
        self.plan = plan
        stations = plan.stations
        self.period_us = round(plan.line.period_s * 1e6)
        self.dryers = [(i, s.dryer) for i, s in enumerate(stations) if s.dryer is not None]
        self.rated = [i for i, s in enumerate(stations) if rated_flow(s) is not None]
        desiccants = [(i, d) for i, d in self.dryers if isinstance(d, Desiccant)]
        self.cartridges = [i for i, d in desiccants if d.holds is not None]
        self.twins = [i for i, d in desiccants if d.holds is None]
        self.baths = [i for i, s in enumerate(stations) if s.ice is not None]
        self.drains = [i for i, s in enumerate(stations) if drains_itself(s)]
        self.tanks = [i for i, s in enumerate(stations) if may_be_let_down(s)]
        self.present = bool(self.dryers or self.rated or self.baths or self.drains)

    # ---- beginning ----

    def begin(self, time_us: int, parameters: FittingParameters) -> FittingState:
        """Before the first tick: cartridges hold what they are said to, ice is new."""
        members = self.plan.line.members
        charge = np.zeros((len(self.cartridges), members))
        for row, i in enumerate(self.cartridges):
            dryer = self.plan.stations[i].dryer
            assert isinstance(dryer, Desiccant)
            charge[row] = np.minimum(dryer.held_at_start_kg, parameters.holds_kg[row])
        return FittingState(
            power=tuple(Powered() for _ in self.dryers),
            overloaded=tuple(0.0 for _ in self.dryers),
            load=np.zeros((len(self.rated), members)),
            charge=charge,
            uptake=np.zeros((len(self.cartridges), members)),
            heat=np.zeros((len(self.baths), members)),
            melting=np.zeros((len(self.baths), members)),
            begun_us=time_us,
            draining=np.zeros((len(self.drains), members)),
            limited=tuple(0.0 for _ in self.drains),
            empty_since_us=tuple(-1 for _ in self.tanks),
        )

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

    def renewed(self, state: FittingState, station: str) -> FittingState:
        """A cartridge was changed, or a bath was filled with new ice."""
        i = self.plan.index[station]
        charge, heat = state.charge.copy(), state.heat.copy()
        if i in self.cartridges:
            charge[self.cartridges.index(i)] = 0.0
        if i in self.baths:
            heat[self.baths.index(i)] = 0.0
        return replace(state, charge=charge, heat=heat)

    # ---- air and temperatures ----

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

    def warmed(
        self, state: FittingState, parameters: FittingParameters, now: Conditions
    ) -> Conditions:
        """A coil in a bath of ice water warms with the bath, up to the room's temperature."""
        if not self.baths:
            return now
        temperature = now.temperature_k.copy()
        for row, i in enumerate(self.baths):
            warmer = temperature[i] + dryers.bath_warmth(parameters.ice_kg[row], state.heat[row])
            temperature[i] = np.minimum(warmer, np.maximum(temperature[i], temperature[0]))
        return replace(now, temperature_k=temperature)

    def around(self, i: int, moment: Moment) -> Array:
        """The temperature of the air around a dryer, K, (members,): the intake's by default."""
        source = self.plan.stations[i].around
        intake: Array = moment.now.temperature_k[0]
        if isinstance(source, Fixed):
            return np.full(intake.shape, source.value)
        if isinstance(source, Measured):
            held = moment.held.get(source.channel)
            if held is not None and not held.stale(moment.to_us, self.period_us):
                bias = moment.offsets.channels[source.channel]
                measured: Array = held.value + bias * (source.give_or_take * HALF_WIDTH_TO_SD)
                return measured
        return intake

    # ---- one step ----

    def acts(self, state: FittingState, to_us: int) -> bool:
        """Whether anything here changes what the line would do by itself."""
        return self.present or bool(self.let_down_now(state, to_us))

    def prepare(
        self,
        state: FittingState,
        parameters: FittingParameters,
        separation: Array,
        moved: AirMoved,
        moment: Moment,
    ) -> Prepared:
        """What the fittings make of a step in which this air moves."""
        step = Prepared(Fitted(), moment.saturated, separation, state.load, ())
        if self.rated:
            keeps = -math.expm1(-moment.dt_s / LOAD_S)
            flow = moved.into[self.rated] / moment.dt_s
            step.load = state.load + (flow - state.load) * keeps
            self._separate(step, parameters)
        if self.dryers:
            step.saturated = moment.saturated.copy()
            step.overloaded = tuple(
                self._dry(number, step, state, parameters, moment)
                for number in range(len(self.dryers))
            )
        for row, i in enumerate(self.drains):
            step.fitted.drains[i] = self._opening(row, i, state, parameters, moment)
        step.fitted.coils = frozenset(self.baths)
        self._let_down(step.fitted, state, parameters, moment.to_us)
        return step

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
        moment: Moment,
    ) -> float:
        """One dryer; gives the share of members in which it is overloaded."""
        i, dryer = self.dryers[number]
        warms_us = dryers.WARMS_UP_US if isinstance(dryer, Refrigerated) else 0
        on = works(state.power[number], parameters.power[number], warms_us, moment.to_us)
        if not on.any():
            return 0.0
        load = self._load_of(number, step, parameters, moment)
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

    def _load_of(
        self, number: int, step: Prepared, parameters: FittingParameters, moment: Moment
    ) -> Array:
        """A dryer's flow as a share of what it can take now, (members,); 0 where nothing is said.

        Twin beds are taken to feel pressure and inlet temperature as refrigerated dryers do.
        """
        i, dryer = self.dryers[number]
        now = moment.now
        if i not in self.rated:
            return np.zeros(now.temperature_k[i].shape)
        row = self.rated.index(i)
        gauge = now.pressure_pa[i] - now.pressure_pa[0]
        inlet = now.temperature_k[self.plan.parent[i]]
        if isinstance(dryer, Refrigerated):
            around, asked = self.around(i, moment), dryer.dew_point.value
        else:
            around = np.full(inlet.shape, dryers.RATED_AROUND_K)
            asked = dryers.RATED_DEW_POINT_K
        takes = dryers.correction(gauge, inlet, around, np.full(inlet.shape, asked))
        load: Array = step.load[row] / (parameters.rated_kg_per_s[row] * takes)
        return load

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

    # ---- drains ----

    def _opening(
        self, row: int, i: int, state: FittingState, parameters: FittingParameters, moment: Moment
    ) -> Opening:
        trap = self.plan.stations[i].trap
        assert trap is not None
        how = drains.emptying_of(trap)
        most = parameters.passes_kg_per_s[row] * moment.dt_s
        opened, closes_at_kg = state.draining[row], how.closes_at_kg
        if trap.drain == "timer":
            count = drains.blows(parameters.phase[row], how.period_s, moment.from_us, moment.to_us)
            most = parameters.passes_kg_per_s[row] * how.open_s * count
        elif trap.drain == "pressure-off":
            gauge = moment.now.pressure_pa[i] - moment.now.pressure_pa[0]
            opened, closes_at_kg = (gauge < drains.LET_DOWN_PA).astype(np.float64), trap.heel_kg
        return Opening(trap.drain, parameters.opens_at_kg[row], closes_at_kg, most, opened)

    def without_pressure(
        self, state: FittingState, now: Conditions, held: Mapping[str, Held], to_us: int
    ) -> FittingState:
        """Since when each tank with a petcock has stood without pressure, by its gauge."""
        since = tuple(
            (before if before >= 0 else to_us) if self._empty(i, now, held) else -1
            for i, before in zip(self.tanks, state.empty_since_us, strict=True)
        )
        return state if since == state.empty_since_us else replace(state, empty_since_us=since)

    def _empty(self, i: int, now: Conditions, held: Mapping[str, Held]) -> bool:
        source = self.plan.stations[i].pressure
        if i not in now.measured or not isinstance(source, Measured):
            return False
        if source.gauge:
            return held[source.channel].value < drains.EMPTY_PA
        return float((now.pressure_pa[i] - now.pressure_pa[0]).mean()) < drains.EMPTY_PA

    def let_down_now(self, state: FittingState, to_us: int) -> list[int]:
        """The tanks, by their rows, that have stood without pressure for an hour."""
        return [
            row
            for row, since in enumerate(state.empty_since_us)
            if since >= 0 and to_us - since >= drains.EMPTY_AFTER_US
        ]

    def _let_down(
        self, fitted: Fitted, state: FittingState, parameters: FittingParameters, to_us: int
    ) -> None:
        for row in self.let_down_now(state, to_us):
            i = self.tanks[row]
            trap = self.plan.stations[i].trap
            assert trap is not None
            zero = np.zeros(self.plan.line.members)
            opened = drains.lets_down(parameters.let_down[row])
            fitted.drains[i] = Opening("petcock", zero, trap.heel_kg, zero, opened)

    # ---- after the water has moved ----

    def after(
        self,
        state: FittingState,
        parameters: FittingParameters,
        step: Prepared,
        moved: AirMoved,
        leaving_ratio: Array,
        moment: Moment,
    ) -> FittingState:
        """The fittings once the water has moved; `leaving_ratio` is (stations, members)."""
        weight = min(
            1.0, moment.dt_s / min(max((moment.to_us - state.begun_us) / 1e6, 1.0), RECENT_S)
        )
        charge, uptake = state.charge, state.uptake
        if self.cartridges:
            nothing = np.zeros(self.plan.line.members)
            beds = [step.fitted.beds.get(i) for i in self.cartridges]
            taken = np.array(
                [nothing if bed is None or bed.taken is None else bed.taken for bed in beds]
            )
            charge = charge + taken
            uptake = uptake + (taken / moment.dt_s - uptake) * weight
        heat, melting = state.heat, state.melting
        if self.baths:
            gained = self._bath_heat(parameters, step, moved, leaving_ratio, moment)
            heat = heat + gained
            melting = melting + (gained / moment.dt_s - melting) * weight
        draining, limited = state.draining, state.limited
        if self.drains:
            openings = [step.fitted.drains[i] for i in self.drains]
            draining = np.array([each.opened for each in openings])
            limited = tuple(
                before if each.kind == "timer" and not each.most.any() else each.limited
                for each, before in zip(openings, state.limited, strict=True)
            )
        return replace(
            state,
            overloaded=step.overloaded,
            load=step.load,
            charge=charge,
            uptake=uptake,
            heat=heat,
            melting=melting,
            draining=draining,
            limited=limited,
        )

    def _bath_heat(
        self,
        parameters: FittingParameters,
        step: Prepared,
        moved: AirMoved,
        leaving_ratio: Array,
        moment: Moment,
    ) -> Array:
        """Heat that each bath takes in during a step, J: from the air, and from its room."""
        now, found = moment.now, []
        for row, i in enumerate(self.baths):
            passed = moved.into[i]
            from_air = dryers.coil_heat(
                passed,
                leaving_ratio[i] * passed,
                step.fitted.condensed[i],
                now.temperature_k[self.plan.parent[i]],
                now.temperature_k[i],
                now.pressure_pa[i],
            )
            found.append(from_air + parameters.gain_w[row] * moment.dt_s)
        return np.array(found)

    # ---- what is left ----

    def charge_left_s(self, state: FittingState, parameters: FittingParameters, i: int) -> Array:
        """How long a cartridge lasts at the recent load, s, (members,); infinite without one."""
        row = self.cartridges.index(i)
        left = np.maximum(parameters.holds_kg[row] - state.charge[row], 0.0)
        return _lasts(left, state.uptake[row])

    def ice_left_s(self, state: FittingState, parameters: FittingParameters, i: int) -> Array:
        """How long a bath's ice lasts at the recent load, s, (members,)."""
        row = self.baths.index(i)
        left = dryers.ice_left(parameters.ice_kg[row], state.heat[row])
        return _lasts(left * dryers.MELTING_J_PER_KG, state.melting[row])

    def spent_share(self, state: FittingState, parameters: FittingParameters, i: int) -> float:
        """The share of members in which a cartridge has no charge left."""
        row = self.cartridges.index(i)
        spent = state.charge[row] >= parameters.holds_kg[row] * (1.0 - 1e-9)
        return float(np.count_nonzero(spent) / spent.size)


def _lasts(left: Array, rate: Array) -> Array:
    seconds: Array = np.where(rate > 0.0, left / np.maximum(rate, 1e-30), np.inf)
    return seconds
