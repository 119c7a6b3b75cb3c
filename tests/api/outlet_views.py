"""Views of outlets for the API's tests; the figures are invented."""

from __future__ import annotations

from daemon.clock import HOUR_US, MINUTE_US, SECOND_US, parse_rfc3339
from daemon.views import Interval, Judgement, LineAirView, OutletView, SurfaceView

NOW_US = parse_rfc3339("2026-12-01T09:00:00Z")


def gun_view(surface_k: float | None = None) -> OutletView:
    """A spray gun in care; `surface_k` is a surface that somebody measured."""
    return OutletView(
        outlet="spray-gun",
        at_us=NOW_US - 5 * SECOND_US,
        work="solvent-borne",
        verdict="unknown" if surface_k is None else "care",
        air=LineAirView(
            judgement=Judgement("care", ("At the hose the air is 4.2 K above its dew point.",), ()),
            pressure_pa=401_300.0,
            atmosphere_pa=101_300.0,
            pressure_dew_point_k=Interval(280.149, 281.15, 282.15),
            atmospheric_dew_point_k=Interval(262.15, 263.15, 264.15),
            line_margin_k=Interval(3.56, 4.2, 6.0),
            wanted_k=5.0,
            coldest="slab",
            after_expansion_k=Interval(291.15, 292.15, 293.15),
            carried_kg_per_m3=Interval(0.0, 1e-5, 3.26e-5),
            humidity_class="7",
        ),
        surface=SurfaceView(
            judgement=Judgement(
                "unknown" if surface_k is None else "dry enough",
                ("The surface's temperature is not known.",) if surface_k is None else ("Fine.",),
                ("Type it in.",) if surface_k is None else (),
            ),
            air_k=Interval(292.15, 293.15, 294.15),
            relative_humidity=Interval(0.516, 0.55, 0.584),
            dew_point_k=Interval(282.15, 283.15, 284.15),
            surface_k=None if surface_k is None else Interval(*(surface_k + d for d in (-1, 0, 1))),
            surface_margin_k=None if surface_k is None else Interval(5.0, 7.0, 9.0),
            wanted_k=3.0,
            humidity_at_surface=None,
            by_gauge_until_us=NOW_US + 20 * MINUTE_US,
            ahead=((NOW_US + HOUR_US, Interval(4.0, 6.5, 9.5)),),
        ),
        holding=None,
        blotter="clean",
        blotter_us=NOW_US - HOUR_US,
    )
