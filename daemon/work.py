"""What each kind of work asks of the air in the line, of the air around, and of the surface.

The paint maker's sheet comes first. Common practice, no source, unless a figure says otherwise.
"""

from __future__ import annotations

from dataclasses import dataclass

from daemon.unit_tables import ZERO_CELSIUS_K

WAIT_BELOW_K = 3.0  # of line margin, whatever the work: 83 % RH in a 20 degC hose
# ISA-7.0.01's margin, stated there for the dryer's outlet against the lowest temperature that any
# part sees (the standard's text was not seen).
DRY_ENOUGH_K = 10.0
# Carried past the last trap, at the 95 % bound.
LIQUID_KG_PER_M3 = 5e-5
SURFACE_MARGIN_K = 3.0  # ISO 8502-4, for steel before coating (the standard's text was not seen)


@dataclass(frozen=True, slots=True)
class Span:
    """From and to, SI; None where there is no end."""

    least: float | None = None
    most: float | None = None


@dataclass(frozen=True, slots=True)
class Profile:
    """One kind of work."""

    name: str
    line_margin_k: float = DRY_ENOUGH_K  # from here on the air in the line is dry enough
    pressure_dew_point_k: float | None = None  # at most
    air_k: Span = Span()  # temperature of the air around
    humidity: Span = Span()  # relative humidity of the air around, 0-1
    humidity_care: float | None = None  # above it, care
    surface_rule: bool = True  # whether the surface margin counts
    ahead_h: int = 0  # hours that the surface margin must hold on for


def _celsius(least: float, most: float) -> Span:
    return Span(least + ZERO_CELSIUS_K, most + ZERO_CELSIUS_K)


_PLUS_3_DEGC = 3.0 + ZERO_CELSIUS_K

PROFILES: dict[str, Profile] = {
    each.name: each
    for each in (
        Profile(""),  # nobody said what is done there
        Profile(
            "solvent-borne",
            line_margin_k=5.0,
            air_k=_celsius(10.0, 35.0),
            humidity=Span(most=0.85),  # the usual limit of a paint maker's sheet
            humidity_care=0.70,
            ahead_h=2,
        ),
        Profile(
            "waterborne",
            line_margin_k=5.0,
            air_k=_celsius(20.0, 28.0),
            humidity=Span(0.35, 0.65),
            ahead_h=2,
        ),
        Profile(
            "two-component",
            line_margin_k=10.0,
            pressure_dew_point_k=_PLUS_3_DEGC,
            air_k=_celsius(12.0, 25.0),
            humidity=Span(most=0.70),
            ahead_h=4,
        ),
        Profile(
            "powder",
            pressure_dew_point_k=_PLUS_3_DEGC,
            air_k=_celsius(18.0, 27.0),
            humidity=Span(0.40, 0.60),
            surface_rule=False,
        ),
        Profile("blasting", line_margin_k=5.0, ahead_h=4),  # the air at the pot's own pressure
    )
}

# To keep blasted steel bare: NACE 6A192 / SSPC-TR 3, as quoted in a trade journal.
HOLD_SURFACE_MARGIN_K = 10.0
HOLD_SURFACE_HUMIDITY = 0.50
