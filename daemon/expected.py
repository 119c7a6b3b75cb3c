"""The words for when a drain is expected to be due."""

from __future__ import annotations

from datetime import datetime
from functools import lru_cache
from zoneinfo import ZoneInfo

from daemon.clock import DAY_US, HOUR_US, MINUTE_US, to_datetime
from daemon.moisture.description import Station
from daemon.moisture.forecast import HORIZON_US, Due
from daemon.site.types import Site

# A steel tank rusts however little water stands in it (practice; 29 CFR 1910.169(b)(2) asks for
# frequent opening): nothing may read as leave to wait.
AGAINST_RUST = "little water expected; drain daily against rust all the same"
LITTLE = 0.5  # of the drain-at level, the 95 % bound


def expected_words(site: Site, station: Station, due: Due, p95_kg: float, now_us: int) -> str:
    """When a trap's drain is expected to be due, in local time: "due tomorrow 10:00 (...)".

    `p95_kg` is what it may hold now.
    """
    trap = station.trap
    assert trap is not None
    if station.kind == "receiver" and due.because != "volume":
        little = p95_kg < LITTLE * trap.drain_at_kg
        if due.p50_us is None or little:
            return AGAINST_RUST
    if due.p50_us is None:
        early = "" if due.p05_us is None else f", {when(site, due.p05_us, now_us)} at the earliest"
        return f"not expected within {HORIZON_US // DAY_US} days{early}"
    if due.p50_us <= now_us:
        return "due now"
    middle = when(site, due.p50_us, now_us)
    if due.p05_us is None or due.p05_us == due.p95_us:
        return f"due {middle}"
    first = when(site, due.p05_us, now_us)
    if due.p95_us is None:
        return f"due {middle} ({first} or later)"
    return f"due {middle} ({first} to {when(site, due.p95_us, now_us)})"


def when(site: Site, at_us: int, now_us: int) -> str:
    """A time as people in the shop say it: "14:30", "tomorrow 10:00", "Thu 10:00", "Thu 12 Mar"."""
    if at_us <= now_us:
        return "now"
    step_us = 15 * MINUTE_US if at_us - now_us < DAY_US else HOUR_US
    local = _local(site, (at_us + step_us // 2) // step_us * step_us)
    days = local.toordinal() - _local(site, now_us).toordinal()
    if days == 0:
        return f"{local:%H:%M}"
    if days == 1:
        return f"tomorrow {local:%H:%M}"
    if days < 7:
        return f"{local:%a %H:%M}"
    return f"{local:%a} {local.day} {local:%b}"


def _local(site: Site, at_us: int) -> datetime:
    return to_datetime(at_us).astimezone(_zone(site.timezone))


@lru_cache(maxsize=8)
def _zone(name: str) -> ZoneInfo:
    return ZoneInfo(name)


def shelved_words(site: Site, until_us: int, now_us: int, by: str) -> str:
    """ "Put off until 14:37 by AM.", with the day where it is another one."""
    until, now = _local(site, until_us), _local(site, now_us)
    day = "" if until.date() == now.date() else f"{until:%a} "
    return f"Put off until {day}{until:%H:%M}{f' by {by}' if by else ''}."
