"""Today's round: which traps belong to it, in which order, and its first line."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from daemon.clock import DAY_US
from daemon.expected import when
from daemon.site import hours as opening
from daemon.site.types import Site
from daemon.units import from_si
from daemon.views import TrapView

# What holds about so much, in litres: common sense, no source.
_VESSELS = (
    (0.005, "a few drops"),
    (0.06, "an egg cup"),
    (0.25, "a glass"),
    (0.45, "a mug"),
    (2.0, "a jug"),
    (10.0, "a bucket"),
)
BUCKET_L = 10.0


@dataclass(frozen=True, slots=True)
class Occasion:
    """The round that a page is about: until when what falls due belongs to it, and in words."""

    until_us: int
    words: str  # "before you leave"


@dataclass(frozen=True, slots=True)
class RoundPlan:
    """What to drain, in walking order, and what may stay."""

    line: str
    drain: tuple[TrapView, ...]
    leave: tuple[TrapView, ...]


def plan(site: Site, views: Sequence[TrapView], flooded: Sequence[str], now_us: int) -> RoundPlan:
    """Bowls and legs first, while there is pressure; the tank last (practice)."""
    walk = walking_order(site, views)
    occasion = occasion_of(site, any(view.due for view in views), flooded, now_us)
    drain = tuple(view for view in walk if _belongs(view, occasion.until_us))
    leave = tuple(view for view in walk if view not in drain)
    return RoundPlan(_line(site, drain, leave, occasion, now_us), drain, leave)


def receivers(site: Site) -> frozenset[str]:
    """The names of the tanks."""
    return frozenset(s.id for s in site.line.stations if s.kind == "receiver")


def walking_order(site: Site, views: Sequence[TrapView]) -> list[TrapView]:
    """As the air meets them, the tanks last."""
    tanks = receivers(site)
    return sorted(views, key=lambda view: view.trap in tanks)


def occasion_of(site: Site, any_due: bool, flooded: Sequence[str], now_us: int) -> Occasion:
    """Which round it is: the one before this shift ends, or the one when work begins again."""
    ends_us = opening.next_shift_end(site.hours, site.timezone, now_us)
    starts_us = opening.next_shift_start(site.hours, site.timezone, now_us)
    if flooded:
        is_are = "is" if len(flooded) == 1 else "are"
        return Occasion(ends_us or now_us + DAY_US, f"now ({', '.join(flooded)} {is_are} full)")
    if site.hours.always_open:
        return Occasion(ends_us or now_us + DAY_US, "today")
    if ends_us is None:
        return Occasion(now_us + DAY_US, "now" if any_due else "within a day")
    if starts_us is None or ends_us < starts_us:
        return Occasion(ends_us, "before you leave")
    return Occasion(ends_us, f"when work begins ({when(site, starts_us, now_us)})")


def _belongs(view: TrapView, until_us: int) -> bool:
    if view.due or view.counted_from_us is not None:
        return True
    times_us = (view.due_at_us, view.due_p50_us)
    return any(time_us is not None and time_us <= until_us for time_us in times_us)


def _line(
    site: Site,
    drain: Sequence[TrapView],
    leave: Sequence[TrapView],
    occasion: Occasion,
    now_us: int,
) -> str:
    if not drain:
        if not leave:
            return "No estimate yet: it comes with the first readings."
        return f"Nothing to drain {occasion.words}.{_next(site, leave, now_us)}"
    if any(view.counted_from_us is not None for view in drain):
        amount = "how much is not known"
    else:
        total_kg = sum(view.p50_kg for view in drain)
        amount = f"about {rough(total_kg, site)}, {vessel(total_kg)}"
    tanks = receivers(site)
    last = drain[-1].trap
    named = f"the {last}" if last in tanks else last
    which = f"1 to drain, {named}" if len(drain) == 1 else f"{len(drain)} to drain, {named} last"
    return f"{which}, {occasion.words}: {amount}"


def _next(site: Site, leave: Sequence[TrapView], now_us: int) -> str:
    """What comes next. Of a tank its calendar alone: a volume would read as leave to wait."""
    tanks = receivers(site)
    coming = [
        (time_us, view.trap)
        for view in leave
        for time_us in (view.due_at_us, None if view.trap in tanks else view.due_p50_us)
        if time_us is not None
    ]
    if not coming:
        return ""
    time_us, name = min(coming)
    return f" Next: {name}, {when(site, time_us, now_us)}."


def rough(kg: float, site: Site) -> str:
    """As people say a volume aloud: "80 ml", "0.4 L", "12 L"; "14 oz", "0.6 gal"."""
    if site.units == "us":
        ounces = from_si(kg / 1000.0, "oz", "volume")
        return f"{max(ounces, 0.1):.2g} oz" if ounces < 64 else f"{ounces / 128:.1f} gal"
    if kg < 0.1:
        return f"{round(kg * 1000 / 5) * 5 or 1} ml" if kg >= 0.005 else f"{kg * 1000:.0f} ml"
    return f"{kg:.1f} L" if kg < 10.0 else f"{kg:.0f} L"


def vessel(kg: float) -> str:
    """What it would about fill."""
    for litres, name in _VESSELS:
        if kg <= litres:
            return name
    return f"{round(kg / BUCKET_L + 0.4)} buckets"
