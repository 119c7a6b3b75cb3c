"""Recorded readings and drains: CSV in, every bad row named by file, line and column."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Protocol

import numpy as np

from daemon.clock import parse_rfc3339
from daemon.csv_rows import BadRow, Rows, number, shown
from daemon.errors import ReplayError, UnitError
from daemon.journal import Drain, Entry
from daemon.moisture.description import WATER_KG_PER_M3, Fixed, Measured
from daemon.site.types import Site
from daemon.units import recorded_from_si, recorded_to_si, recorded_units, to_si
from sensors.reading import Channel, Reading, reading

READINGS_HEADER = ["time", "channel", "value", "unit"]
DRAINS_HEADER = ["time", "trap", "volume", "unit"]
ROWS_A_WORD = 4096  # that are read between two words about it
DRAIN_UNITS = ("ml", "L", "oz", "gal")
EARLIEST_US = parse_rfc3339("1970-01-01T00:00:00Z")
LATEST_US = parse_rfc3339("2200-01-01T00:00:00Z")


@dataclass(slots=True)
class Recorded:
    """Readings in order of time, and what was left out."""

    readings: list[Reading] = field(default_factory=list)
    bad: list[BadRow] = field(default_factory=list)


@dataclass(slots=True)
class _Barometer:
    """The atmosphere's pressure over the record, for readings that are not as their channel is."""

    times_us: np.ndarray[tuple[int], np.dtype[np.int64]]
    values_pa: np.ndarray[tuple[int], np.dtype[np.float64]]

    def at(self, time_us: int) -> float:
        """The last one by then, or the first of all."""
        index = max(int(np.searchsorted(self.times_us, time_us, side="right")) - 1, 0)
        return float(self.values_pa[index])


@dataclass(slots=True)
class _OtherReference:
    """A pressure row that has to wait for the barometer."""

    position: int
    line: int
    channel: Channel
    value_pa: float
    time_us: int
    written: str


class Kept(Protocol):
    """Where a readings file's rows go."""

    def add(self, channel: str, value: float, time_us: int) -> int:
        """Keep one, NaN for a value that has to wait; gives its place."""
        ...

    def put(self, channel: str, place: int, value: float) -> None:
        """The value of one that had to wait; those that never get one are no readings."""
        ...

    def of(self, channel: str) -> tuple[Sequence[int], Sequence[float]]:
        """Times and values of one channel, in order of time."""
        ...


@dataclass(slots=True)
class _Listed:
    """Readings one by one."""

    readings: list[Reading] = field(default_factory=list)

    def add(self, channel: str, value: float, time_us: int) -> int:
        self.readings.append(Reading(channel, value, time_us))
        return len(self.readings) - 1

    def put(self, channel: str, place: int, value: float) -> None:
        self.readings[place] = Reading(channel, value, self.readings[place].time_us)

    def of(self, channel: str) -> tuple[Sequence[int], Sequence[float]]:
        mine = [found for found in self.whole() if found.channel == channel]
        return [found.time_us for found in mine], [found.value for found in mine]

    def whole(self) -> list[Reading]:
        """In order of time; rows of one time stay in the file's order."""
        kept = [found for found in self.readings if not math.isnan(found.value)]
        kept.sort(key=lambda found: found.time_us)
        return kept


class ReadingsFile:
    """One pass over a readings file."""

    def __init__(self, site: Site, path: Path, skip_bad: bool, kept: Kept) -> None:
        self.site = site
        self.rows = Rows(path, READINGS_HEADER, skip_bad)
        self.kept = kept
        self.waiting: list[_OtherReference] = []
        self.last_us: dict[str, int] = {}
        self._time: tuple[str | None, int] = (None, 0)

    def finish(self, any_kept: bool) -> list[BadRow]:
        """After the last row: the rows that were left out."""
        if not any_kept:
            raise ReplayError(f"{self.rows.path}: no usable readings; a replay needs at least one")
        self.rows.bad.sort(key=lambda row: row.line)
        return self.rows.bad

    def row(self, time: str, name: str, value: str, unit: str) -> None:
        time_us = self._parse_time(time)
        if time_us is None:
            return
        channel = self.site.channels.get(name.strip())
        if channel is None:
            known = ", ".join(sorted(self.site.channels)) or "none: the site file has no sensors"
            self.rows.refuse(
                "channel", f"{shown(name)} is not a channel of this site (known: {known})"
            )
            return
        if time_us < self.last_us.get(channel.name, time_us):
            self.rows.refuse(
                "time",
                f"{shown(time)} is before the row of {channel.name} above it; sort them by time",
            )
            return
        if self._accept(channel, value.strip(), unit.strip(), time_us):
            self.last_us[channel.name] = time_us

    def _parse_time(self, text: str) -> int | None:
        if self._time[0] != text:
            try:
                self._time = (text, _time_us(text))
            except ValueError as error:
                self.rows.refuse("time", str(error))
                return None
        return self._time[1]

    def _accept(self, channel: Channel, text: str, unit: str, time_us: int) -> bool:
        value = number(text)
        if value is None:
            self.rows.refuse("value", f"{shown(text)} is not a number; write it like 21.5")
            return False
        if unit not in recorded_units(channel.quantity):
            known = ", ".join(each or "an empty unit" for each in recorded_units(channel.quantity))
            self.rows.refuse("unit", f"{shown(unit)} does not fit {channel.name}; expected {known}")
            return False
        written = shown(f"{text} {unit}".strip())
        if self._is_other_reference(channel, unit):
            value_pa = to_si(value, unit[:3], "pressure")
            place = self.kept.add(channel.name, math.nan, time_us)
            self.waiting.append(
                _OtherReference(place, self.rows.line, channel, value_pa, time_us, written)
            )
            return True
        try:
            value_si = recorded_to_si(value, unit, channel.quantity, gauge=channel.gauge)
        except UnitError as error:
            self.rows.refuse("value", str(error))
            return False
        found = self._within(channel, value_si, time_us, written)
        if found is None:
            return False
        self.kept.add(found.channel, found.value, time_us)
        return True

    def _within(
        self, channel: Channel, value_si: float, time_us: int, written: str
    ) -> Reading | None:
        """The reading, unless the part cannot give such a value."""
        found = reading(channel, value_si, time_us)
        if found.good:
            return found
        low, high = (
            "{:.5g} {}".format(*recorded_from_si(end, channel.quantity, gauge=channel.gauge))
            for end in (channel.lowest, channel.highest)
        )
        self.rows.refuse(
            "value", f"{written} cannot be from {channel.name}: expected {low} to {high}"
        )
        return None

    def _is_other_reference(self, channel: Channel, unit: str) -> bool:
        return (
            channel.quantity == "pressure"
            and len(unit) == 4
            and unit[:3] in ("bar", "psi")
            and (unit[3] == "g") != channel.gauge
        )

    def refer_to_barometer(self) -> None:
        """Turn gauge into absolute and back with the barometer of the record at that time."""
        if not self.waiting:
            return
        barometer = self._barometer()
        for row in self.waiting:
            self.rows.line = row.line
            if barometer is None:
                self.rows.refuse(
                    "unit",
                    f"{row.written} needs the barometer of that time, and the file has no usable "
                    f"reading of it; expected what {row.channel.name} is by itself",
                )
                continue
            sign = -1.0 if row.channel.gauge else 1.0
            value_pa = row.value_pa + sign * barometer.at(row.time_us)
            found = self._within(row.channel, value_pa, row.time_us, row.written)
            if found is not None:
                self.kept.put(row.channel.name, row.position, found.value)

    def _barometer(self) -> _Barometer | None:
        source = self.site.line.stations[0].pressure
        if isinstance(source, Fixed):
            return _Barometer(np.array([0]), np.array([source.value]))
        if not isinstance(source, Measured):
            return None
        times, values = self.kept.of(source.channel)
        return _Barometer(np.array(times), np.array(values)) if len(times) else None


