"""A margin drawn on a scale: where it lies, how sure, and what is asked for."""

from __future__ import annotations

from dataclasses import dataclass

from daemon.views import Interval

LEFT, RIGHT = 12.0, 308.0  # of the scale in a drawing 320 wide
LEAST_K, MOST_K = -2.0, 16.0
WIDE_PX = 31.0  # a zone narrower than this has no room for its word


@dataclass(frozen=True, slots=True)
class Zone:
    """A stretch of the scale and the verdict that it stands for."""

    word: str
    start: float
    end: float
    hatch: str  # an SVG path, "" for none: a zone is told by its hatching, not by a colour

    @property
    def middle(self) -> float:
        return round((self.start + self.end) / 2.0, 1)

    @property
    def has_room(self) -> bool:
        return self.end - self.start >= WIDE_PX


@dataclass(frozen=True, slots=True)
class Scale:
    """Places along the drawing; `low` and `high` stop at its ends."""

    low: float
    middle: float
    high: float
    below: bool  # the interval goes on to the left of the scale
    above: bool
    zones: tuple[Zone, ...]
    steps: tuple[tuple[float, float], ...]  # place, kelvin


def scale_of(margin: Interval, wait_below_k: float, wanted_k: float) -> Scale:
    """`wait` below the first figure, `care` up to the second, `dry enough` from there."""
    most_k = max(MOST_K, wanted_k * 1.5)

    def place(kelvin: float) -> float:
        share = (min(max(kelvin, LEAST_K), most_k) - LEAST_K) / (most_k - LEAST_K)
        return round(LEFT + (RIGHT - LEFT) * share, 1)

    wait, wanted = place(wait_below_k), place(wanted_k)
    zones = [Zone("wait", LEFT, wait, _diagonals(LEFT, wait, 6.0))]
    if wanted > wait:
        zones.append(Zone("care", wait, wanted, _diagonals(wait, wanted, 14.0)))
    zones.append(Zone("dry enough", wanted, RIGHT, ""))
    return Scale(
        low=place(margin.p05),
        middle=place(margin.p50),
        high=place(margin.p95),
        below=margin.p05 < LEAST_K,
        above=margin.p95 > most_k,
        zones=tuple(zones),
        steps=tuple((place(kelvin), kelvin) for kelvin in sorted({0.0, wait_below_k, wanted_k})),
    )


def _diagonals(start: float, end: float, apart: float) -> str:
    """Strokes across a bar 12 high that begins at 22."""
    count = int((end - start - 4.0) // apart)
    strokes = (f"M{start + 2.0 + apart * n:.0f} 33l8-10" for n in range(max(count, 0)))
    return "".join(strokes)
