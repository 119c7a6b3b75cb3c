"""Traps whose contents are counted from a start without an earlier state, and what is said of them.

Where a record goes on but none of its checkpoints can be read (damaged, or of another version of
dripleg), nothing is known of what the traps held: they begin at what the site file says for a first
start. That time is kept in the database, and every trap says so until it has been drained once.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace
from zoneinfo import ZoneInfo

from daemon.clock import to_datetime
from daemon.site.types import Site
from daemon.views import TrapView

COUNTED_KEY = "counted.from_us"


def marked(views: Iterable[TrapView], from_us: int | None) -> tuple[TrapView, ...]:
    """The views, those marked that no drain has settled; `from_us` None: nothing was lost.

    The state that was begun then knew of no drain: one that is known of has come since.
    """
    if from_us is None:
        return tuple(views)
    return tuple(
        replace(view, counted_from_us=from_us) if view.last_drain_us is None else view
        for view in views
    )


def notice(site: Site, unsettled: Sequence[tuple[str, int]]) -> str:
    """What is so and what to do, of these traps and the times they are counted from; "" without."""
    if not unsettled:
        return ""
    names = [trap for trap, _ in unsettled]
    local = to_datetime(max(at_us for _, at_us in unsettled)).astimezone(ZoneInfo(site.timezone))
    listed = " and ".join(filter(None, (", ".join(names[:-1]), names[-1])))
    do = "Drain it once" if len(names) == 1 else "Drain each once"
    return (
        f"Contents counted from {local:%a} {local.day} {local:%b}, {local:%H:%M}: earlier state "
        f"could not be read. There may be more in {listed} than is shown. {do}, whatever the "
        "figure says."
    )


def notice_of(site: Site, views: Iterable[TrapView]) -> str:
    """The same for views."""
    found = [(v.trap, v.counted_from_us) for v in views if v.counted_from_us is not None]
    return notice(site, found)
