"""Dryers and rated separators at several ticks at once, as `Drying` has them one by one.

What costs is only worked out where it can matter: the corrections of a dryer's rating where its
load may come near it, a load tick by tick where some member's may, a cartridge's charge in order
where some member's may run out.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np

from daemon.moisture import air, dryers
from daemon.moisture.along_air import running_sum
from daemon.moisture.along_fading import Fading
from daemon.moisture.description import Desiccant, Refrigerated
from daemon.moisture.drying import LOAD_S, Drying
from daemon.moisture.ensemble import Array
from daemon.moisture.fitting_beliefs import FittingParameters
from daemon.moisture.fitting_state import FittingState, Moment
from daemon.moisture.line import WaterParameters
from daemon.moisture.power import Mask, works

NEAR = 1.0 - 1e-9  # of what a station can take: below it rounding makes no overload


@dataclass(frozen=True, slots=True)
class Wet:
    """What comes to a station: (ticks, members) each; None stands for nothing at any tick."""

    vapor: Array
    liquid: Array | None = None
    spill: Array | None = None


@dataclass(slots=True)
class DryingAlong:
    """The dryers and rated stations of one line over several ticks."""

    drying: Drying
    before: FittingState
    figures: FittingParameters
    water: WaterParameters
    moment: Moment
    worked_out: Array | None = None  # (rated, ticks, members): loads, where they are known
    separation: dict[int, Array] = field(default_factory=dict)  # by station, where it falls
    dried: dict[int, Array] = field(default_factory=dict)  # what air can hold there, by station
    taken: dict[int, Array] = field(default_factory=dict)  # by desiccants, kg in each tick
    charge: dict[int, Array] = field(default_factory=dict)  # of cartridges, kg after each tick
    overloaded: dict[int, Array] = field(default_factory=dict)  # by dryer: (ticks,), if ever
    _loads: list[Fading] = field(init=False)  # by rated station
    _rows: dict[int, Array] = field(default_factory=dict)  # loads after each tick, by rated station
    _numbers: dict[int, int] = field(init=False)  # of dryers, by station

    def __post_init__(self) -> None:
        ticks = self.moment.now.temperature_k.shape[1]
        dt_s, into = self.moment.dt_s, self.moment.moved.into
        weights = np.full(ticks, -math.expm1(-dt_s / LOAD_S))
        self._numbers = {i: number for number, (i, _) in enumerate(self.drying.dryers)}
        self._loads = [
            Fading(was, into[i] / dt_s, weights)
            for i, was in zip(self.drying.rated, self.before.load, strict=True)
        ]
        if self.worked_out is not None:
            self._rows = dict(enumerate(self.worked_out))
        for row, i in enumerate(self.drying.rated):
            if i not in self._numbers:
                self._separate(row, i)

    def load_at(self, row: int) -> Array:
        """Every rated station's load after one tick, (rated, members)."""
        found = [
            self._rows[number][row] if number in self._rows else load.at(row)
            for number, load in enumerate(self._loads)
        ]
        return np.array(found).reshape(self.before.load.shape)

    def overloaded_at(self, row: int) -> tuple[float, ...]:
        """The share of members in which each dryer is overloaded, after one tick."""
        return tuple(
            float(self.overloaded[number][row]) if number in self.overloaded else 0.0
            for number in range(len(self.drying.dryers))
        )

    # ---- loads ----

    def _load(self, row: int) -> Array:
        """A rated station's load after every tick, kg/s of dry air."""
        if row not in self._rows:
            self._rows[row] = self._loads[row].rows()
        return self._rows[row]

    def _separate(self, row: int, i: int) -> None:
        """A separator beyond its rated flow keeps less."""
        rated = self.figures.rated_kg_per_s[row]
        if (self._loads[row].most <= NEAR * rated).all():
            return
        self.separation[i] = dryers.separation_at(
            self.water.separation[i], self._load(row) / rated, self.figures.falls[row]
        )

    def _overload(self, number: int, on: Mask) -> Array | None:
        """A dryer's flow as a share of what it can take; None where none is overloaded."""
        i, _ = self.drying.dryers[number]
        if i not in self.drying.rated:
            return None
        row = self.drying.rated.index(i)
        if (self._loads[row].most <= NEAR * self._can_take(number, row)).all():
            return None
        takes = self.drying.takes(number, self.moment)
        load: Array = self._load(row) / (self.figures.rated_kg_per_s[row] * takes)
        over = load > 1.0
        if not over.any():
            return None
        self.overloaded[number] = np.count_nonzero(on & over, axis=1) / on.size
        return load

    def _can_take(self, number: int, row: int) -> Array:
        """The least that a dryer can take at any of the ticks, kg/s, (members,): factors fall
        with temperatures and rise with the pressure."""
        i, dryer = self.drying.dryers[number]
        now = self.moment.now
        gauge = now.pressure_pa[i].min(axis=0) - now.pressure_pa[0].max(axis=0)
        inlet = now.temperature_k[self.drying.plan.parent[i]].max(axis=0)
        around = self.drying.around_of(number, self.moment).max(axis=0)
        asked = np.full(inlet.shape, self.drying.asked_of(dryer))
        least: Array = self.figures.rated_kg_per_s[row] * dryers.correction(
            gauge, inlet, around, asked
        )
        return least

    # ---- dryers ----

    def arrives(self, i: int, wet: Wet) -> Wet:
        """What comes to a station, after its desiccant; sets what air can hold after it."""
        number = self._numbers.get(i)
        if number is None:
            return wet
        _, dryer = self.drying.dryers[number]
        warms_us = dryers.WARMS_UP_US if isinstance(dryer, Refrigerated) else 0
        power = self.before.power[number]
        on = works(power, self.figures.power[number], warms_us, self.moment.to_us)
        if not on.any():
            return wet
        load = self._overload(number, on)
        dew_point = self.figures.dew_point_k[number]
        pressure = self.moment.now.pressure_pa[i]
        ratio = air.saturated_humidity_ratio_unchecked(dew_point, pressure)
        if isinstance(dryer, Desiccant):
            return self._bed(i, on, ratio, load, wet)
        if load is not None:
            self._rises(number, dryer, load, ratio)
        wet_ratio = self.moment.saturated[i]
        dried = np.minimum(wet_ratio, ratio)
        self.dried[i] = dried if on.all() else np.where(on, dried, wet_ratio)
        return wet

    def _rises(self, number: int, dryer: Refrigerated, load: Array, ratio: Array) -> None:
        """What an overloaded refrigerated dryer leaves in the air, in place."""
        i, now = self.drying.dryers[number][0], self.moment.now
        rows = np.flatnonzero((load > 1.0).any(axis=1))
        set_to = self.figures.dew_point_k[number]
        rise = dryers.dew_point_rise(load[rows], dryer.dew_point.value)
        inlet = now.temperature_k[self.drying.plan.parent[i]][rows]
        dew_point = np.minimum(
            set_to + rise * self.figures.overload[number], np.maximum(set_to, inlet)
        )
        ratio[rows] = air.saturated_humidity_ratio_unchecked(dew_point, now.pressure_pa[i][rows])

    def _bed(self, i: int, on: Mask, ratio: Array, load: Array | None, wet: Wet) -> Wet:
        """A desiccant takes up drops, and vapor beyond what it leaves in the air."""
        excess = np.maximum(wet.vapor - ratio * self.moment.moved.into[i], 0.0)
        drops, spill = wet.liquid, wet.spill
        if not on.all():
            excess = excess * on
            drops, spill = (None if each is None else each * on for each in (drops, spill))
        offered = excess
        for each in (drops, spill):
            offered = offered if each is None else offered + each
        taken = offered
        if i in self.drying.cartridges:
            taken = self._charged(i, offered)
        elif load is not None:
            taken = offered / np.maximum(load, 1.0)
        self.taken[i] = taken
        part: Array | float = 1.0
        if taken is not offered:
            part = taken / np.maximum(offered, 1e-300)
        return Wet(
            np.maximum(wet.vapor - part * excess, 0.0),
            _left(wet.liquid, part, drops),
            _left(wet.spill, part, spill),
        )

    def _charged(self, i: int, offered: Array) -> Array:
        """What a cartridge takes up, as long as it has charge."""
        row = self.drying.cartridges.index(i)
        charge, holds = self.before.charge[row], self.figures.holds_kg[row]
        self.charge[i] = running_sum(charge, offered)[1:]
        if (self.charge[i][-1] <= holds).all():
            return offered
        taken = np.empty_like(offered)
        for after, took, came in zip(self.charge[i], taken, offered, strict=True):
            np.subtract(holds, charge, out=took)
            np.maximum(took, 0.0, out=took)
            np.minimum(took, came, out=took)
            np.add(charge, took, out=after)
            charge = after
        return taken


def _left(whole: Array | None, part: Array | float, dried: Array | None) -> Array | None:
    """What a desiccant leaves of drops."""
    if whole is None or dried is None or (whole is dried and isinstance(part, float)):
        return None
    left: Array = np.maximum(whole - part * dried, 0.0)
    return left
