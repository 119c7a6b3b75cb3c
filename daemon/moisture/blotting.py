"""Learning from a blotter test: whether liquid was carried to an outlet lately.

One-sided: a stain says that at least what shows was carried, a clean blotter that at most so much
was. A stain that hardly any member can believe in teaches nothing: the water may have stood in the
hose. It means `wait` all the same; that is not for this module.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from daemon.moisture.carried import Carried
from daemon.moisture.density import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array, standard_normal
from daemon.moisture.learning import SUSPECT_SIGMAS, Update
from daemon.moisture.margin import way
from daemon.moisture.model import Model, State
from daemon.moisture.observing import local_names, take

# What shows on a white absorbent that is held in the discharge for a minute: 0.035 g per reference
# m3 (a drop of 2 mg), give or take a quarter, so that air that passes the trade's own test is
# within the limit that is asked of it, 0.05 g per m3. Estimate, no source.
SHOWS_KG_PER_M3, SHOWS_LOG_GIVE_OR_TAKE = 3.5e-5, math.log(1.25)
LEAST_KG_PER_M3 = 5e-6  # what keeps the logarithm finite where nothing is carried


def observe(model: Model, state: State, outlet: int, stained: bool) -> State:
    """The state after a blotter test at an outlet, by its number, stained by water or clean."""
    carried = state.water.carried
    if not (carried.air[outlet] > 0.0).all():
        return state  # no air has passed yet
    expected = _log(carried.kg_per_m3[outlet])
    sd = SHOWS_LOG_GIVE_OR_TAKE * HALF_WIDTH_TO_SD
    seen = float(_log(np.array(SHOWS_KG_PER_M3)))
    variance = float(expected.var(ddof=1)) + sd * sd
    off = (seen - float(expected.mean())) / math.sqrt(variance)
    if stained and off > SUSPECT_SIGMAS:
        return state
    plan = model.plan
    name = f"blotter at {plan.line.outlets[outlet].id}"
    noise = standard_normal(plan.line.seed, name, plan.line.members, state.time_us)
    miss = seen + sd * noise - expected
    miss = np.maximum(miss, 0.0) if stained else np.minimum(miss, 0.0)
    if not miss.any():
        return state
    update = Update(expected, miss, variance)
    station = way(plan, outlet).station
    learned = take(model, state, local_names(plan, station), update)
    water = replace(learned.water, carried=_corrected(carried, outlet, update))
    return replace(learned, water=water)


def _log(kg_per_m3: Array) -> Array:
    logs: Array = np.log(kg_per_m3 + LEAST_KG_PER_M3)
    return logs


def _corrected(carried: Carried, outlet: int, update: Update) -> Carried:
    """What was carried lately is believed to be otherwise too."""
    moved = np.exp(update.expected + update.shift(update.expected)) - LEAST_KG_PER_M3
    liquid = carried.liquid.copy()
    air_m3 = carried.air[outlet] / REFERENCE_DRY_AIR_KG_PER_M3
    liquid[outlet] = np.maximum(moved, 0.0) * air_m3
    return Carried(liquid, carried.air)
