"""Forecasts made a day ahead, beside when each trap truly came to its level.

On Wednesday at noon every trap is given a drain-at level that it should reach about a day later:
what it is believed to hold and what the last 24 hours brought. The choice leans on what was known
then, never on what came: scoring only what happened a day later would favour surprises. No drain
is opened after; a level that is not reached by Saturday's end counts as held when the interval
goes beyond that.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from daemon.advance import Core
from daemon.clock import HOUR_US
from daemon.foreseer import Dates, Foreseer
from daemon.moisture.forecast import NO_DATE, Due
from daemon.moisture.model import Model
from daemon.site.types import Site
from daemon.state import CoreState, Inputs
from daemon.ticks import ticks
from tests.virtual import week
from tests.virtual.rigs import TRAPS
from tests.virtual.runner import journal, record
from tests.virtual.score import clustered_error
from tests.virtual.shops import Shop, Trial, build

SEEN_FROM_S = 2 * week.DAY_S + 12 * 3600.0 - week.BEGUN_S
FORECAST_DAYS = 6
LEAST_GAIN_KG, MOST_OF_CAPACITY = 0.010, 0.9


@dataclass(frozen=True, slots=True)
class Foreseen:
    """One trap: hours from the forecast to its level; infinite: beyond what was looked at."""

    shop: int
    trap: str
    early_h: float
    middle_h: float
    late_h: float
    true_h: float
    end_h: float  # of what was simulated

    @property
    def held(self) -> bool:
        """Whether the level was reached within the interval."""
        if math.isinf(self.true_h):
            return self.late_h > self.end_h
        return self.early_h - 1e-3 <= self.true_h <= self.late_h + 1e-3


def foresee_all(numbers: Sequence[int], trial: Trial) -> list[Foreseen]:
    """The forecasts of these shops."""
    quiet = replace(trial, days=FORECAST_DAYS, quiet_after_s=SEEN_FROM_S)
    return [each for shop in build(numbers, quiet) for each in foresee(shop)]


def foresee(shop: Shop) -> list[Foreseen]:
    """One shop's forecasts."""
    core = Core(shop.site)
    day_before, state = _run(shop, core)
    rows = [core.model.plan.index[trap] for trap in TRAPS]
    held = np.median(core.model.contents(state.model)[rows], axis=1)
    gain = np.median((state.model.ledger.shed - day_before.model.ledger.shed)[rows], axis=1)
    capacity = np.median(state.model.parameters.water.capacity_kg[rows], axis=1)
    level = np.minimum(held + gain, MOST_OF_CAPACITY * capacity)
    dues = _forecast(shop.site, state, dict(zip(TRAPS, level, strict=True)))
    return [
        _beside(shop, trap, float(level[n]), dues[n])
        for n, trap in enumerate(TRAPS)
        if level[n] - held[n] >= LEAST_GAIN_KG
    ]


def _run(shop: Shop, core: Core) -> tuple[CoreState, CoreState]:
    """The state a day before the forecast, and at it."""
    begun_us = week.BEGUN_US
    seen_us = begun_us + round(SEEN_FROM_S * 1e6)
    readings = [each for each in record(shop) if each.time_us <= seen_us]
    entries = [each for each in journal(shop) if each.at_us <= seen_us]
    first = [each for each in readings if each.time_us == begun_us]
    state, _, _ = core.initial(begun_us, Inputs(first))
    before = state
    rest = readings[len(first) :]
    period_us = core.model.period_us
    for tick in ticks(begun_us, period_us, begun_us, begun_us, rest, entries, seen_us):
        state, _, _ = core.advance(state, tick.now_us, tick.inputs)
        if tick.now_us == seen_us - 24 * HOUR_US:
            before = state
    return before, state


def _forecast(site: Site, state: CoreState, levels: dict[str, float]) -> tuple[Due, ...]:
    """When these levels are due by volume."""
    stations = tuple(
        replace(station, trap=replace(station.trap, drain_at_kg=levels[station.id]))
        if station.trap is not None
        else station
        for station in site.line.stations
    )
    asked = replace(site, line=replace(site.line, stations=stations))
    foreseer = Foreseer(asked, Model(asked.line))
    dates = Dates((state.time_us,) * len(levels), (NO_DATE,) * len(levels))
    return foreseer.forecast(state.followed.foresight, state.model, dates).traps


def _beside(shop: Shop, trap: str, level_kg: float, due: Due) -> Foreseen:
    held = shop.contents_kg[:, TRAPS.index(trap)]
    later = shop.times_s >= SEEN_FROM_S
    reached = np.flatnonzero(later & (held >= level_kg))
    true_s = shop.times_s[reached[0]] - SEEN_FROM_S if reached.size else math.inf
    seen_us = week.BEGUN_US + round(SEEN_FROM_S * 1e6)
    early, middle, late = (
        math.inf if at_us is None else (at_us - seen_us) / HOUR_US
        for at_us in (due.p05_us, due.p50_us, due.p95_us)
    )
    end_h = (shop.times_s[-1] - SEEN_FROM_S) / 3600.0
    return Foreseen(shop.number, trap, early, middle, late, float(true_s / 3600.0), float(end_h))


def foreseen_table(found: Sequence[Foreseen]) -> str:
    """The figures as text."""
    lines = [
        f"{'forecasts a day ahead':24}  count shops  held   +-   early   late  width_h  error_h"
    ]
    for trap in ("", *TRAPS):
        chosen = [each for each in found if trap in ("", each.trap)]
        if chosen:
            lines.append(_row(trap or "all", chosen))
    beyond = sum(math.isinf(each.true_h) for each in found)
    lines.append(f"not reached by the end: {beyond}")
    return "\n".join(lines)


def coverage(found: Sequence[Foreseen]) -> float:
    """The share of levels that were reached within their interval."""
    return float(np.mean([each.held for each in found]))


def _row(name: str, chosen: Sequence[Foreseen]) -> str:
    held = np.array([each.held for each in chosen], dtype=float)
    shops = np.array([each.shop for each in chosen])
    early = np.mean([not each.held and each.true_h < each.early_h for each in chosen])
    width = np.median([each.late_h - each.early_h for each in chosen])
    reached = [each for each in chosen if math.isfinite(each.true_h)]
    error = np.median([abs(each.middle_h - each.true_h) for each in reached])
    return (
        f"{name:24}  {len(chosen):5d} {np.unique(shops).size:5d}  {held.mean():5.3f} "
        f"{clustered_error(held, shops):5.3f}  {early:5.3f}  {1 - held.mean() - early:5.3f}  "
        f"{width:7.1f}  {error:7.1f}"
    )
