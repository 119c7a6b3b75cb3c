"""Which readings of a site are believed: the rules of its channels, and a tick's readings judged.

Part of `advance`, so that live, recovery and replay judge alike. Pure.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from itertools import combinations

from daemon.moisture.contact import STALE_AFTER_PERIODS
from daemon.moisture.description import Measured, Source, Station
from daemon.site.types import Site
from daemon.state import ChannelRecord
from sensors.quality import Judged, QualityState, judge
from sensors.quality_rules import Agreement, rules_for
from sensors.reading import Channel, Reading
from sensors.registry import SensorConfig

BLED_FROM_LINE = "vented-cell"
# Two hours after the compressor stopped, what stands in one shop has about one temperature, and a
# line without regulators between has one pressure. Common practice, no source.
ALIKE_K, ALIKE_PA = 10.0, 10_000.0


class Judging:
    """Judges the readings of one site."""

    def __init__(self, site: Site, period_us: int) -> None:
        self.running = site.line.compressor.running
        self.stale_us = STALE_AFTER_PERIODS * period_us
        self.rules = rules_for(site.channels.values(), tuple(alike(site)), in_line(site.sensors))

    def judge(
        self,
        state: QualityState,
        channels: Mapping[str, ChannelRecord],
        readings: Sequence[Reading],
        now_us: int,
    ) -> Judged:
        """One tick's readings; `channels` is what was known before it."""
        ran = self._ran(channels, readings, now_us)
        return judge(self.rules, state, readings, running=ran)

    def _ran(
        self, channels: Mapping[str, ChannelRecord], readings: Sequence[Reading], now_us: int
    ) -> bool | None:
        """Whether the compressor ran at any time of the tick; None where nobody knows."""
        if self.running is None:
            return None
        told = [one for one in readings if one.channel == self.running]
        if any(not one.good for one in told):
            return None
        before = channels[self.running]
        levels = [one.value for one in told]
        fresh = before.only_edges or now_us - before.time_us <= self.stale_us
        if before.time_us >= 0 and not before.fault and fresh:
            levels.append(before.value)
        return any(level > 0.5 for level in levels) if levels else None


def in_line(sensors: Sequence[SensorConfig]) -> list[str]:
    """Sensors whose humidity element sits in the line's air."""
    return [sensor.id for sensor in sensors if sensor.driver == BLED_FROM_LINE]


def alike(site: Site) -> Iterator[Agreement]:
    """Channels that should show the same once the compressor was off for long."""
    for zone in _pressure_zones(site.line.stations).values():
        channels = _measured(site, [station.pressure for station in zone])
        for gauge in (True, False):
            of_kind = [channel for channel in channels if channel.gauge == gauge]
            if len(of_kind) > 1:
                yield Agreement(_names(of_kind), ALIKE_PA + _worst(of_kind))
    # a cooler may be chilled and the intake may be outdoors
    indoors = [s for s in site.line.stations if s.kind not in ("intake", "cooler")]
    warm = _measured(site, [station.temperature for station in indoors])
    if len(warm) > 1:
        yield Agreement(_names(warm), ALIKE_K + _worst(warm), doubt_only=True)


def _pressure_zones(stations: Sequence[Station]) -> dict[str, list[Station]]:
    """Stations by the receiver or regulator that their pressure comes from.

    What stands before the first receiver is let down when the compressor stops.
    """
    zone_of: dict[str, str] = {}
    zones: dict[str, list[Station]] = {}
    for station in stations:
        zone = zone_of.get(station.after, "")
        if station.kind == "regulator" or (station.kind == "receiver" and not zone):
            zone = station.id
        zone_of[station.id] = zone
        if zone:
            zones.setdefault(zone, []).append(station)
    return zones


def _measured(site: Site, sources: Sequence[Source]) -> list[Channel]:
    names = dict.fromkeys(source.channel for source in sources if isinstance(source, Measured))
    return [site.channels[name] for name in names]


def _names(channels: Sequence[Channel]) -> tuple[str, ...]:
    return tuple(channel.name for channel in channels)


def _worst(channels: Sequence[Channel]) -> float:
    """How far two parts may differ by their data sheets."""
    pairs = combinations(channels, 2)
    return max(math.hypot(a.give_or_take, b.give_or_take) for a, b in pairs)
