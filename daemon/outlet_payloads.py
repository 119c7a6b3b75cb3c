"""An outlet as the JSON object that MQTT and the API share.

Temperatures are degrees Celsius and differences kelvin, one decimal; relative humidities whole per
cent; liquid grams per reference cubic metre of dry air; pressures bar above the atmosphere. Null:
not known. Reasons are in the site's units.
"""

from __future__ import annotations

from typing import Any

from daemon.clock import format_rfc3339
from daemon.moisture.purity import class_words
from daemon.unit_tables import ZERO_CELSIUS_K
from daemon.views import Interval, Judgement, LineAirView, OutletView, SurfaceView

SPEAKS_OF = "water only: not of oil, dust, ventilation or anyone's lungs"


def outlet_payload(view: OutletView) -> dict[str, Any]:
    """Whether it is dry enough at an outlet, why, and what would change it."""
    return {
        "outlet": view.outlet,
        "at": format_rfc3339(view.at_us),
        "work": view.work or None,
        "verdict": view.verdict,
        "speaks_of": SPEAKS_OF,
        "air": _air(view.air),
        "surface": _surface(view.surface),
        "holding_blast": None if view.holding is None else _judgement(view.holding),
        "blotter": None
        if view.blotter is None or view.blotter_us is None
        else {"result": view.blotter, "at": format_rfc3339(view.blotter_us)},
    }


def _judgement(judgement: Judgement) -> dict[str, Any]:
    return {
        "verdict": judgement.verdict,
        "reasons": list(judgement.reasons),
        "would_change": list(judgement.would_change),
    }


def _air(view: LineAirView) -> dict[str, Any]:
    gauge_bar = None
    if view.pressure_pa is not None and view.atmosphere_pa is not None:
        gauge_bar = round((view.pressure_pa - view.atmosphere_pa) / 1e5, 2)
    return {
        **_judgement(view.judgement),
        "pressure_gauge_bar": gauge_bar,
        "pressure_dew_point_c": _celsius(view.pressure_dew_point_k),
        "atmospheric_dew_point_c": _celsius(view.atmospheric_dew_point_k),
        "line_margin_k": _scaled(view.line_margin_k),
        "line_margin_wanted_k": round(view.wanted_k, 1),
        "coldest": view.coldest or None,
        "after_expansion_c": _celsius(view.after_expansion_k),
        "carried_liquid_g_m3": _scaled(view.carried_kg_per_m3, 1e3, digits=3),
        "iso_8573_1_humidity": class_words(view.humidity_class),
    }


def _surface(view: SurfaceView) -> dict[str, Any]:
    until_us = view.by_gauge_until_us
    return {
        **_judgement(view.judgement),
        "air_c": _celsius(view.air_k),
        "relative_humidity_percent": _scaled(view.relative_humidity, 1e2, digits=0),
        "dew_point_c": _celsius(view.dew_point_k),
        "surface_c": _celsius(view.surface_k),
        "surface_margin_k": _scaled(view.surface_margin_k),
        "surface_margin_wanted_k": round(view.wanted_k, 1),
        "surface_relative_humidity_percent": _scaled(view.humidity_at_surface, 1e2, digits=0),
        "by_gauge_until": None if until_us is None else format_rfc3339(until_us),
        "ahead": [
            {"at": format_rfc3339(at_us), "surface_margin_k": _scaled(foreseen)}
            for at_us, foreseen in view.ahead
        ],
    }


def _celsius(interval: Interval | None) -> dict[str, float] | None:
    return _scaled(interval, plus=-ZERO_CELSIUS_K)


def _scaled(
    interval: Interval | None, times: float = 1.0, plus: float = 0.0, digits: int = 1
) -> dict[str, float] | None:
    if interval is None:
        return None
    low, middle, high = (round(each * times + plus, digits) + 0.0 for each in interval.values)
    return {"p05": low, "p50": middle, "p95": high}
