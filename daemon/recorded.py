"""Recorded readings and drains: CSV in, every bad row named by file, line and column."""

from __future__ import annotations

import csv
import math
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from daemon.clock import parse_rfc3339
from daemon.errors import ReplayError, UnitError
from daemon.journal import Drain, Entry
from daemon.moisture.description import WATER_KG_PER_M3, Fixed, Measured
from daemon.site.types import Site
from daemon.units import recorded_to_si, recorded_units, to_si
from sensors.reading import Channel, Reading, reading

READINGS_HEADER = ["time", "channel", "value", "unit"]
DRAINS_HEADER = ["time", "trap", "volume", "unit"]
DRAIN_UNITS = ("ml", "L", "oz", "gal")


@dataclass(frozen=True, slots=True)
class BadRow:
    """A row that cannot be used."""

    file: str
    line: int
    column: str
    problem: str

    def __str__(self) -> str:
        return f"{self.file}, line {self.line}, column {self.column}: {self.problem}"


@dataclass(slots=True)
class Recorded:
    """Readings in order of time, and what was left out."""

    readings: list[Reading] = field(default_factory=list)
    bad: list[BadRow] = field(default_factory=list)


class _Rows:
    """The rows of one CSV file, with what to do about a bad one."""

    def __init__(self, path: Path, header: list[str], skip_bad: bool) -> None:
        self.path, self.header, self.skip_bad = path, header, skip_bad
        self.bad: list[BadRow] = []
        self.line = 1

    def __iter__(self) -> Iterator[list[str]]:
        try:
            with self.path.open(encoding="utf-8-sig", newline="") as file:
                rows = csv.reader(file, strict=True)
                self._check_header(next(rows, None))
                yield from self._good_rows(rows)
        except FileNotFoundError:
            raise ReplayError(f"{self.path}: there is no such file") from None
        except OSError as error:
            raise ReplayError(f"{self.path}: cannot be read ({error.strerror})") from None
        except UnicodeDecodeError as error:
            raise ReplayError(
                f"{self.path}, after line {self.line}: not UTF-8 ({error.reason}); "
                "save the file as UTF-8"
            ) from None
        except csv.Error as error:
            raise ReplayError(
                f"{self.path}, line {self.line + 1}: not CSV as in RFC 4180 ({error})"
            ) from None

    def _good_rows(self, rows: Iterator[list[str]]) -> Iterator[list[str]]:
        reader_line = rows.line_num  # type: ignore[attr-defined]
        for row in rows:
            self.line, reader_line = reader_line + 1, rows.line_num  # type: ignore[attr-defined]
            if not row:
                continue
            if len(row) != len(self.header):
                self.refuse("time", f"{len(row)} columns; expected {', '.join(self.header)}")
                continue
            yield row

    def _check_header(self, header: list[str] | None) -> None:
        if header is None:
            raise ReplayError(f"{self.path}: empty; expected {','.join(self.header)}")
        if [name.strip() for name in header] != self.header:
            raise ReplayError(
                f'{self.path}, line 1: the header is "{",".join(header)}"; '
                f"expected {','.join(self.header)}"
            )

    def refuse(self, column: str, problem: str) -> None:
        """Stop at a bad row, or note it and go on."""
        row = BadRow(str(self.path), self.line, column, problem)
        if not self.skip_bad:
            raise ReplayError(f"{row} (or leave bad rows out with --skip-bad)")
        self.bad.append(row)


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


