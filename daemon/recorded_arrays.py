"""Recorded readings into arrays: a year of them in the memory of a Pi.

Rows are taken thousands at a time where they are written plainly, as an export writes them; where
anything about them is not, they are taken one by one like any other file, with the same errors.
"""

from __future__ import annotations

import re
from array import array
from collections import defaultdict
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from daemon.clock import parse_rfc3339
from daemon.csv_rows import BadRow
from daemon.moisture.along_course import Ints
from daemon.moisture.ensemble import Array
from daemon.record_arrays import Record, Told
from daemon.recorded import EARLIEST_US, LATEST_US, ReadingsFile
from daemon.site.types import Site
from daemon.units import recorded_many_to_si, recorded_units
from sensors.reading import Channel

ROWS_AT_ONCE = 32_768
_PLAIN_NUMBERS = re.compile(r"[0-9.eE+-]+\Z", re.ASCII)
_PLAIN_TIME = re.compile(rb"(?:[0-9]{4}-[0-9]{2}-[0-9]{2}T[0-9]{2}:[0-9]{2}:[0-9]{2}Z)+\Z")
_TIME_LENGTH = 20
_PLACES = (1000, 100, 10, 1, 0, 10, 1, 0, 10, 1, 0, 10, 1, 0, 10, 1, 0, 10, 1, 0)


@dataclass(slots=True)
class _Columns:
    """Readings by channel, as they come."""

    times: dict[str, array[int]] = field(default_factory=lambda: defaultdict(lambda: array("q")))
    values: dict[str, array[float]] = field(default_factory=lambda: defaultdict(lambda: array("d")))

    def add(self, channel: str, value: float, time_us: int) -> int:
        self.times[channel].append(time_us)
        self.values[channel].append(value)
        return len(self.times[channel]) - 1

    def add_all(self, channel: str, times_us: Ints, values: Array) -> None:
        """Keep many of one channel."""
        self.times[channel].frombytes(times_us.tobytes())
        self.values[channel].frombytes(values.tobytes())

    def put(self, channel: str, place: int, value: float) -> None:
        self.values[channel][place] = value

    def of(self, channel: str) -> tuple[Sequence[int], Sequence[float]]:
        if channel not in self.times:
            return (), ()
        told = self._told(channel)
        return told.times_us.tolist(), told.values.tolist()

    def _told(self, channel: str) -> Told:
        times = np.frombuffer(self.times[channel], np.int64)
        values = np.frombuffer(self.values[channel], np.float64)
        nothing = np.isnan(values)
        return Told(times[~nothing], values[~nothing]) if nothing.any() else Told(times, values)

    def record(self) -> Record:
        """All of them."""
        channels = {name: self._told(name) for name in self.times}
        return Record({name: told for name, told in channels.items() if len(told.values)})


@dataclass(slots=True)
class _Slot:
    """Rows of one channel in one unit."""

    channel: Channel
    unit: str
    texts: list[str] = field(default_factory=list)
    times: list[str] = field(default_factory=list)


def read_record(
    site: Site,
    path: Path,
    skip_bad: bool = False,
    progress: Callable[[float], None] = lambda share: None,
) -> tuple[Record, list[BadRow]]:
    """Readings from a CSV of `time,channel,value,unit`, and the rows that were left out.

    As `read_readings`, with the same errors; `progress` is told of the share that is read.
    """
    columns = _Columns()
    file = ReadingsFile(site, path, skip_bad, columns)
    for lines in file.rows.chunks(ROWS_AT_ONCE):
        if not _take_plain(site, file, columns, lines):
            for row in file.rows.cells(lines):
                file.row(*row)
        progress(file.rows.share)
    file.refer_to_barometer()
    record = columns.record()
    return record, file.finish(bool(record.channels))


