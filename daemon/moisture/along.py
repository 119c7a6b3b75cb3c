"""The model over several ticks at once: what `Model.step` gives one by one.

For lines and times in which nothing acts that hangs on every single tick; `Model.step` does those.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np

from daemon.moisture import along_air
from daemon.moisture.along_air import AirAlong
from daemon.moisture.along_conditions import conditions
from daemon.moisture.along_course import Course
from daemon.moisture.along_drains import drains_along, fitted_after
from daemon.moisture.along_fittings import FittingsAlong
from daemon.moisture.along_purging import purging_along
from daemon.moisture.along_water import WaterAlong
from daemon.moisture.conditions import Conditions, Held
from daemon.moisture.contact import ContactState
from daemon.moisture.ensemble import Array
from daemon.moisture.fitting_state import FittingState, Moment
from daemon.moisture.flow import AirState, PumpWatch
from daemon.moisture.model import Model, State
from daemon.moisture.outlook import Sight
from daemon.moisture.power import Powered


class Switches(Protocol):
    """What contacts and a gauge tell of the compressor and of dryers, by tick."""

    def contact(self, row: int) -> ContactState: ...

    def pump(self, row: int) -> PumpWatch: ...

    def contact_unknown_us(self, row: int) -> int: ...

    def power(self, row: int) -> tuple[Powered, ...]: ...


@dataclass(slots=True)
class Stretch:
    """Several ticks of one line. Rows are ticks."""

    model: Model
    before: State
    course: Course
    switches: Switches
    on_s: Array  # (ticks, 1) or (ticks, members)
    duties_known: list[float]  # before the first tick, and after each
    duty: dict[int, Array]
    conditions: Conditions
    saturated: Array
    intake_ratio: Array
    drawn: Array
    air: AirAlong
    water: WaterAlong
    purged: Array | None  # cumulative, (purging, ticks, members); None: nothing purges

    @property
    def good(self) -> int:
        """So many ticks from the first are as worked out here."""
        fitted = self.water.fitted
        return self.air.good if fitted is None else min(self.air.good, fitted.good)

    def state(self, row: int) -> State:
        """The state after one tick."""
        water, ledger = self.water.at(row)
        return replace(
            self.dry_state(row), water=water, ledger=ledger, fittings=self._fittings(row)
        )

    def _fittings(self, row: int) -> FittingState:
        state = self.before.fittings
        if self.water.fitted is not None:
            state = self.water.fitted.after(row, state)
        draining, limited = fitted_after(self.model.fittings, state, self.water.drains, row)
        power = self.switches.power(row)
        return replace(state, power=power, draining=draining, limited=limited)

    def leaving_state(self, row: int) -> State:
        """The same, but for traps, for what waits, and for the ledger, which are as before all."""
        ratio, lately = self.water.leaving(row)
        water = replace(self.before.water, leaving_ratio=ratio, carried=lately)
        return replace(self.dry_state(row), water=water)

    def dry_state(self, row: int) -> State:
        """The same, but for the water and its ledger, which are as before all."""
        before, now, air = self.before, self.conditions, self.air
        humidity = now.relative_humidity
        duty = before.duty
        if self.duty:
            duty = duty.copy()
            for i, rows in self.duty.items():
                duty[i] = rows[row]
        return replace(
            before,
            time_us=int(self.course.times_us[row]),
            held=self._held(row),
            contact=self.switches.contact(row),
            pump=self.switches.pump(row),
            contact_unknown_us=self.switches.contact_unknown_us(row),
            duty_known=self.duties_known[row + 1],
            duty=duty,
            air=AirState(
                measured=air.measured[:, row].copy(),
                first=before.air.first,
                stored=air.stored[:, row].copy(),
                drawn=air.drawn[row].copy(),
                used=air.used[row].copy(),
                entered=self._entered(row),
                seen=before.air.seen,
                purged=before.air.purged if self.purged is None else self.purged[:, row].copy(),
                ratio=before.air.ratio,
            ),
            conditions=Conditions(
                now.temperature_k[:, row].copy(),
                now.pressure_pa[:, row].copy(),
                humidity[row].copy() if humidity.ndim == 2 else humidity,
                now.measured,
            ),
            saturated=self.saturated[:, row].copy(),
        )

    def _entered(self, row: int) -> Array:
        before, drawn = self.before.air, self.air.drawn[row]
        entered = np.empty_like(before.entered)
        for number, rows in enumerate(self.air.entered):
            so_far = before.entered[number] + (drawn - before.drawn) if rows is None else rows[row]
            entered[number] = so_far
        return entered

    def _held(self, row: int) -> dict[str, Held]:
        held = dict(self.before.held)
        for name, values in self.course.values.items():
            held[name] = Held(float(values[row]), int(self.course.told_us[name][row]))
        return held

    def sight(self, row: int) -> Sight:
        """What is seen at the intake after one tick."""
        return Sight(
            int(self.course.times_us[row]),
            self.conditions.temperature_k[0, row],
            self.intake_ratio[row],
            self.air.drawn[row],
            {name: float(values[row]) for name, values in self.speaking},
        )

    @property
    def speaking(self) -> list[tuple[str, Array]]:
        """The channels that are not silent, and what they said by each tick."""
        silent = self.course.silent
        return [each for each in self.course.values.items() if not silent[each[0]]]

    def moved(self, first: int, last: int) -> tuple[Array, Array, Array]:
        """Seconds run, air drawn in and used in the rows from `first` on, before `last`:
        (members,) each."""
        part = slice(first, last)
        on_s = np.broadcast_to(self.on_s[part], self.drawn[part].shape).sum(axis=0)
        return on_s, self.drawn[part].sum(axis=0), self.air.moved.used[part].sum(axis=0)


def stretch(model: Model, state: State, course: Course, switches: Switches) -> Stretch | None:
    """Several ticks after a state; None where they must be taken one by one."""
    plan, parameters = model.plan, state.parameters
    dt_s = model.period_us / 1e6
    known = along_air.duties_known(model, state.duty_known, course, dt_s)
    on_s = along_air.on_time(model, state, course, known)
    duty = along_air.duties(model, state, on_s, dt_s)
    found = conditions(model, state, course, duty)
    if found is None:
        return None
    now, held = found
    rows = zip(plan.receivers, state.air.seen, strict=True)
    if any(receiver in now.measured and not seen for receiver, seen in rows):
        return None  # the first sight of a gauge
    saturated, intake_ratio = along_air.saturation(now)
    drawn = on_s * model.delivered(parameters, now, intake_ratio)
    if (meter := plan.line.compressor.flow_meter) is not None:
        to_us = int(course.times_us[-1])
        drawn = model.metered(meter, held, state.offsets, to_us, dt_s, drawn)
    measured = along_air.measured_along(model, state, now)
    purged = loads = None
    if plan.purging:
        air, purged, loads = purging_along(model, state, drawn, measured, dt_s)
    else:
        air = along_air.moved_along(plan, state.air, drawn, measured)
    fitted = None
    if model.fittings.drying.dryers or model.fittings.drying.rated or model.fittings.baths:
        to_us = state.time_us + model.period_us
        moment = Moment(now, saturated, air.moved, held, state.offsets, state.time_us, to_us)
        fitted = FittingsAlong(
            model.fittings,
            state.fittings,
            parameters.fittings,
            parameters.water,
            moment,
            course.times_us,
            loads,
        )
    water = WaterAlong(
        plan,
        parameters.water,
        state.water,
        state.ledger,
        air,
        saturated,
        intake_ratio,
        dt_s,
        drains_along(model, state, now, course.times_us),
        fitted,
    )
    return Stretch(
        model,
        state,
        course,
        switches,
        on_s,
        known,
        duty,
        now,
        saturated,
        intake_ratio,
        drawn,
        air,
        water,
        purged,
    )
