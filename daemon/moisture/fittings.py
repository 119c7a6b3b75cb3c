"""Dryers, baths, rated stations and self-emptying drains of one line, from step to step.

What stands here changes a station from what `line` makes of it: a refrigerated dryer lets air
leave drier than its own temperature would, a desiccant takes water up, a separator beyond its
rated flow keeps less, an ice bath warms once its ice is gone, a drain empties its trap. A line
without any of these passes through untouched, and at no cost.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from daemon.moisture import drains, dryers
from daemon.moisture.conditions import Conditions, Held
from daemon.moisture.description import Measured
from daemon.moisture.drains import Opening
from daemon.moisture.drying import Drying, lasts_s
from daemon.moisture.ensemble import Array, spread
from daemon.moisture.fitted import Fitted
from daemon.moisture.fitting_beliefs import FittingParameters, drains_itself, may_be_let_down
from daemon.moisture.fitting_state import FittingState, Moment, Prepared
from daemon.moisture.plan import Plan
from daemon.moisture.power import Powered

Times = int | npt.NDArray[np.int64]

RECENT_S = 8 * 3600.0  # over how long "the recent load" of a cartridge or a bath is taken


class Fittings:
    """The fittings of one line. All of its methods are pure."""

    def __init__(self, plan: Plan) -> None:
        self.plan = plan
        stations = plan.stations
        self.drying = Drying(plan)
        self.baths = [i for i, s in enumerate(stations) if s.ice is not None]
        self.drains = [i for i, s in enumerate(stations) if drains_itself(s)]
        self.tanks = [i for i, s in enumerate(stations) if may_be_let_down(s)]
        acting = (self.drying.dryers, self.drying.rated, self.baths, self.drains)
        self.present = any(acting)

    # ---- beginning, and a new element ----

    def begin(self, time_us: int, parameters: FittingParameters) -> FittingState:
        """Before the first tick: cartridges hold what they are said to, ice is new."""
        members = self.plan.line.members
        baths, dried = (len(self.baths), members), self.drying.dryers
        return FittingState(
            power=tuple(Powered() for _ in dried),
            overloaded=tuple(0.0 for _ in dried),
            load=np.zeros((len(self.drying.rated), members)),
            charge=self.drying.charge_at_start(parameters),
            uptake=np.zeros((len(self.drying.cartridges), members)),
            heat=np.zeros(baths),
            melting=np.zeros(baths),
            begun_us=time_us,
            draining=np.zeros((len(self.drains), members)),
            limited=tuple(0.0 for _ in self.drains),
            cartridges=tuple(self.plan.stations[i].id for i in self.drying.cartridges),
            baths=tuple(self.plan.stations[i].id for i in self.baths),
            empty_since_us=tuple(-1 for _ in self.tanks),
            low_since_us=tuple(0 for _ in self.tanks),  # nobody has seen them hold any
        )

    def renewed(self, state: FittingState, station: str) -> FittingState:
        """A cartridge was changed, or a bath was filled with new ice; else nothing changes."""
        i = self.plan.index[station]
        charge, heat = state.charge.copy(), state.heat.copy()
        if i in self.drying.cartridges:
            charge[self.drying.cartridges.index(i)] = 0.0
        if i in self.baths:
            heat[self.baths.index(i)] = 0.0
        return replace(state, charge=charge, heat=heat)

    def carried_over(self, fresh: FittingState, old: FittingState) -> FittingState:
        """After a change of the line's description: cartridges of the same name hold what they
        held, and ice is as far gone."""
        members = self.plan.line.members
        charge, heat = fresh.charge.copy(), fresh.heat.copy()
        for rows, names, was, held in (
            (charge, fresh.cartridges, old.cartridges, old.charge),
            (heat, fresh.baths, old.baths, old.heat),
        ):
            for row, name in enumerate(names):
                if name in was:
                    rows[row] = spread(held[was.index(name)], members)
        return replace(fresh, charge=charge, heat=heat)

    # ---- one step ----

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

    def acts(self, state: FittingState, to_us: int) -> bool:
        """Whether anything here changes what the line would do by itself."""
        return self.present or bool(self.let_down_now(state, to_us))

    def prepare(
        self,
        state: FittingState,
        parameters: FittingParameters,
        separation: Array,
        moment: Moment,
    ) -> Prepared:
        """What the fittings make of a step, before the water moves."""
        fitted = Fitted(coils=frozenset(self.baths))
        step = Prepared(moment, fitted, moment.saturated, separation, state.load, ())
        self.drying.prepare(step, state, parameters)
        for row, i in enumerate(self.drains):
            span_us = moment.from_us, moment.to_us
            fitted.drains[i] = self.opening(
                row, i, state, parameters, moment.now.pressure_pa, span_us, moment.dt_s
            )
        fitted.drains |= self.let_down(state, parameters, moment.to_us)
        return step

    def after(
        self,
        state: FittingState,
        parameters: FittingParameters,
        step: Prepared,
        leaving_ratio: Array,
    ) -> FittingState:
        """The fittings once the water has moved; `leaving_ratio` is (stations, members)."""
        moment = step.moment
        age_s = max((moment.to_us - state.begun_us) / 1e6, moment.dt_s)
        weight = min(1.0, moment.dt_s / min(age_s, RECENT_S))
        charge, uptake = state.charge, state.uptake
        if self.drying.cartridges:
            taken = self.drying.taken(step)
            charge = charge + taken
            uptake = uptake + (taken / moment.dt_s - uptake) * weight
        heat, melting = state.heat, state.melting
        if self.baths:
            gained = self._bath_heat(parameters, step, leaving_ratio)
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

    # ---- drains ----

    def opening(
        self,
        row: int,
        i: int,
        state: FittingState,
        parameters: FittingParameters,
        pressure_pa: Array,
        span_us: tuple[Times, Times],
        dt_s: float,
    ) -> Opening:
        """What the drain in a row, at station `i`, can do in a step; or in several, where times are
        columns and pressures (stations, steps, members)."""
        trap = self.plan.stations[i].trap
        assert trap is not None
        how = drains.emptying_of(trap)
        most = parameters.passes_kg_per_s[row] * dt_s
        opened, closes_at_kg = state.draining[row], how.closes_at_kg
        if trap.drain == "timer":
            count = drains.blows(parameters.phase[row], how.period_s, *span_us)
            most = parameters.passes_kg_per_s[row] * how.open_s * count
        elif trap.drain == "pressure-off":
            gauge = pressure_pa[i] - pressure_pa[0]
            opened, closes_at_kg = (gauge < drains.LET_DOWN_PA).astype(np.float64), trap.heel_kg
        return Opening(trap.drain, parameters.opens_at_kg[row], closes_at_kg, most, opened)

    def without_pressure(
        self, state: FittingState, now: Conditions, held: Mapping[str, Held], to_us: int
    ) -> FittingState:
        """Since when each tank with a petcock has stood without pressure, by its gauge, and since
        when it has not been known to hold a bar."""
        empty, low = [], []
        for i, empty_us, low_us in zip(
            self.tanks, state.empty_since_us, state.low_since_us, strict=True
        ):
            gauge_pa = self._gauge_pa(i, now, held)
            without = gauge_pa is not None and gauge_pa < drains.EMPTY_PA
            pressed = gauge_pa is not None and gauge_pa >= drains.LOW_PA
            empty.append(_since(empty_us, without, to_us))
            low.append(_since(low_us, not pressed, to_us))
        if tuple(empty) == state.empty_since_us and tuple(low) == state.low_since_us:
            return state
        return replace(state, empty_since_us=tuple(empty), low_since_us=tuple(low))

    def _gauge_pa(self, i: int, now: Conditions, held: Mapping[str, Held]) -> float | None:
        """What a tank's gauge shows, Pa; None where none speaks."""
        source = self.plan.stations[i].pressure
        if i not in now.measured or not isinstance(source, Measured):
            return None
        if source.gauge:
            return held[source.channel].value
        return float((now.pressure_pa[i] - now.pressure_pa[0]).mean())

    def let_down_now(self, state: FittingState, to_us: int) -> list[int]:
        """The tanks, by their rows, that have stood without pressure for an hour, and lost it
        faster than through a leak."""
        return [
            row
            for row, (since, low) in enumerate(
                zip(state.empty_since_us, state.low_since_us, strict=True)
            )
            if since >= 0
            and to_us - since >= drains.EMPTY_AFTER_US
            and since - low <= drains.LETS_DOWN_WITHIN_US
        ]

    def let_down(
        self, state: FittingState, parameters: FittingParameters, to_us: int
    ) -> dict[int, Opening]:
        """The drains, by station, of tanks that were let down."""
        found = {}
        for row in self.let_down_now(state, to_us):
            i = self.tanks[row]
            trap = self.plan.stations[i].trap
            assert trap is not None
            zero = np.zeros(self.plan.line.members)
            opened = drains.lets_down(parameters.let_down[row])
            found[i] = Opening("petcock", zero, trap.heel_kg, zero, opened)
        return found

    # ---- baths ----

    def _bath_heat(
        self, parameters: FittingParameters, step: Prepared, leaving_ratio: Array
    ) -> Array:
        """Heat that each bath takes in during a step, J: from the air, and from its room."""
        now, dt_s, found = step.moment.now, step.moment.dt_s, []
        for row, i in enumerate(self.baths):
            passed = step.moment.moved.into[i]
            from_air = dryers.coil_heat(
                passed,
                leaving_ratio[i] * passed,
                step.fitted.condensed[i],
                now.temperature_k[self.plan.parent[i]],
                now.temperature_k[i],
                now.pressure_pa[i],
            )
            found.append(from_air + parameters.gain_w[row] * dt_s)
        return np.array(found)

    def ice_left_s(self, state: FittingState, parameters: FittingParameters, i: int) -> Array:
        """How long the ice of the bath at station `i` lasts at the recent load, s, (members,)."""
        row = self.baths.index(i)
        left = dryers.ice_left(parameters.ice_kg[row], state.heat[row])
        return lasts_s(left * dryers.MELTING_J_PER_KG, state.melting[row])


def _since(before_us: int, is_so: bool, now_us: int) -> int:
    """Since when something has been so; -1 where it is not."""
    if not is_so:
        return -1
    return before_us if before_us >= 0 else now_us
