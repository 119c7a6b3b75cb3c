"""Water through the line, one step: vapor saturates, liquid divides, traps fill and run over.

Everything is a mass, kg per member, so that a step in which no air moves needs no division, and
so that what comes in can be held against what is anywhere: the ledger.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from daemon.errors import BalanceError
from daemon.moisture.carried import Carried, carry
from daemon.moisture.ensemble import Array
from daemon.moisture.fitted import Bed, Fitted
from daemon.moisture.flow import AirMoved
from daemon.moisture.plan import Plan

BALANCE_TOLERANCE = 1e-9  # relative, of all water that ever came in


@dataclass(frozen=True, slots=True)
class WaterParameters:
    """What a member believes of the stations. Rows are stations; zero where it does not apply."""

    separation: Array  # (stations, members), of the liquid there, what its trap keeps
    evaporated: Array  # (stations, members), of arriving liquid, what may evaporate
    capacity_kg: Array  # (stations, members); 0 without a trap
    pool_kg_per_s: Array  # (members,), a receiver's pool into perfectly dry air


@dataclass(frozen=True, slots=True)
class WaterState:
    """Where the water is, kg per member. Rows are stations, or the plan's receivers for vapor."""

    trap: Array  # (stations, members)
    waiting: Array  # (stations, members): liquid on its way that no air has moved on yet
    spilled: Array  # (stations, members): the same, run over from a full trap; it stays liquid
    vapor: Array  # (receivers, members)
    leaving_ratio: Array  # (stations, members): humidity ratio of the air that last left
    carried: Carried  # out at the outlets, lately


@dataclass(frozen=True, slots=True)
class Ledger:
    """All water that ever moved, kg per member."""

    water_in: Array
    at_start: Array
    vapor_out: Array
    liquid_out: Array
    drained: Array
    corrected: Array
    shed: Array  # (stations, members): what traps were given, before running over
    beds: Array  # what desiccants took up, also what left with a purge or a changed cartridge
    passed: Array  # (stations, members): what left by drains that nobody was seen to open

    def residual(self, state: WaterState) -> Array:
        """What cannot be accounted for, as a share of all that came in or was there at first."""
        held = state.trap.sum(0) + state.waiting.sum(0) + state.spilled.sum(0) + state.vapor.sum(0)
        given = self.water_in + self.at_start + self.corrected
        gone = self.vapor_out + self.liquid_out + self.drained + self.beds + self.passed.sum(0)
        missing = given - (gone + held)
        share: Array = np.abs(missing) / np.maximum(self.water_in + self.at_start, 1e-6)
        return share

    def check(self, state: WaterState) -> None:
        """Raise BalanceError when water was made or lost."""
        worst = float(self.residual(state).max())
        if not worst <= BALANCE_TOLERANCE:
            raise BalanceError(
                f"the water balance is off by {worst:.3g} of all water (limit {BALANCE_TOLERANCE:g}"
                "): a fault in the model; please report it with the recorded readings"
            )


def new_ledger(plan: Plan, state: WaterState) -> Ledger:
    """A ledger that opens with what is already in the line."""
    zero = np.zeros(plan.line.members)
    held = state.trap.sum(0) + state.vapor.sum(0)
    none = np.zeros_like(state.trap)
    return Ledger(zero, held, zero, zero, zero, zero, none, zero, none)


def _arrive(
    vapor: Array, liquid: Array, evaporated: Array, room_for: Array
) -> tuple[Array, Array, Array]:
    """Liquid that may evaporates as far as there is room; what is beyond saturation condenses.

    Gives vapor, liquid, and the net that condensed (negative: evaporated).
    """
    room = room_for - vapor
    taken_up = np.minimum(evaporated * liquid, np.maximum(room, 0.0))
    condensed = np.maximum(-room, 0.0)
    return vapor + taken_up - condensed, liquid - taken_up + condensed, condensed - taken_up