def _take_plain(site: Site, file: ReadingsFile, columns: _Columns, lines: Sequence[str]) -> bool:
    """Take rows of which every one is plain; False, with nothing taken, where one is not."""
    sorted_out = _sorted_out(site, lines)
    if sorted_out is None:
        return False
    found: dict[str, tuple[Ints, Array]] = {}
    for slot in sorted_out:
        times_us, values = _times_us(slot.times), _values(slot)
        if times_us is None or values is None or slot.channel.name in found:
            return False  # a channel in two units keeps its order row by row
        before_us = file.last_us.get(slot.channel.name, EARLIEST_US)
        if times_us[0] < before_us or (np.diff(times_us) < 0).any():
            return False
        found[slot.channel.name] = (times_us, values)
    for name, (times_us, values) in found.items():
        columns.add_all(name, times_us, values)
        file.last_us[name] = int(times_us[-1])
    file.rows.line += len(lines)
    return True


def _sorted_out(site: Site, lines: Iterable[str]) -> list[_Slot] | None:
    """The rows by channel and unit; None where one has not four plain cells."""
    slots = {
        name: {
            unit + end: _Slot(channel, unit)
            for unit in recorded_units(channel.quantity)
            if not _says_reference(channel, unit)
            for end in ("\n", "\r\n", "")
        }
        for name, channel in site.channels.items()
    }
    try:
        for line in lines:
            time, name, value, unit = line.split(",")
            slot = slots[name][unit]
            slot.texts.append(value)
            slot.times.append(time)
    except (ValueError, KeyError):
        return None
    return [slot for of_channel in slots.values() for slot in of_channel.values() if slot.texts]


def _says_reference(channel: Channel, unit: str) -> bool:
    """Whether a pressure is measured from elsewhere than its channel: it needs a barometer."""
    said = channel.quantity == "pressure" and len(unit) == 4 and unit[:3] in ("bar", "psi")
    return said and (unit[3] == "g") != channel.gauge


def _values(slot: _Slot) -> Array | None:
    """The values in the channel's steps; None where one is not plain or not the channel's."""
    if "" in slot.texts or _PLAIN_NUMBERS.match("".join(slot.texts)) is None:
        return None
    try:
        written = np.array(list(map(float, slot.texts)))
    except ValueError:
        return None
    channel = slot.channel
    values = recorded_many_to_si(written, slot.unit, channel.quantity)
    if channel.quantity == "contact" and not np.isin(values, (0.0, 1.0)).all():
        return None
    if not ((values >= channel.lowest) & (values <= channel.highest)).all():
        return None  # also what is not finite
    stepped: Array = np.rint(values / channel.step) * channel.step
    return stepped


def _times_us(texts: list[str]) -> Ints | None:
    """The times; None where one is not written as it should be."""
    together = "".join(texts).encode()
    plain = len(together) == _TIME_LENGTH * len(texts) and _PLAIN_TIME.match(together)
    times_us = _of_plain(together) if plain else None
    if times_us is None:
        try:
            times_us = np.array([parse_rfc3339(text) for text in texts])
        except ValueError:
            return None
    within = (times_us >= EARLIEST_US) & (times_us < LATEST_US)
    return times_us if within.all() else None


def _of_plain(together: bytes) -> Ints | None:
    """Times like 2026-03-02T07:10:00Z, one after the other; None where one does not exist."""
    digits = np.frombuffer(together, np.uint8).reshape(-1, _TIME_LENGTH).astype(np.int64)
    digits = (digits - ord("0")) * np.array(_PLACES)
    year, month, day, hour, minute, second = (
        digits[:, first:last].sum(axis=1)
        for first, last in ((0, 4), (5, 7), (8, 10), (11, 13), (14, 16), (17, 19))
    )
    known = (year >= 1) & (month >= 1) & (month <= 12) & (hour < 24) & (minute < 60) & (second < 60)
    if not known.all():
        return None
    months = (year - 1970) * 12 + month - 1
    starts, ends = (
        months_on.astype("datetime64[M]").astype("datetime64[D]").astype(np.int64)
        for months_on in (months, months + 1)
    )
    if ((day < 1) | (day > ends - starts)).any():
        return None
    seconds: Ints = (starts + day - 1) * 86_400 + hour * 3600 + minute * 60 + second
    return seconds * 1_000_000
