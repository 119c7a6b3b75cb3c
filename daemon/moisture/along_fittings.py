"""Dryers, rated stations and baths at several ticks at once, as `Fittings` has them one by one.

The water goes station by station; each of these is worked out when the water comes to it. Whether a
dryer runs is the same at all of these ticks. Arrays are (ticks, members).
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np

from daemon.moisture.along_baths import BathAlong
from daemon.moisture.along_course import Ints
from daemon.moisture.along_drying import DryingAlong, Wet
from daemon.moisture.along_fading import Fading
from daemon.moisture.ensemble import Array
from daemon.moisture.fitting_beliefs import FittingParameters
from daemon.moisture.fitting_state import FittingState, Moment
from daemon.moisture.fittings import RECENT_S, Fittings
from daemon.moisture.line import WaterParameters


@dataclass(slots=True)
class FittingsAlong:
    """What the fittings make of several ticks."""

    fittings: Fittings
    before: FittingState
    figures: FittingParameters
    water: WaterParameters
    moment: Moment  # arrays are (..., ticks, members); its temperatures are warmed in place
    times_us: Ints
    load: Array | None  # (rated, ticks, members), where it was worked out already
    drying: DryingAlong = field(init=False)
    baths: dict[int, BathAlong] = field(init=False)  # by station
    weights: Array = field(init=False)  # (ticks,): of each tick, in what is known of late
    gone: dict[int, Array] = field(default_factory=dict)  # water that left with a purge

    def __post_init__(self) -> None:
        self.drying = DryingAlong(
            self.fittings.drying, self.before, self.figures, self.water, self.moment, self.load
        )
        self.baths = {
            i: BathAlong(
                i,
                self.fittings.plan.parent[i],
                self.before.heat[row],
                self.figures.ice_kg[row],
                self.figures.gain_w[row],
                self.water.evaporated[i],
                self.moment,
            )
            for row, i in enumerate(self.fittings.baths)
        }
        dt_s = self.moment.dt_s
        age_s = np.maximum((self.times_us - self.before.begun_us) / 1e6, dt_s)
        self.weights = np.minimum(1.0, dt_s / np.minimum(age_s, RECENT_S))

    @property
    def good(self) -> int:
        """So many ticks from the first are as here."""
        return min((bath.good for bath in self.baths.values()), default=len(self.times_us))

    # ---- as the water goes ----

    def arrives(self, i: int, wet: Wet) -> Wet:
        """What comes to a station, after a desiccant; a bath is as warm as what came makes it."""
        if i in self.baths:
            self.baths[i].arrives(wet.vapor, wet.liquid)
            return wet
        return self.drying.arrives(i, wet)

    def leaves(self, i: int, vapor_in: Array, vapor: Array) -> Array:
        """The vapor that leaves a station, after a purge; a bath takes in its heat."""
        if i in self.baths:
            self.baths[i].passed(vapor_in, vapor)
        if i not in self.fittings.plan.purging:
            return vapor
        into, through = self.moment.moved.into[i], self.moment.moved.through[i]
        self.gone[i] = vapor * ((into - through) / np.maximum(into, 1e-300))
        remains: Array = vapor - self.gone[i]
        return remains

    # ---- after one tick ----

    def beds(self, until: int) -> Array:
        """What desiccants took up, and what purges took along, in the first ticks."""
        every = [*self.drying.taken.values(), *self.gone.values()]
        found: Array = sum((each[:until].sum(axis=0) for each in every), start=np.zeros(()))
        return found

    def after(self, row: int, state: FittingState) -> FittingState:
        """The state after one tick, but for drains and whether dryers run."""
        dt_s, before, drying = self.moment.dt_s, self.before, self.drying
        charge, uptake = before.charge, before.uptake
        if len(charge):
            charge, uptake = charge.copy(), uptake * np.prod(1.0 - self.weights[: row + 1])
            for number, i in enumerate(self.fittings.drying.cartridges):
                if i in drying.taken:
                    charge[number] = drying.charge[i][row]
                    late = Fading(before.uptake[number], drying.taken[i] / dt_s, self.weights)
                    uptake[number] = late.at(row)
        heat, melting = before.heat, before.melting
        if len(heat):
            baths = [self.baths[i] for i in self.fittings.baths]
            heat = np.array([bath.heat[row] for bath in baths])
            melting = np.array(
                [
                    Fading(was, bath.gained / dt_s, self.weights).at(row)
                    for bath, was in zip(baths, before.melting, strict=True)
                ]
            )
        return replace(
            state,
            overloaded=drying.overloaded_at(row),
            load=drying.load_at(row),
            charge=charge,
            uptake=uptake,
            heat=heat,
            melting=melting,
        )