@dataclass(slots=True)
class _Step:
    """The working arrays of one step."""

    plan: Plan
    parameters: WaterParameters
    saturated: Array  # (stations, members): humidity ratio at saturation
    air: AirMoved
    dt_s: float
    trap: Array
    waiting: Array
    spilled: Array
    vapor: Array
    ratio: Array
    shed: Array
    vapor_out: Array
    liquid_out: Array
    liquid_at: Array  # (outlets, members): the same, in this step, by outlet
    # what arrives at each station in this step
    vapor_in: Array
    liquid_in: Array
    spill_in: Array
    fitted: Fitted
    beds: Array
    passed: Array
    spills: bool  # whether any trap has run over, or may in this step

    def station(self, i: int, stored_before: Array | None) -> None:
        """Work out station `i` and pass on what leaves it."""
        if i in self.fitted.beds:
            self._bed(i, self.fitted.beds[i])
        vapor = self._passing(i) if stored_before is None else self._receiver(i, stored_before)
        if i in self.plan.purging:
            vapor = self._purge(i, vapor)
        self._hand_on(i, vapor)

    def _passing(self, i: int) -> Array:
        saturated = self.saturated[i] * self.air.into[i]
        vapor, liquid, condensed = _arrive(
            self.vapor_in[i], self.liquid_in[i], self.parameters.evaporated[i], saturated
        )
        if i in self.fitted.coils:
            self.fitted.condensed[i] = condensed
        self._divide(i, liquid)
        return vapor

    def _bed(self, i: int, bed: Bed) -> None:
        """A desiccant takes up drops, and vapor beyond what it leaves in the air."""
        vapor, liquid, spill = self.vapor_in[i], self.liquid_in[i], self.spill_in[i]
        excess = np.where(bed.works, np.maximum(vapor - bed.ratio * self.air.into[i], 0.0), 0.0)
        wet = np.where(bed.works, liquid, 0.0)
        wet_spill = np.where(bed.works, spill, 0.0)
        offered = excess + wet + wet_spill
        bed.taken = np.minimum(offered * bed.takes, bed.room)
        part = bed.taken / np.maximum(offered, 1e-300)
        self.vapor_in[i] = np.maximum(vapor - part * excess, 0.0)
        self.liquid_in[i] = np.maximum(liquid - part * wet, 0.0)
        self.spill_in[i] = np.maximum(spill - part * wet_spill, 0.0)
        self.beds += bed.taken

    def _purge(self, i: int, vapor: Array) -> Array:
        """Twin beds blow off a part of the air that they have dried, with its vapor."""
        into = self.air.into[i]
        gone = vapor * ((into - self.air.through[i]) / np.maximum(into, 1e-300))
        self.beds += gone
        remains: Array = vapor - gone
        return remains

    def _receiver(self, i: int, stored_before: Array) -> Array:
        row = self.plan.receivers.index(i)
        total_air = stored_before + self.air.into[i]
        saturated = self.saturated[i] * total_air
        vapor, liquid, _ = _arrive(
            self.vapor[row] + self.vapor_in[i],
            self.liquid_in[i],
            self.parameters.evaporated[i],
            saturated,
        )
        vapor = self._pool(i, vapor, saturated)
        self._divide(i, liquid)
        leaving: Array = vapor * (self.air.through[i] / total_air)
        self.vapor[row] = vapor - leaving
        return leaving

    def _pool(self, i: int, vapor: Array, saturated: Array) -> Array:
        """A receiver's pool gives a little back to air that has room."""
        deficit = 1.0 - vapor / saturated
        back = np.minimum(self.parameters.pool_kg_per_s * self.dt_s * deficit, self.trap[i])
        back = np.maximum(np.minimum(back, saturated - vapor), 0.0)
        self.trap[i] -= back
        moister: Array = vapor + back
        return moister

    def _divide(self, i: int, liquid: Array) -> None:
        """The trap keeps its share; the rest, and what runs over, waits for air to move it."""
        spill = self.spill_in[i]
        if self.plan.stations[i].trap is None:
            self.waiting[i] += liquid
            if self.spills:
                self.spilled[i] += spill
            return
        kept = self.parameters.separation[i]
        caught = kept * liquid
        self.waiting[i] += liquid - caught
        if self.spills:
            caught_spill = kept * spill
            self.spilled[i] += spill - caught_spill
            caught += caught_spill
        self.shed[i] += caught
        filled = self.trap[i] + caught
        if i in self.fitted.drains:
            left = self.fitted.drains[i].left(filled)
            self.passed[i] += filled - left
            filled = left
        if not self.spills:
            self.trap[i] = filled
            return
        over = np.maximum(filled - self.parameters.capacity_kg[i], 0.0)
        self.trap[i] = filled - over
        self.spilled[i] += over

    def _hand_on(self, i: int, vapor: Array) -> None:
        """What leaves a station arrives at the next ones, or is gone at an outlet."""
        through = self.air.through[i]
        moving = through > 0.0
        if moving.all():  # the usual case, and the same bits
            safe, liquid, spill = through, self.waiting[i].copy(), self.spilled[i].copy()
            np.divide(vapor, through, out=self.ratio[i])
            self.waiting[i] = 0.0
            self.spilled[i] = 0.0
        else:
            safe = np.where(moving, through, 1.0)
            self.ratio[i] = np.where(moving, vapor / safe, self.ratio[i])
            liquid = np.where(moving, self.waiting[i], 0.0)
            spill = np.where(moving, self.spilled[i], 0.0)
            self.waiting[i] -= liquid
            self.spilled[i] -= spill
        parts = parts_of(self.plan, self.air, i, safe)
        for flow, part in zip(self.plan.outflows[i], parts, strict=True):
            if flow.station >= 0:
                self.vapor_in[flow.station] += part_of(part, vapor)
                self.liquid_in[flow.station] += part_of(part, liquid)
                if self.spills:
                    self.spill_in[flow.station] += part_of(part, spill)
            else:
                gone = part_of(part, liquid + spill)
                self.vapor_out += part_of(part, vapor)
                self.liquid_out += gone
                self.liquid_at[flow.outlet] = gone


