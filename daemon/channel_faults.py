"""Why a channel cannot be believed now."""

from __future__ import annotations

from daemon.moisture.contact import STALE_AFTER_PERIODS
from daemon.state import CoreState
from sensors.quality import DISAGREES


def fault_of(state: CoreState, name: str, period_us: int) -> str:
    """In words with the channel's name, "" while it can be believed."""
    record = state.channels[name]
    if record.fault:
        return f"{name} is not usable: {record.fault}"
    silent_us = state.time_us - max(record.heard_us, state.begun_us)
    if silent_us > STALE_AFTER_PERIODS * period_us and not record.only_edges:
        return f"{name} has said nothing for {STALE_AFTER_PERIODS} periods"
    return ""


def doubt_of(state: CoreState, name: str) -> str:
    """Why it and others cannot all be right, in words, "" while they can."""
    quality = state.quality.channels.get(name)
    if quality is not None and quality.said.get(DISAGREES) == "doubt":
        return f"{name} is in doubt: it {DISAGREES}"
    return ""


def unusable(state: CoreState, name: str, period_us: int) -> str:
    """The same, and also while it is in doubt or before it has said anything good."""
    fault = fault_of(state, name, period_us) or doubt_of(state, name)
    if not fault and state.channels[name].time_us < 0:
        return f"{name} has said nothing yet"
    return fault
