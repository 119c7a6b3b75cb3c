"""What closed hours have told of the plant, as figures with their bounds. SI."""

from __future__ import annotations

import numpy as np

from daemon.moisture.air import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.moisture.byproducts import BUSY_HOURS
from daemon.moisture.ensemble import Array, percentiles, positive, standard_normal
from daemon.moisture.leaks import REFERENCE_K, equivalent_hole_m
from daemon.site.types import Site
from daemon.state import CoreState
from daemon.views import Interval, PlantView

WEEK_HOURS, YEAR_WEEKS = 168.0, 52.0
SECONDS_PER_MINUTE = 60.0


def plant_view(site: Site, state: CoreState) -> PlantView:
    """The plant as it is known now; None for what closed hours have not told yet."""
    plant = state.followed.plant
    leak, delivered = plant.leak_kg_per_s, plant.delivered_kg_per_s
    flow = None if leak is None else leak.value / REFERENCE_DRY_AIR_KG_PER_M3
    energy = None if flow is None else flow * _kwh_per_m3_per_s(site)
    price = site.costs.kwh_price
    ratio = None
    if delivered is not None and plant.rated_kg_per_s is not None:
        ratio = _interval(delivered.value / plant.rated_kg_per_s)
    return PlantView(
        at_us=state.time_us,
        leak_m3_per_s=_interval(flow),
        leak_at_us=None if leak is None else leak.at_us,
        leak_hole_m=None if leak is None else _hole(site, leak.value),
        leak_kwh_per_year=_interval(energy),
        leak_cost_per_year=None if energy is None or price is None else _interval(energy * price),
        currency=site.costs.currency,
        leak_high=plant.leak_high,
        delivered_m3_per_s=None
        if delivered is None
        else _interval(delivered.value / REFERENCE_DRY_AIR_KG_PER_M3),
        delivered_at_us=None if delivered is None else delivered.at_us,
        delivered_times=0 if delivered is None else round(delivered.count),
        delivered_to_rated=ratio,
        weak=plant.weak,
        duty=plant.busy if plant.busy_h >= BUSY_HOURS else None,
    )


def _interval(values: Array | None) -> Interval | None:
    if values is None:
        return None
    low, middle, high = (float(value) for value in percentiles(values))
    return Interval(low, middle, high)


def _hole(site: Site, leak: Array) -> float:
    """The one sharp-edged hole that leaks as much, m, at the middle of the switch's span."""
    compressor = site.line.compressor
    pressure = (compressor.cut_in.value + compressor.cut_out.value) / 2.0 + 101_325.0
    return float(equivalent_hole_m(float(np.median(leak)), pressure, REFERENCE_K))


def _kwh_per_m3_per_s(site: Site) -> Array:
    """What a flow that never ceases costs in a year, kWh for a m3/s, (members,).

    Reference air is taken for free air: the two differ by some per cent, the specific power by
    more. A compressor that is off when the shop is closed feeds a leak only while it works.
    """
    line, costs = site.line, site.costs
    base = standard_normal(line.seed, "specific power", line.members)
    kilowatts = positive(base, costs.specific_power.value, costs.specific_power.give_or_take)
    return kilowatts * SECONDS_PER_MINUTE * YEAR_WEEKS * _hours_a_week(site)


def _hours_a_week(site: Site) -> float:
    if site.hours.always_open or not site.line.compressor.off_when_closed:
        return WEEK_HOURS
    spans = (span for day in site.hours.spans for span in day)
    return sum(closes - opens for opens, closes in spans) / 60.0
