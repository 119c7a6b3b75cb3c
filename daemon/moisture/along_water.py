"""Water through the line at several ticks at once, as `line.step` moves it one by one.

Along time only three things hang on the tick before: a receiver's vapor and pool, liquid that
waits for air, and a trap that is full. The rest is worked out station by station for all ticks
together. Arrays are (ticks, members); None stands for nothing at any tick.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from daemon.moisture import carried
from daemon.moisture.along_air import AirAlong, running_sum
from daemon.moisture.along_course import Bools, Ints
from daemon.moisture.along_drains import DrainAlong
from daemon.moisture.along_drying import Wet
from daemon.moisture.along_fittings import FittingsAlong
from daemon.moisture.along_receiver import Pool, Receiver, filled
from daemon.moisture.along_waiting import Waiting, released
from daemon.moisture.ensemble import Array
from daemon.moisture.line import Ledger, WaterParameters, WaterState, part_of, parts_of
from daemon.moisture.plan import Plan


@dataclass(slots=True)
class _Place:
    """What happens at one station."""

    vapor_out: Array
    caught: Array | None = None  # what its trap was given
    caught_sum: Array | None = None  # (members,): the same in all
    back: Array | None = None  # what its pool gave back to the air
    back_sum: Array | None = None  # (members,): the same in all
    trap: Array | None = None  # what it held after each tick; None: the sum of the above
    over: Array | None = None  # what ran over, of a receiver taken tick by tick
    waiting: Waiting = field(init=False)
    spilled: Waiting = field(init=False)


@dataclass(slots=True)
class WaterAlong:
    """The water of several ticks, worked out from the state before them."""

    plan: Plan
    parameters: WaterParameters
    state: WaterState
    ledger: Ledger
    air: AirAlong
    saturated: Array  # (stations, ticks, members)
    intake_ratio: Array
    dt_s: float
    drains: Mapping[int, DrainAlong]  # by station
    fitted: FittingsAlong | None = None  # None: nothing dries, and nothing is rated
    places: list[_Place] = field(default_factory=list)
    water_in: Array = field(init=False)
    vapor: dict[int, Array] = field(default_factory=dict)  # by receiver's row, after each tick
    vapor_out: Array | None = None
    liquid_out: Array | None = None
    liquid_at: dict[int, Array] = field(default_factory=dict)  # by outlet
    # what comes to each station
    _vapor_in: list[Array | None] = field(init=False)
    _liquid_in: list[Array | None] = field(init=False)
    _spill_in: list[Array | None] = field(init=False)
    _holds: list[Array] = field(init=False)  # humidity ratio at saturation after its dryer
    _kept: list[Array] = field(init=False)  # the share of liquid that each trap keeps
    _waits: tuple[bool, bool] = field(init=False)  # whether liquid does, or what ran over
    _known: dict[int, Bools | None] = field(default_factory=dict)
    _left: dict[tuple[int, int], _LastMoving] = field(default_factory=dict)

    def __post_init__(self) -> None:
        count = len(self.plan.stations)
        self._vapor_in, self._liquid_in = [None] * count, [None] * count
        self._spill_in = [None] * count
        self._holds, self._kept = list(self.saturated), list(self.parameters.separation)
        if self.fitted is not None:
            for i, falls in self.fitted.drying.separation.items():
                self._kept[i] = falls
        self._waits = bool(self.state.waiting.any()), bool(self.state.spilled.any())
        self.water_in = self.air.moved.through[0] * self.intake_ratio
        self._vapor_in[0] = self.water_in
        for i in range(len(self.plan.stations)):
            self._station(i)

    # ---- one station ----

    def _station(self, i: int) -> None:
        vapor_in = self._vapor_in[i]
        if vapor_in is None:
            vapor_in = np.zeros_like(self.water_in)
        if self.fitted is not None:
            vapor_in = self._fitted(self.fitted, i, vapor_in)
        place = _Place(vapor_in)
        self.places.append(place)
        if i in self.plan.receivers:
            liquid = self._receiver(i, vapor_in, place)
        else:
            liquid = self._passing(i, vapor_in, place)
            if self.fitted is not None:
                place.vapor_out = self.fitted.leaves(i, vapor_in, place.vapor_out)
        new, spill = self._divide(i, liquid, place)
        self._hand_on(i, new, spill, place)

    def _fitted(self, fitted: FittingsAlong, i: int, vapor_in: Array) -> Array:
        """The vapor that comes to a station, after what dries there."""
        wet = fitted.arrives(i, Wet(vapor_in, self._liquid_in[i], self._spill_in[i]))
        self._liquid_in[i], self._spill_in[i] = wet.liquid, wet.spill
        self._holds[i] = fitted.drying.dried.get(i, self._holds[i])
        return wet.vapor

    def _passing(self, i: int, vapor_in: Array, place: _Place) -> Array | None:
        """The liquid at a station after vapor has condensed, or liquid evaporated."""
        liquid = self._liquid_in[i]
        possible = self._holds[i] * self.air.moved.into[i]
        if liquid is None:
            place.vapor_out = np.minimum(vapor_in, possible, out=possible)
            condensed: Array = vapor_in - place.vapor_out
            return condensed if condensed.max() > 0.0 else None
        wetted = self.parameters.evaporated[i] * liquid
        wetted += vapor_in
        place.vapor_out = np.minimum(wetted, possible, out=possible)
        found: Array = np.subtract(vapor_in, place.vapor_out, out=wetted)
        found += liquid
        return found

    def _divide(
        self, i: int, liquid: Array | None, place: _Place
    ) -> tuple[Array | None, Array | None]:
        """What goes on from a station: liquid that may evaporate, and what ran over."""
        spill = self._spill_in[i]
        if self.plan.stations[i].trap is None:
            return liquid, spill
        kept = self._kept[i]
        caught = None if liquid is None else kept * liquid
        goes_on = None if liquid is None or caught is None else liquid - caught
        if spill is not None:
            of_spill = kept * spill
            caught = of_spill if caught is None else caught + of_spill
            spill = spill - of_spill
        place.caught = caught
        over = self._over(i, place)
        if over is not None:
            spill = over if spill is None else spill + over
        return goes_on, spill

    def _over(self, i: int, place: _Place) -> Array | None:
        """What a trap cannot hold."""
        start, capacity = self.state.trap[i], self.parameters.capacity_kg[i]
        if i in self.drains and place.trap is None:
            return self._drained(i, place)
        if place.trap is not None:  # a receiver that was worked out tick by tick
            return place.over
        given = start
        if place.caught is not None:
            place.caught_sum = place.caught.sum(axis=0)
            given = start + place.caught_sum
        if not (given > capacity).any():
            return None
        caught = np.zeros_like(self.water_in) if place.caught is None else place.caught
        if place.back is not None and place.back.any():
            place.trap, over_of_tank = filled(start, caught - place.back, capacity)
            return over_of_tank
        rows = np.minimum(running_sum(start, caught), capacity)
        place.trap = rows[1:]
        over: Array = np.maximum(rows[:-1] + caught - capacity, 0.0)
        return over

    def _drained(self, i: int, place: _Place) -> Array | None:
        """The same of a trap that empties itself: in order."""
        capacity, drain = self.parameters.capacity_kg[i], self.drains[i]
        caught = np.zeros_like(self.water_in) if place.caught is None else place.caught
        trap, over, in_trap = np.empty_like(caught), np.empty_like(caught), self.state.trap[i]
        for n, more in enumerate(caught):
            left = drain.left(n, in_trap + more)
            over[n] = np.maximum(left - capacity, 0.0)
            in_trap = trap[n] = left - over[n]
        place.trap = trap
        return over if over.any() else None

    # ---- onwards ----

    def _hand_on(self, i: int, liquid: Array | None, spill: Array | None, place: _Place) -> None:
        through, moving = self.air.moved.through[i], self._moving(i)
        shape, state = through.shape, self.state
        waits, spilt = self._waits
        if moving is not None and self._moves_on(i) and not (waits and state.waiting[i].any()):
            place.waiting = Waiting(state.waiting[i])
        else:
            liquid, place.waiting = released(state.waiting[i], liquid, moving, shape, waits)
        spill, place.spilled = released(state.spilled[i], spill, moving, shape, spilt)
        several = len(self.plan.outflows[i]) > 1
        safe = np.where(moving, through, 1.0) if several and moving is not None else through
        parts = parts_of(self.plan, self.air.moved, i, safe)
        for flow, part in zip(self.plan.outflows[i], parts, strict=True):
            vapor = part_of(part, place.vapor_out)
            wet, ran_over = (
                None if each is None else part_of(part, each) for each in (liquid, spill)
            )
            if flow.station >= 0:
                self._vapor_in[flow.station] = vapor
                self._liquid_in[flow.station] = wet
                self._spill_in[flow.station] = ran_over
                continue
            self.vapor_out = _plus(self.vapor_out, vapor)
            gone = _plus(wet, ran_over)
            if gone is not None:
                self.liquid_out = _plus(self.liquid_out, gone)
                self.liquid_at[flow.outlet] = gone

    def _moves_on(self, i: int) -> bool:
        """Whether liquid comes to a station, or condenses there, only while air leaves it: what
        comes leaves at once, and it comes with a share of what left the one before."""
        air = self.air.moved
        return (
            i not in self.plan.receivers
            and self.plan.parent[i] >= 0
            and air.into[i] is air.through[i]
        )

    def _moving(self, i: int) -> Bools | None:
        """Whether air leaves a station; None: it does at every tick."""
        through = self.air.moved.through[i]
        if id(through) not in self._known:  # many stations pass on the very same air
            self._known[id(through)] = None if through.min() > 0.0 else through > 0.0
        return self._known[id(through)]

    # ---- a receiver ----

    def _receiver(self, i: int, vapor_in: Array, place: _Place) -> Array | None:
        """Vapor mixes, a pool gives back; gives the liquid there.

        With u = vapor + what came, S what the air there can hold: v = min(u, S), and the pool
        gives back p (1 - v / S), as long as it has that; what is left after the share r of the air
        has gone is (1 - r) (v + that).
        """
        row = self.plan.receivers.index(i)
        liquid, moved = self._liquid_in[i], self.air.moved
        total = self.air.before[row] + moved.into[i]
        possible = self.saturated[i] * total
        goes = moved.through[i] / total
        wetted = None if liquid is None else self.parameters.evaporated[i] * liquid
        comes = vapor_in if wetted is None else vapor_in + wetted
        pool = np.zeros(comes.shape[1])
        if self.plan.stations[i].trap is not None:
            pool = self.parameters.pool_kg_per_s * self.dt_s
        course = Receiver(comes, possible, goes, pool, self.state.vapor[row])
        held = course.mix()
        found = course.came - held  # what condensed, less what evaporated
        if wetted is not None and liquid is not None:
            found = found - wetted
            found += liquid
        back = pool * (1.0 - held / possible)
        small = bool((pool > possible).any())  # hardly more than nothing: never a tank
        if small or not self._pool_suffices(i, back, place):
            return self._in_order(i, course, wetted, place)
        place.back = back
        vapor = held + back
        place.vapor_out = vapor * goes
        self.vapor[row] = vapor - place.vapor_out
        return found

    def _pool_suffices(self, i: int, back: Array, place: _Place) -> bool:
        """Whether a trap could give back all that it was asked for: then what it holds, and
        whether it runs over, is no matter to the air."""
        if self.plan.stations[i].trap is None:
            return True
        if i in self.drains:
            return False
        asked, most = back.sum(axis=0), back.max(axis=0)
        place.back_sum = asked
        least = np.minimum(self.state.trap[i], self.parameters.capacity_kg[i]) - asked
        return bool((asked == 0.0).all() or (least >= most).all())

    def _in_order(self, i: int, course: Receiver, wetted: Array | None, place: _Place) -> Array:
        """The same where the pool may run empty, or a drain empties it."""
        liquid, spill = self._liquid_in[i], self._spill_in[i]
        kept = self.parameters.separation[i]
        pool = Pool(
            self.state.trap[i],
            self.parameters.capacity_kg[i],
            kept,
            None if wetted is None or liquid is None else liquid - wetted,
            None if spill is None else kept * spill,
            self.drains.get(i),
        )
        found = course.in_order(pool)
        place.back, place.trap = found.back, found.trap
        place.vapor_out = found.held * course.goes
        self.vapor[self.plan.receivers.index(i)] = found.held * (1.0 - course.goes)
        place.over = found.over if found.over.any() else None
        return found.liquid

    # ---- what is where, after one tick ----

    def _caught(self, place: _Place, until: int) -> Array | None:
        """What a trap was given in the first ticks, (members,)."""
        if place.caught is None:
            return None
        if until == len(place.caught) and place.caught_sum is not None:
            return place.caught_sum
        caught: Array = place.caught[:until].sum(axis=0)
        return caught

    def _trap_at(self, i: int, row: int, caught: Array | None) -> Array:
        """What a trap holds after one tick, kg, (members,)."""
        place, held = self.places[i], self.state.trap[i]
        if place.trap is not None:
            there: Array = place.trap[row]
            return there
        if caught is not None:
            held = held + caught
        if place.back is not None:
            whole = row + 1 == len(place.back) and place.back_sum is not None
            held = held - (place.back_sum if whole else place.back[: row + 1].sum(axis=0))
        kept: Array = held
        return kept

    def trap_between(self, i: int) -> tuple[Array, Array]:
        """What a trap held at least and at most from before the first tick on, kg, (members,)."""
        place, start = self.places[i], self.state.trap[i]
        if place.trap is not None:
            least, most = place.trap.min(axis=0), place.trap.max(axis=0)
            return np.minimum(start, least), np.maximum(start, most)
        given = self._caught(place, len(self.water_in))
        back = place.back_sum
        if back is None and place.back is not None:
            back = place.back.sum(axis=0)
        return start if back is None else start - back, start if given is None else start + given

    def trap_rows(self, i: int) -> Array:
        """What a trap holds after every tick, kg."""
        place = self.places[i]
        if place.trap is None:
            zero = np.zeros_like(self.water_in)
            caught = zero if place.caught is None else place.caught
            gained = caught if place.back is None else caught - place.back
            place.trap = running_sum(self.state.trap[i], gained)[1:]
        return place.trap

    def on_its_way_rows(self, i: int) -> Array:
        """Liquid that waits at a station after every tick, kg."""
        place, ticks = self.places[i], len(self.water_in)
        return place.waiting.all(ticks) + place.spilled.all(ticks)

    def at(self, row: int) -> tuple[WaterState, Ledger]:
        """The state and the ledger after one tick."""
        plan, state, ledger, until = self.plan, self.state, self.ledger, row + 1
        trap, waiting, spilled = state.trap.copy(), state.waiting.copy(), state.spilled.copy()
        shed = ledger.shed.copy()
        waits, spilt = self._waits
        for i, place in enumerate(self.places):
            if plan.stations[i].trap is not None:
                caught = self._caught(place, until)
                trap[i] = self._trap_at(i, row, caught)
                if caught is not None:
                    shed[i] += caught
            if waits or place.waiting.rows is not None:
                waiting[i] = place.waiting.at(row)
            if spilt or place.spilled.rows is not None:
                spilled[i] = place.spilled.at(row)
        ratio, lately = self.leaving(row)
        vapor = np.array([self.vapor[n][row] for n in range(len(plan.receivers))])
        after = WaterState(
            trap,
            waiting,
            spilled,
            vapor.reshape(state.vapor.shape),
            ratio,
            lately,
        )
        booked = replace(
            ledger,
            water_in=ledger.water_in + self.water_in[:until].sum(axis=0),
            vapor_out=_booked(ledger.vapor_out, self.vapor_out, until),
            liquid_out=_booked(ledger.liquid_out, self.liquid_out, until),
            shed=shed,
            beds=ledger.beds if self.fitted is None else ledger.beds + self.fitted.beds(until),
            passed=self._passed(until),
        )
        return after, booked

    def _passed(self, until: int) -> Array:
        if not self.drains:
            return self.ledger.passed
        passed = self.ledger.passed.copy()
        for i, drain in self.drains.items():
            passed[i] += drain.passed[:until].sum(axis=0)
        return passed

    def leaving(self, row: int) -> tuple[Array, carried.Carried]:
        """The humidity ratios of the air that last left every station after one tick, and what
        outlets carried lately."""
        ratio = self.state.leaving_ratio.copy()
        for i in range(len(self.places)):
            self._leaving(i, row, ratio[i])
        return ratio, self._carried(row + 1)

    def _leaving(self, i: int, row: int, ratio: Array) -> None:
        """The humidity ratio of the air that last left a station, in place."""
        vapor, through = self.places[i].vapor_out, self.air.moved.through[i]
        key = id(through), row
        if key not in self._left:  # many stations pass on the very same air
            self._left[key] = _last_moving(through, row)
        ever, when = self._left[key]
        if ever is None:
            np.divide(vapor[row], through[row], out=ratio)
        else:
            ratio[ever] = vapor[when, ever] / through[when, ever]

    def _carried(self, until: int) -> carried.Carried:
        """What outlets carried lately: each tick's part fades with the air that left after it."""
        before = self.state.carried
        liquid, air = before.liquid.copy(), before.air.copy()
        memory, last = carried.memory_kg(self.plan)[:, 0], math.nan
        for number in range(len(air)):
            used, used_before = self.air.used[:until], self.air.used_before
            scale = self.plan.line.outlets[number].share / memory[number]
            if self.plan.purging:  # a part of what is used never comes to an outlet
                used = self.air.moved.outlets[number][:until].cumsum(axis=0)
                used_before, scale = np.zeros_like(used_before), 1.0 / memory[number]
            if self.plan.purging or not math.isclose(scale, last, rel_tol=1e-14):
                last, fades = scale, np.exp((used_before - used[-1]) * scale)
                weight = np.exp((used - used[-1]) * scale)  # else as of the outlet before
            air[number] *= fades
            liquid[number] *= fades
            air[number] += (self.air.moved.outlets[number][:until] * weight).sum(axis=0)
            gone = self.liquid_at.get(number)
            if gone is not None:
                liquid[number] += (gone[:until] * weight).sum(axis=0)
        return carried.Carried(liquid, air)


# Which members' air ever left, and in which tick it last did; None, None: all's did in the last.
_LastMoving = tuple[Ints | None, Ints | None]


def _last_moving(through: Array, row: int) -> _LastMoving:
    if through[row].min() > 0.0:
        return None, None
    moving = through[: row + 1] > 0.0
    ever = np.flatnonzero(moving.any(axis=0))
    return ever, row - moving[::-1].argmax(axis=0)[ever]


def _plus(one: Array | None, other: Array | None) -> Array | None:
    if one is None or other is None:
        return one if other is None else other
    return one + other


def _booked(before: Array, steps: Array | None, until: int) -> Array:
    return before if steps is None else before + steps[:until].sum(axis=0)