class _ReadingsFile:
    """One pass over a readings file."""

    def __init__(self, site: Site, path: Path, skip_bad: bool) -> None:
        self.site = site
        self.rows = _Rows(path, READINGS_HEADER, skip_bad)
        self.readings: list[Reading] = []
        self.waiting: list[_OtherReference] = []
        self.last_us: dict[str, int] = {}
        self._time = ("", 0)

    def read(self) -> Recorded:
        """All readings, in order of time; rows of one time stay in the file's order."""
        for row in self.rows:
            self._row(*row)
        self._refer_to_barometer()
        kept = [found for found in self.readings if found.channel]
        kept.sort(key=lambda found: found.time_us)
        if not kept:
            raise ReplayError(f"{self.rows.path}: no usable readings; a replay needs at least one")
        return Recorded(kept, self.rows.bad)

    def _row(self, time: str, name: str, value: str, unit: str) -> None:
        time_us = self._parse_time(time)
        if time_us is None:
            return
        channel = self.site.channels.get(name.strip())
        if channel is None:
            known = ", ".join(sorted(self.site.channels)) or "none: the site file has no sensors"
            self.rows.refuse("channel", f'"{name}" is not a channel of this site (known: {known})')
            return
        if time_us < self.last_us.get(channel.name, time_us):
            self.rows.refuse(
                "time", f"{time} is before the row of {channel.name} above it; sort them by time"
            )
            return
        number = self._number(value)
        if number is None:
            return
        if self._accept(channel, number, unit.strip(), time_us):
            self.last_us[channel.name] = time_us

    def _parse_time(self, text: str) -> int | None:
        if self._time[0] != text:
            try:
                self._time = (text, parse_rfc3339(text))
            except ValueError as error:
                self.rows.refuse("time", str(error))
                return None
        return self._time[1]

    def _number(self, text: str) -> float | None:
        try:
            number = float(text)
        except ValueError:
            number = math.nan
        if not math.isfinite(number):
            self.rows.refuse("value", f'"{text}" is not a number; write it like 21.5')
            return None
        return number

    def _accept(self, channel: Channel, number: float, unit: str, time_us: int) -> bool:
        if unit not in recorded_units(channel.quantity):
            known = ", ".join(each or "an empty unit" for each in recorded_units(channel.quantity))
            self.rows.refuse("unit", f'"{unit}" does not fit {channel.name}; expected {known}')
            return False
        if self._is_other_reference(channel, unit):
            value_pa = to_si(number, unit[:3], "pressure")
            self.waiting.append(
                _OtherReference(len(self.readings), self.rows.line, channel, value_pa, time_us)
            )
            self.readings.append(Reading("", math.nan, time_us))
            return True
        try:
            value = recorded_to_si(number, unit, channel.quantity, gauge=channel.gauge)
        except UnitError as error:
            self.rows.refuse("value", str(error))
            return False
        return self._append(channel, value, time_us, f"{number:g} {unit}".strip())

    def _append(self, channel: Channel, value: float, time_us: int, shown: str) -> bool:
        found = reading(channel, value, time_us)
        if not found.good:
            self.rows.refuse("value", f"{shown} cannot be from {channel.name}: {found.fault} (SI)")
            return False
        self.readings.append(found)
        return True

    def _is_other_reference(self, channel: Channel, unit: str) -> bool:
        return (
            channel.quantity == "pressure"
            and len(unit) == 4
            and unit[:3] in ("bar", "psi")
            and (unit[3] == "g") != channel.gauge
        )

    def _refer_to_barometer(self) -> None:
        """Turn gauge into absolute and back with the barometer of the record at that time."""
        if not self.waiting:
            return
        barometer = self._barometer()
        for row in self.waiting:
            self.rows.line = row.line
            if barometer is None:
                self.rows.refuse(
                    "unit", "needs the barometer, and the intake's pressure is not known"
                )
                continue
            atmosphere_pa = barometer.at(row.time_us)
            sign = -1.0 if row.channel.gauge else 1.0
            found = reading(row.channel, row.value_pa + sign * atmosphere_pa, row.time_us)
            if found.good:
                self.readings[row.position] = found
            else:
                self.rows.refuse("value", f"cannot be from {row.channel.name}: {found.fault} (SI)")

    def _barometer(self) -> _Barometer | None:
        source = self.site.line.stations[0].pressure
        if isinstance(source, Fixed):
            return _Barometer(np.array([0]), np.array([source.value]))
        if not isinstance(source, Measured):
            return None
        mine = [found for found in self.readings if found.channel == source.channel]
        mine.sort(key=lambda found: found.time_us)
        if not mine:
            return None
        times = np.array([found.time_us for found in mine])
        return _Barometer(times, np.array([found.value for found in mine]))


def read_readings(site: Site, path: Path, skip_bad: bool = False) -> Recorded:
    """Readings from a CSV of `time,channel,value,unit`; ReplayError at the first bad row.

    A pressure in `bara`/`psia` on a gauge channel (or `barg`/`psig` on an absolute one) is turned
    with the intake's barometer as it stood then.
    """
    return _ReadingsFile(site, path, skip_bad).read()


def read_drains(
    site: Site, path: Path, first_us: int, skip_bad: bool = False
) -> tuple[list[Entry], list[BadRow]]:
    """Drains from a CSV of `time,trap,volume,unit`, in order of time, as journal entries."""
    rows = _Rows(path, DRAINS_HEADER, skip_bad)
    found: list[tuple[int, Drain]] = []
    for time, trap, volume, unit in rows:
        entry = _drain_row(site, rows, (time, trap.strip(), volume.strip(), unit.strip()), first_us)
        if entry is not None:
            found.append(entry)
    found.sort(key=lambda pair: pair[0])
    entries = [Entry(n, at_us, at_us, body) for n, (at_us, body) in enumerate(found, 1)]
    return entries, rows.bad


def _drain_row(
    site: Site, rows: _Rows, cells: tuple[str, str, str, str], first_us: int
) -> tuple[int, Drain] | None:
    """A row as a time and a drain; a bad one is refused by its column."""
    time, trap, volume, unit = cells
    try:
        at_us = parse_rfc3339(time)
    except ValueError as error:
        rows.refuse("time", str(error))
        return None
    known = ", ".join(site.traps)
    if at_us < first_us:
        rows.refuse("time", f"{time} is before the first reading; leave the row out")
    elif trap not in site.traps:
        rows.refuse("trap", f'"{trap}" is not a trap of this site (known: {known})')
    elif not volume and unit:
        rows.refuse("unit", f'"{unit}" without a volume; leave both empty if not measured')
    elif not volume:
        return at_us, Drain(trap)
    else:
        drain = _measured_drain(rows, trap, volume, unit)
        return None if drain is None else (at_us, drain)
    return None


def _measured_drain(rows: _Rows, trap: str, volume: str, unit: str) -> Drain | None:
    try:
        number = float(volume)
    except ValueError:
        number = math.nan
    if not (math.isfinite(number) and number >= 0.0):
        rows.refuse(
            "volume", f'"{volume}" is not a volume; 0 means found empty, nothing: not measured'
        )
        return None
    if unit not in DRAIN_UNITS and not (number == 0.0 and not unit):
        rows.refuse("unit", f'"{unit}" is not one of {", ".join(DRAIN_UNITS)}')
        return None
    if number == 0.0:
        return Drain(trap, "empty", 0.0)
    return Drain(trap, "emptied", to_si(number, unit, "volume") * WATER_KG_PER_M3)
