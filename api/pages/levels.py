"""A trap's level as a drawing, and in words."""

from __future__ import annotations

from dataclasses import dataclass

from daemon.views import TrapView

TOP, BOTTOM = 8.0, 132.0  # of the jar in the drawing
FULL, NEAR = 0.97, 0.75


@dataclass(frozen=True, slots=True)
class Level:
    """Heights in a drawing of 100 x 140: smaller is higher."""

    p05: float
    p50: float
    p95: float
    mark: float  # where it is to be drained
    brim: float | None  # where it runs over; None: above what is drawn
    words: str

    @property
    def depth(self) -> float:
        """Of the water at its median."""
        return round(BOTTOM - self.p50, 1)


def level_of(view: TrapView) -> Level:
    """The drawing shows the mark with room above it, and the brim where it comes so far."""
    shown_kg = max(1.35 * view.drain_at_kg, 1.1 * view.p95_kg, 1e-6)
    top_kg = min(shown_kg, view.capacity_kg * 1.06)

    def height(kg: float) -> float:
        return round(BOTTOM - (BOTTOM - TOP) * min(kg / top_kg, 1.0), 1)

    return Level(
        p05=height(view.p05_kg),
        p50=height(view.p50_kg),
        p95=height(view.p95_kg),
        mark=height(view.drain_at_kg),
        brim=height(view.capacity_kg) if view.capacity_kg <= top_kg else None,
        words=_words(view),
    )


def _words(view: TrapView) -> str:
    share = view.p50_kg / view.drain_at_kg if view.drain_at_kg > 0.0 else 0.0
    if view.p50_kg >= FULL * view.capacity_kg:
        return "full: more water goes on down the line"
    for below, words in (
        (0.05, "as good as empty"),
        (0.4, "a little in it"),
        (0.6, "about half way to its mark"),
        (0.9, "most of the way to its mark"),
        (1.1, "about at its mark"),
    ):
        if share < below:
            return words
    return "above its mark"