def part_of(part: Array | float, whole: Array) -> Array:
    """A part of `parts_of` of this; all of it, the usual case, is the very array."""
    if isinstance(part, float) and part == 1.0:
        return whole
    found: Array = part * whole
    return found


def parts_of(plan: Plan, moved: AirMoved, i: int, through: Array) -> list[Array | float]:
    """How the air that leaves a station divides; what the others leave goes the last way."""
    parts: list[Array | float] = []
    rest: Array | float = 1.0
    for flow in plan.outflows[i][:-1]:
        to_station = flow.station >= 0
        there = moved.into[flow.station] if to_station else moved.outlets[flow.outlet]
        parts.append(there / through)
        rest = rest - parts[-1]
    if plan.outflows[i]:
        parts.append(rest)
    return parts


def _may_spill(plan: Plan, parameters: WaterParameters, state: WaterState, water_in: Array) -> bool:
    """Whether a trap has run over, or could if all water on its way came to it in this step."""
    if not plan.traps:
        return bool(state.spilled.any())
    rows = list(plan.traps)
    on_its_way = water_in + state.waiting.sum(0) + state.vapor.sum(0)
    room = (parameters.capacity_kg[rows] - state.trap[rows]).min(0)
    return bool((room <= on_its_way).any()) or bool(state.spilled.any())


def step(
    plan: Plan,
    parameters: WaterParameters,
    state: WaterState,
    ledger: Ledger,
    air: AirMoved,
    stored_before: Array,
    intake_ratio: Array,
    saturated: Array,
    dt_s: float,
    fitted: Fitted | None = None,
) -> tuple[WaterState, Ledger]:
    """Advance the water by one step of `dt_s` seconds.

    Parameters
    ----------
    air : what dry air moved, kg.
    stored_before : dry air in the receivers before it, kg, (receivers, members).
    intake_ratio : humidity ratio of the air drawn in, (members,).
    saturated : humidity ratio at saturation of every station now, (stations, members).
    fitted : what some stations do besides; it is told what they did.
    """
    fitted = fitted or Fitted()
    shape = saturated.shape
    water_in = air.through[0] * intake_ratio
    work = _Step(
        plan,
        parameters,
        saturated,
        air,
        dt_s,
        trap=state.trap.copy(),
        waiting=state.waiting.copy(),
        spilled=state.spilled.copy(),
        vapor=state.vapor.copy(),
        ratio=state.leaving_ratio.copy(),
        shed=ledger.shed.copy(),
        vapor_out=ledger.vapor_out.copy(),
        liquid_out=ledger.liquid_out.copy(),
        liquid_at=np.zeros_like(air.outlets),
        vapor_in=np.zeros(shape),
        liquid_in=np.zeros(shape),
        spill_in=np.zeros(shape),
        fitted=fitted,
        beds=ledger.beds.copy() if fitted.beds or plan.purging else ledger.beds,
        passed=ledger.passed.copy() if fitted.drains else ledger.passed,
        spills=_may_spill(plan, parameters, state, water_in),
    )
    work.vapor_in[0] += water_in
    row = 0
    for i, station in enumerate(plan.stations):
        if station.kind == "receiver":
            work.station(i, stored_before[row])
            row += 1
        else:
            work.station(i, None)
    after = WaterState(
        work.trap,
        work.waiting,
        work.spilled,
        work.vapor,
        work.ratio,
        carry(plan, state.carried, air.outlets, work.liquid_at),
    )
    booked = replace(
        ledger,
        water_in=ledger.water_in + water_in,
        vapor_out=work.vapor_out,
        liquid_out=work.liquid_out,
        shed=work.shed,
        beds=work.beds,
        passed=work.passed,
    )
    return after, booked


def empty(
    plan: Plan, state: WaterState, ledger: Ledger, station: int, heel_kg: float
) -> tuple[WaterState, Ledger]:
    """A drain was opened: the trap keeps its heel; each member's own content is what drained."""
    return let_out(state, ledger, station, np.minimum(state.trap[station], heel_kg))


def let_out(
    state: WaterState, ledger: Ledger, station: int, left: Array
) -> tuple[WaterState, Ledger]:
    """A trap is left with this much, (members,), not more than it holds."""
    trap = state.trap.copy()
    drained = trap[station] - left
    trap[station] = left
    return replace(state, trap=trap), replace(ledger, drained=ledger.drained + drained)


def hold(state: WaterState, ledger: Ledger, station: int, held: Array) -> tuple[WaterState, Ledger]:
    """A trap is now believed to hold this much, (members,): booked as corrected, signed."""
    trap = state.trap.copy()
    corrected = ledger.corrected + (held - trap[station])
    trap[station] = held
    return replace(state, trap=trap), replace(ledger, corrected=corrected)
