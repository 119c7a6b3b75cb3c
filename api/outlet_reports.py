"""What somebody reports from an outlet, checked point by point: a time, a temperature, a spread."""

from __future__ import annotations

from api.outlet_models import GaugeIn
from api.problems import Point, Problem
from api.validation import moment_of, shown
from daemon.accept import GAUGE_SPREAD_K, GAUGE_VALID_S
from daemon.journal import Gauge
from daemon.units import to_si

SURFACE_LIMITS_C = (-40.0, 80.0)


def surface_of(surface_c: float | None, surface_f: float | None) -> float | None:
    """A surface's temperature in K from a query; None when none was sent. Raises Problem."""
    if surface_c is not None and surface_f is not None:
        remedy = "surface_c is said too; send one of them"
        raise Problem(
            "invalid-request", points=[Point("query.surface_f", f"{surface_f:g}", remedy)]
        )
    if surface_c is None and surface_f is None:
        return None
    name, value, unit = (
        ("surface_f", surface_f, "degF") if surface_c is None else ("surface_c", surface_c, "degC")
    )
    assert value is not None
    kelvin = to_si(value, unit, "temperature")
    least, most = (to_si(each, "degC", "temperature") for each in SURFACE_LIMITS_C)
    if not least <= kelvin <= most:
        remedy = "no surface to be sprayed; send -40 to 80 degC (-40 to 176 degF)"
        raise Problem("invalid-request", points=[Point(f"query.{name}", f"{value:g}", remedy)])
    return kelvin


def gauge_of(body: GaugeIn, outlet: str, now_us: int) -> tuple[Gauge, int | None]:
    """The journal's body, and when it was read (None: now). Raises Problem with every point."""
    points: list[Point] = []
    spread_k = _spread_k(body, points)
    at_us = moment_of(body.at, now_us, points)
    valid_s = body.valid_min * 60.0
    if not GAUGE_VALID_S[0] <= valid_s <= GAUGE_VALID_S[1]:
        least, most = (each / 60.0 for each in GAUGE_VALID_S)
        remedy = f"a reading speaks for {least:g} to {most:g} minutes"
        points.append(Point("body.valid_min", f"{body.valid_min:g}", remedy))
    if points:
        raise Problem("invalid-request", points=points)
    return Gauge(outlet, spread_k, valid_s, body.by or ""), at_us


def _spread_k(body: GaugeIn, points: list[Point]) -> float:
    if (body.spread_k is None) == (body.spread_f is None):
        remedy = "send the spread once: spread_k, or spread_f"
        points.append(Point("body.spread_k", shown(body.spread_k), remedy))
        return 0.0
    if body.spread_k is not None:
        name, value, spread_k = "spread_k", body.spread_k, body.spread_k
    else:
        assert body.spread_f is not None
        name, value = "spread_f", body.spread_f
        spread_k = to_si(value, "degF", "temperature difference")
    least, most = GAUGE_SPREAD_K
    if not least <= spread_k <= most:
        remedy = (
            f"a spread is the surface's temperature less the dew point around it, {least:g} to "
            f"{most:g} K"
        )
        points.append(Point(f"body.{name}", f"{value:g}", remedy))
    return spread_k
