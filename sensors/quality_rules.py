"""What a channel's readings may do before they are no longer believed.

The figures are "common practice, no source" or invented, as each says: they are set where a real
shop does not reach, so that they find broken parts and not weather.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations

from sensors.reading import Channel

OFF_LONG_S = 2 * 3600.0  # after this long without compressor the line has settled (practice)
SATURATED = 0.995  # relative humidity at which the element is wet or at its end
DRY_AGAIN = 0.97
SATURATED_S = 1800.0  # fog passes a workshop's intake in less (invented)
FROZEN_S = 900.0
FROZEN_RUNNING_S = 300.0
REPEATED = 30  # readings in a row, however far apart, before standing still means anything
LIVELY_MOVES = 30  # changes in quick succession show that a channel does not stand still (invented)
SLOW_COSTS = 10  # of those, what a change after a long stand takes off again
QUICK_STEPS = 3  # a change after no more readings than this is a quick one
LONGEST_GAP_US = 600_000_000  # of running between two ticks; what was before is not known
ACCEPT_AFTER = 6  # consecutive readings at the other side of a jump make it true


@dataclass(frozen=True, slots=True)
class Rule:
    """Limits of one channel, SI and seconds. None: not judged."""

    lowest: float
    highest: float
    fastest_per_s: float | None = None
    jump: float = 0.0  # allowed at once, whatever the time between
    saturates: bool = False  # a humidity element that can be wet
    # with the compressor running, unchanged to the step for this long is frozen
    frozen_running_s: float | None = None


@dataclass(frozen=True, slots=True)
class Part:
    """Channels of one part that noise never lets stand still all together."""

    name: str
    channels: tuple[str, ...]
    frozen_s: float


@dataclass(frozen=True, slots=True)
class Agreement:
    """Channels that should show the same: always, or once the compressor was off for long."""

    channels: tuple[str, ...]
    within: float  # of the median
    always: bool = False
    doubt_only: bool = False  # the odd one of several is doubted, not bad: it may well be true


@dataclass(frozen=True, slots=True)
class Rules:
    """All rules of a site."""

    channels: Mapping[str, Rule]
    parts: tuple[Part, ...] = ()
    agreements: tuple[Agreement, ...] = ()


def rule_for(channel: Channel) -> Rule:
    """The rule of a channel by its quantity; rates are invented, several times what shops show."""
    limits = (channel.lowest, channel.highest)
    if channel.quantity == "temperature":
        return Rule(*limits, fastest_per_s=2.0, jump=5.0)
    if channel.quantity == "dew_point":
        return Rule(*limits, fastest_per_s=2.0, jump=10.0)
    if channel.quantity == "relative_humidity":
        return Rule(*limits, fastest_per_s=0.05, jump=0.15, saturates=True)
    if channel.quantity == "pressure" and channel.gauge:
        # a small tank blown down loses a bar in a second; a pump never makes more
        return Rule(*limits, fastest_per_s=1e5, jump=1e5, frozen_running_s=FROZEN_RUNNING_S)
    if channel.quantity == "pressure":
        return Rule(*limits, fastest_per_s=100.0, jump=500.0)  # a door, a gust; weather is slower
    return Rule(*limits)


def rules_for(
    channels: Iterable[Channel],
    alike: Sequence[Agreement] = (),
    in_line: Iterable[str] = (),
) -> Rules:
    """Rules for a site's channels.

    `in_line` names sensors whose humidity element sits in line air (a vented cell), where dry or
    saturated air is nothing strange. Barometers must agree always; `alike` adds what the line's
    description knows.
    """
    listed = list(channels)
    inside = set(in_line)
    found: dict[str, Rule] = {}
    for channel in listed:
        rule = rule_for(channel)
        if channel.sensor in inside:
            rule = Rule(rule.lowest, rule.highest)
        found[channel.name] = rule
    return Rules(found, _parts(listed), (*_barometers(listed), *alike))


def _parts(channels: Sequence[Channel]) -> tuple[Part, ...]:
    """Parts with a barometer: its noise of some pascals moves at every reading."""
    by_sensor: dict[str, list[Channel]] = {}
    for channel in channels:
        by_sensor.setdefault(channel.sensor, []).append(channel)
    return tuple(
        Part(sensor, tuple(one.name for one in ones), FROZEN_S)
        for sensor, ones in by_sensor.items()
        if any(_is_barometer(one) for one in ones) and len(ones) > 1
    )


def _is_barometer(channel: Channel) -> bool:
    return channel.quantity == "pressure" and not channel.gauge and channel.highest <= 120_000.0


def _barometers(channels: Sequence[Channel]) -> tuple[Agreement, ...]:
    """Barometers of one shop, with 50 Pa for 4 m of height between them."""
    names = [one for one in channels if _is_barometer(one)]
    if len(names) < 2:
        return ()
    worst = max(math.hypot(a.give_or_take, b.give_or_take) for a, b in combinations(names, 2))
    return (Agreement(tuple(one.name for one in names), 2.0 * worst + 50.0, always=True),)
