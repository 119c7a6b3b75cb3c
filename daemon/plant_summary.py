"""The plant and the forecasts' scores for a replay's summary."""

from __future__ import annotations

from typing import Any

from daemon.plant_figures import plant_view
from daemon.site.types import Site
from daemon.state import CoreState
from daemon.views import Interval

L_PER_MIN = 60e3  # of a m3/s


def plant_summary(site: Site, state: CoreState) -> dict[str, Any]:
    """Leak and delivered air as measured while the shop was closed; null: it was not."""
    view = plant_view(site, state)
    return {
        "leak_rate_reference_l_min": _scaled(view.leak_m3_per_s, L_PER_MIN, 3),
        "leak_kwh_per_year": _scaled(view.leak_kwh_per_year, 1.0, 1),
        "leak_cost_per_year": _scaled(view.leak_cost_per_year, 1.0, 2),
        "delivered_reference_l_min": _scaled(view.delivered_m3_per_s, L_PER_MIN, 3),
        "delivered_to_rated": _scaled(view.delivered_to_rated, 1.0, 4),
        "delivered_measured_times": view.delivered_times,
    }


def forecast_summary(state: CoreState) -> dict[str, Any]:
    """How often a level was reached within the 5-95 % interval of at least a day ahead."""
    foresight = state.followed.foresight
    rate = round(foresight.hits / foresight.scored, 4) if foresight.scored else None
    return {"scored": foresight.scored, "hits": foresight.hits, "hit_rate": rate}


def _scaled(interval: Interval | None, factor: float, digits: int) -> dict[str, float] | None:
    if interval is None:
        return None
    low, middle, high = (round(each * factor, digits) for each in interval.values)
    return {"p05": low, "p50": middle, "p95": high}
