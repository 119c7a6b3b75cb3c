"""In which of several ticks what dryers and measured dew points tell the alarms may change."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from daemon.advance import Core
from daemon.dew_points_along import contradicting
from daemon.looks_along import changes, level, told
from daemon.moisture import dew_sensors, dryers
from daemon.moisture.along import Stretch
from daemon.moisture.description import Refrigerated
from daemon.moisture.ensemble import Array


def fitting_rows(core: Core, found: Stretch, ticks: int) -> Iterator[int]:
    """The ticks in which a condition may change."""
    yield from _overloaded(core, found, ticks)
    yield from _spent(core, found, ticks)
    yield from _cold_rooms(core, found, ticks)
    yield from _dew_points(core, found, ticks)


def _overloaded(core: Core, found: Stretch, ticks: int) -> Iterator[int]:
    """A dryer that more comes to than it can take, or no longer."""
    fitted = found.water.fitted
    if fitted is None:
        return
    for number, was in enumerate(found.before.fittings.overloaded):
        shares = fitted.drying.overloaded.get(number, np.zeros(ticks))
        yield from changes(int(level(was)), level(shares[:ticks]))


def _spent(core: Core, found: Stretch, ticks: int) -> Iterator[int]:
    """A cartridge without charge."""
    drying, state = core.model.fittings.drying, found.before
    figures = state.parameters.fittings
    for row, i in enumerate(drying.cartridges):
        fitted = found.water.fitted
        if fitted is None or i not in fitted.drying.charge:
            continue
        was = drying.spent_share(state.fittings, figures, i)
        charge = fitted.drying.charge[i][:ticks]
        if was == 0.0 and (charge[-1] < 0.99 * figures.holds_kg[row]).all():
            continue
        spent = charge >= figures.holds_kg[row] * (1.0 - 1e-9)
        yield from changes(int(level(was)), level(spent.mean(axis=1)))


def _cold_rooms(core: Core, found: Stretch, ticks: int) -> Iterator[int]:
    """A refrigerated dryer that runs in a room that is too cold for it."""
    drying, state = core.model.fittings.drying, found.before
    fitted = found.water.fitted
    for number, (i, dryer) in enumerate(drying.dryers):
        if (
            fitted is None
            or not isinstance(dryer, Refrigerated)
            or state.fittings.power[number].off
        ):
            continue
        was = drying.around(i, state.conditions, state.held, state.offsets, state.time_us)
        rows = drying.around_of(number, fitted.moment)[:ticks]
        if min(was.min(), rows.min()) >= dryers.MAY_FREEZE_BELOW_K:
            continue
        yield from changes(int(_cold(was)), _cold(rows))


def _cold(around_k: Array) -> np.ndarray:
    found: np.ndarray = level((around_k < dryers.MAY_FREEZE_BELOW_K).mean(axis=-1))
    return found


def _dew_points(core: Core, found: Stretch, ticks: int) -> Iterator[int]:
    """A measured dew point that cannot be."""
    plan = core.model.plan
    for i in dew_sensors.stations(plan):
        was = dew_sensors.contradicts(plan, found.before, i)
        rows = contradicting(plan, found, i)[:ticks]
        yield from told(was, rows)
