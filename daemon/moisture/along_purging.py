"""Dry air over several ticks of a line with twin beds, which blow off a share of what comes.

That share hangs on their load, and the load on the air that comes: it goes tick by tick, with the
very functions of a single tick.
"""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any, cast

import numpy as np

from daemon.moisture import flow
from daemon.moisture.along_air import AirAlong
from daemon.moisture.drying import LOAD_S
from daemon.moisture.ensemble import Array
from daemon.moisture.model import Model, State


def purging_along(
    model: Model, state: State, drawn: Array, measured: Array, dt_s: float
) -> tuple[AirAlong, Array, Array]:
    """The air of several ticks; what was purged, cumulative, (purging, ticks, members), and the
    load of every rated station, (rated, ticks, members), after each."""
    plan, drying, figures = model.plan, model.fittings.drying, state.parameters.fittings
    fitted, keeps = state.fittings, -math.expm1(-dt_s / LOAD_S)
    states, moves, loads = [state.air], [], []
    for row, drew in enumerate(drawn):
        shares = drying.purged_share(fitted, figures)
        after, moved = flow.move(plan, states[-1], drew, measured[:, row], shares)
        load = fitted.load + (moved.into[drying.rated] / dt_s - fitted.load) * keeps
        fitted = replace(fitted, load=load)
        states.append(after)
        moves.append(moved)
        loads.append(load)
    stored = np.stack([each.stored for each in states], axis=1)
    used = np.array([each.used for each in moves])
    # by outlet or station, one after the other
    outlets, into, through = (
        cast(Any, list(np.stack(rows, axis=1)))
        for rows in zip(*((each.outlets, each.into, each.through) for each in moves), strict=True)
    )
    entered: list[Array | None] = [
        np.array([each.entered[number] for each in states[1:]])
        for number in range(len(plan.receivers))
    ]
    along = AirAlong(
        np.array([each.drawn for each in states[1:]]),
        np.array([each.used for each in states[1:]]),
        state.air.used,
        entered,
        measured,
        stored[:, 1:],
        stored[:, :-1],
        flow.AirMoved(drawn, used, outlets, into, through),
        len(drawn),
    )
    purged = np.stack([each.purged for each in states[1:]], axis=1)
    return along, purged, np.stack(loads, axis=1)