def read_readings(
    site: Site,
    path: Path,
    skip_bad: bool = False,
    progress: Callable[[float], None] = lambda share: None,
) -> Recorded:
    """Readings from a CSV of `time,channel,value,unit`; ReplayError at the first bad row.

    A pressure in `bara`/`psia` on a gauge channel (or `barg`/`psig` on an absolute one) is turned
    with the intake's barometer as it stood then. `progress` is told of the share that is read.
    """
    listed = _Listed()
    file = ReadingsFile(site, path, skip_bad, listed)
    for count, row in enumerate(file.rows):
        file.row(*row)
        if count % ROWS_A_WORD == 0:
            progress(file.rows.share)
    file.refer_to_barometer()
    readings = listed.whole()
    return Recorded(readings, file.finish(bool(readings)))


def read_drains(
    site: Site, path: Path, first_us: int, skip_bad: bool = False
) -> tuple[list[Entry], list[BadRow]]:
    """Drains from a CSV of `time,trap,volume,unit`, in order of time, as journal entries."""
    rows = Rows(path, DRAINS_HEADER, skip_bad)
    found: list[tuple[int, Drain]] = []
    for time, trap, volume, unit in rows:
        entry = _drain_row(site, rows, (time, trap.strip(), volume.strip(), unit.strip()), first_us)
        if entry is not None:
            found.append(entry)
    found.sort(key=lambda pair: pair[0])
    entries = [Entry(n, at_us, at_us, body) for n, (at_us, body) in enumerate(found, 1)]
    return entries, rows.bad


def _drain_row(
    site: Site, rows: Rows, cells: tuple[str, str, str, str], first_us: int
) -> tuple[int, Drain] | None:
    """A row as a time and a drain; a bad one is refused by its column."""
    time, trap, volume, unit = cells
    try:
        at_us = _time_us(time)
    except ValueError as error:
        rows.refuse("time", str(error))
        return None
    known = ", ".join(site.traps)
    if at_us < first_us:
        rows.refuse("time", f"{shown(time)} is before the first reading; leave the row out")
    elif trap not in site.traps:
        rows.refuse("trap", f"{shown(trap)} is not a trap of this site (known: {known})")
    elif not volume and unit:
        rows.refuse("unit", f"{shown(unit)} without a volume; leave both empty if not measured")
    elif not volume:
        return at_us, Drain(trap)
    else:
        drain = _measured_drain(rows, trap, volume, unit)
        return None if drain is None else (at_us, drain)
    return None


def _measured_drain(rows: Rows, trap: str, volume: str, unit: str) -> Drain | None:
    amount = number(volume)
    if amount is None or amount < 0.0:
        rows.refuse(
            "volume",
            f"{shown(volume)} is not a volume; 0 means found empty, nothing: not measured",
        )
        return None
    if unit not in DRAIN_UNITS and not (amount == 0.0 and not unit):
        rows.refuse("unit", f"{shown(unit)} is not one of {', '.join(DRAIN_UNITS)}")
        return None
    if amount == 0.0:
        return Drain(trap, "empty", 0.0)
    return Drain(trap, "emptied", to_si(amount, unit, "volume") * WATER_KG_PER_M3)


def _time_us(text: str) -> int:
    time_us = parse_rfc3339(text)
    if not EARLIEST_US <= time_us < LATEST_US:
        raise ValueError(f'"{text}" is outside the years 1970 to 2199; correct the year')
    return time_us
