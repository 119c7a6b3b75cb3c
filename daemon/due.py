"""When a drain is due by the calendar, and the words for a drain that is due."""

from __future__ import annotations

from daemon.alarms import Condition
from daemon.moisture.description import WATER_KG_PER_M3, Trap
from daemon.site import hours as opening
from daemon.site.types import Site
from daemon.units import show_volume

RAISED_AT, RETURNS_BELOW = 0.5, 0.3  # share of members at or above the drain-at level
NO_DATE = -1
FINEST_KG = 0.001  # 1 ml
FINEST_US_KG = 0.0029573529563  # a tenth of a US fluid ounce


def calendar_due_us(site: Site, trap: Trap, since_us: int, drained: bool) -> int:
    """When `drain_every` asks for a drain next; NO_DATE when it never does.

    `since_us` is the last drain, or the beginning of the record. A working day asks at its
    shift end, unless the trap was drained on that day.
    """
    if trap.every_s > 0.0:
        return since_us + round(trap.every_s * 1e6)
    if trap.drain_every != "working day":
        return NO_DATE
    end_us = opening.next_shift_end(site.hours, site.timezone, since_us)
    if end_us is None:
        return NO_DATE
    if drained:
        # the day that ends there began before its end: ask just before it
        begins_us = opening.working_day_start(site.hours, site.timezone, end_us - 1)
        if begins_us is not None and since_us >= begins_us:
            end_us = opening.next_shift_end(site.hours, site.timezone, end_us)
    return NO_DATE if end_us is None else end_us


def condition(probability_due: float, by_calendar: bool, drained_now: bool) -> Condition:
    """What the drain-due alarm watches: volume or calendar, whichever comes first."""
    if by_calendar or probability_due >= RAISED_AT:
        return "so"
    if drained_now or probability_due < RETURNS_BELOW:
        return "not so"
    return "between"


def volume_words(site: Site, kg: float) -> str:
    """A mass of water as a volume in the site's units, no finer than anybody can measure."""
    step_kg = FINEST_US_KG if site.units == "us" else FINEST_KG
    return show_volume(round(kg / step_kg) * step_kg / WATER_KG_PER_M3, site.units)


def interval_words(site: Site, p05_kg: float, p50_kg: float, p95_kg: float) -> str:
    """ "410 ml (300 to 560 ml)"."""
    low, middle, high = (volume_words(site, kg) for kg in (p05_kg, p50_kg, p95_kg))
    number, unit = low.split(" ", 1)
    return f"{middle} ({number if high.endswith(f' {unit}') else low} to {high})"


def due_words(
    site: Site, name: str, trap: Trap, p05_p50_p95_kg: tuple[float, float, float], because: str
) -> str:
    """What is so, how sure, and what to do."""
    holds = interval_words(site, *p05_p50_p95_kg)
    limit = volume_words(site, trap.drain_at_kg)
    if because == "volume":
        return f"Drain {name} now: about {holds} when this was raised; its limit is {limit}."
    every = (
        "every working day" if trap.drain_every == "working day" else f"every {trap.drain_every}"
    )
    return f"Drain {name}: it is drained {every}. About {holds} when this was raised."
