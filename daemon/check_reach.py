"""How a site reaches people, for `dripleg check`: who needs a key, what a lamp or buzzer shows."""

from __future__ import annotations

from daemon.addresses import is_loopback
from daemon.site.types import Signal, Site


def signal_words(signal: Signal) -> str:
    """What the lamp or buzzer shows, and where it is."""
    level = "high" if signal.active_high else "low"
    which = ", ".join(signal.priorities)
    how = "blinks" if signal.kind == "lamp" else "calls every 10 s"
    how = "is on" if signal.pattern == "steady" else how
    seen = (
        "then is on until they are over"
        if signal.kind == "lamp"
        else "in working hours only, then is silent"
    )
    return (
        f"{signal.place}, on while {level}; {how} for alarms of priority {which} until somebody "
        f"has seen them, {seen}"
    )


def keys_words(site: Site) -> str:
    """Who needs a key."""
    if is_loopback(site.api.host):
        return "none asked: only this machine can reach it"
    reading = "reading is open to all" if site.api.open_reading else "reading needs one"
    return f"{reading}, writing needs one: `dripleg key` makes them, and pairs a phone"
