"""Channels that should show the same, and do not."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from statistics import median

from sensors.quality_rules import Agreement
from sensors.quality_state import DISAGREES, ChannelState
from sensors.reading import Reading


def disagreeing(
    agreement: Agreement,
    readings: Sequence[Reading],
    good: Mapping[str, int],
    doubts: dict[str, str],
) -> dict[int, tuple[str, str]]:
    """Of three or more the odd one is bad; of two nobody knows which, and both are doubted."""
    values = {name: readings[good[name]].value for name in agreement.channels if name in good}
    if len(values) < 2:
        return {}
    if len(values) == 2:
        (first, a), (second, b) = values.items()
        if abs(a - b) > agreement.within:
            doubts[first] = doubts[second] = f"{first} is {a:g}, {second} is {b:g}"
        return {}
    middle = median(values.values())
    odd = {
        name: f"{value:g}, the others are about {middle:g}"
        for name, value in values.items()
        if abs(value - middle) > agreement.within
    }
    if agreement.doubt_only:
        doubts |= odd
        return {}
    return {good[name]: (DISAGREES, detail) for name, detail in odd.items()}


def still_disagreeing(
    agreement: Agreement,
    before: Mapping[str, ChannelState],
    good: Mapping[str, int],
    doubts: dict[str, str],
) -> dict[int, tuple[str, str]]:
    """While they need not agree, what was found when they should have holds on."""
    found: dict[int, tuple[str, str]] = {}
    for name in agreement.channels:
        severity = before[name].said.get(DISAGREES) if name in before else None
        if severity == "bad" and name in good:
            found[good[name]] = (DISAGREES, "")
        elif severity == "doubt":
            doubts[name] = ""
    return found
