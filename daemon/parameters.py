"""What is believed of a shop's figures, before and after learning, in people's units."""

from __future__ import annotations

from typing import Any

from daemon.advance import Core
from daemon.moisture.beliefs import CUP, Parameters, draw, names, parameters
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array, percentiles
from daemon.state import CoreState


def parameters_table(core: Core, state: CoreState) -> dict[str, dict[str, Any]]:
    """5, 50 and 95 % of every figure at the start and now, by name with its unit."""
    plan = core.model.plan
    prior = draw(plan, names(plan))
    before = _figures(core, parameters(plan, prior), prior[CUP])
    now = _figures(core, state.model.parameters, state.model.beliefs[CUP])
    return {
        name: {"before": _three(values), "after": _three(now[name])}
        for name, values in before.items()
    }


def _three(values: Array) -> dict[str, float]:
    low, middle, high = (round(float(value), 5) for value in percentiles(values))
    return {"p05": low, "p50": middle, "p95": high}


def _figures(core: Core, known: Parameters, cup: Array) -> dict[str, Array]:
    plan, site = core.model.plan, core.site
    found: dict[str, Array] = {"delivered_l_min": known.delivered_m3_per_s * 60_000.0}
    for row, receiver in enumerate(plan.receivers):
        found[f"{plan.stations[receiver].id}_volume_l"] = known.volume_m3[row] * 1e3
    for station in plan.traps:
        name = plan.stations[station].id
        found[f"{name}_separation"] = known.water.separation[station]
        found[f"{name}_capacity_ml"] = known.water.capacity_kg[station] * 1e3
    for station, described in enumerate(plan.stations):
        if described.kind != "intake":
            found[f"{described.id}_evaporated_share"] = known.water.evaporated[station]
    low = site.cup.reads_low_by + cup * (site.cup.give_or_take * HALF_WIDTH_TO_SD)
    found["cup_reads_low_by"] = low
    return found
