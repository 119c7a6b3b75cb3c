"""A drain as somebody reports it: checked, and turned into a journal entry."""

from __future__ import annotations

from api.models import DrainIn
from api.problems import Point, Problem
from api.quantities import VolumeUnit, kg_from_volume, volume_of
from api.validation import moment_of, shown
from daemon.accept import MOST_OF_CAPACITY
from daemon.journal import Drain, Outcome
from daemon.moisture.description import Trap


def drain_of(body: DrainIn, name: str, trap: Trap, now_us: int) -> tuple[Drain, int | None]:
    """The journal's body, and when it happened (None: now). Raises Problem with every point."""
    points: list[Point] = []
    volume_kg = _volume_kg(body, name, trap, points)
    at_us = moment_of(body.at, now_us, points, "a drain")
    outcome = _outcome(body.outcome, volume_kg, points)
    if points:
        raise Problem("invalid-request", points=points)
    drain = Drain(
        trap=name,
        outcome=outcome,
        volume_kg=volume_kg,
        by=body.by or "",
        look=body.look or "",
    )
    return drain, at_us


def _volume_kg(body: DrainIn, name: str, trap: Trap, points: list[Point]) -> float | None:
    said = _said_volume(body, points)
    if said is None:
        return None
    field, volume, unit = said
    kg = kg_from_volume(volume, unit)
    remedy = ""
    if volume < 0:
        remedy = "a volume is 0 or more; send what the cup read"
    elif kg > MOST_OF_CAPACITY * trap.capacity.value:
        remedy = (
            f'more than twice what the trap "{name}" holds '
            f"({volume_of(trap.capacity.value, unit):g} {unit}); check the figure and its unit, "
            "or correct the trap's capacity in the site file"
        )
    if remedy:
        points.append(Point(f"body.{field}", f"{volume:g} {unit}", remedy))
    return kg


def _said_volume(body: DrainIn, points: list[Point]) -> tuple[str, float, VolumeUnit] | None:
    """The field that gives the volume, the figure and its unit; None when none is given."""
    if body.volume_ml is not None and body.volume is not None:
        points.append(Point("body.volume", shown(body.volume), "volume_ml is said too; send one"))
    elif body.volume is not None and body.unit is None:
        remedy = "a volume needs its unit beside it: ml, L, oz or gal"
        points.append(Point("body.unit", "", remedy))
    elif body.volume is None and body.unit is not None:
        points.append(Point("body.unit", body.unit, "there is no volume for this unit; send both"))
    elif body.volume is not None and body.unit is not None:
        return "volume", body.volume, body.unit
    elif body.volume_ml is not None:
        return "volume_ml", body.volume_ml, "ml"
    return None


def _outcome(said: Outcome | None, volume_kg: float | None, points: list[Point]) -> Outcome:
    if said is None:
        return "empty" if volume_kg == 0 else "emptied"
    if said == "empty" and volume_kg:
        remedy = 'water came out, so the trap was not found empty; say "emptied" or "partly"'
        points.append(Point("body.outcome", '"empty"', remedy))
    if said == "emptied" and volume_kg == 0:
        remedy = 'nothing came out; say "empty", or leave the volume out if it was not measured'
        points.append(Point("body.outcome", '"emptied"', remedy))
    return said
