"""`dripleg export`: what the database holds as plain CSV, as `dripleg replay` reads it."""

from __future__ import annotations

import argparse
import csv
import os
import re
import sys
from collections.abc import Iterable, Iterator, Mapping, Sequence
from contextlib import ExitStack
from dataclasses import dataclass, field
from datetime import datetime
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

from daemon.clock import Clock, SystemClock, format_rfc3339, parse_rfc3339
from daemon.errors import DriplegError
from daemon.export_rows import (
    FAULTS_HEADER,
    JOURNAL_HEADER,
    OTHERS_HEADER,
    Counts,
    ReadingRows,
    Row,
    by_time,
    drain_rows,
    journal_rows,
    transition_rows,
)
from daemon.progress import Progress
from daemon.recorded import DRAINS_HEADER, READINGS_HEADER
from daemon.replay import TRANSITIONS_HEADER
from daemon.site.types import Site
from daemon.store.reader import StoreReader

OTHERS = "other-channels.csv"
FILES = ("readings.csv", "faults.csv", "drains.csv", "transitions.csv", "journal.csv", OTHERS)
_DATE = re.compile(r"\d{4}-\d{2}-\d{2}\Z", re.ASCII)


class ExportError(DriplegError, ValueError):
    """What was asked for cannot be exported: an unknown channel, a time, an empty span."""


@dataclass(frozen=True, slots=True)
class Span:
    """From a time on, up to but not including another."""

    from_us: int
    to_us: int
    said: bool  # somebody asked for it: what lies outside is not wanted


@dataclass(slots=True)
class Exported:
    """What was written."""

    span: Span
    readings: Counts = field(default_factory=Counts)
    drains: int = 0
    drains_left_out: Mapping[str, int] = field(default_factory=dict)
    transitions: int = 0
    entries: int = 0


def export_files(site: Site, options: argparse.Namespace, store_path: Path) -> str:
    """Run an export; what to say about it."""
    channels = _channels(site, options.channel or ())
    with StoreReader.open(store_path) as reader:
        span = _span(site, reader, options.begin, options.end)
        done = export(site, reader, span, channels, options.out, SystemClock())
    return "\n".join(_lines(site, done, options.out))


def export(
    site: Site,
    reader: StoreReader,
    span: Span,
    channels: Sequence[str],
    folder: Path,
    clock: Clock,
) -> Exported:
    """Write the files into `folder`, which is made if missing; each is there when it is whole.

    Without `channels` all are written, also those that the site file does not have any more.
    """
    done = Exported(span)
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with _Files(folder) as files:
            rows = _readings(site, reader, span, channels, files, clock)
            done.readings = rows.counts
            begun_us = rows.counts.first_us
            first_us = span.from_us if begun_us is None else begun_us
            from_us = span.from_us if span.said else 0
            every, counting = reader.entries(from_us, span.to_us)
            drains = drain_rows(counting, site.traps, first_us)
            done.drains, done.drains_left_out = len(drains.rows), drains.left_out
            files.write("drains.csv", DRAINS_HEADER, drains.rows)
            transitions = reader.transitions(from_us, span.to_us)
            done.transitions, done.entries = len(transitions), len(every)
            header = TRANSITIONS_HEADER.split(",")
            files.write("transitions.csv", header, transition_rows(transitions))
            files.write("journal.csv", JOURNAL_HEADER, journal_rows(every, counting))
    except OSError as error:
        raise ExportError(
            f"{error.filename or folder}: cannot be written ({error.strerror}); "
            "name another folder with --out"
        ) from None
    return done


def _readings(
    site: Site,
    reader: StoreReader,
    span: Span,
    channels: Sequence[str],
    files: _Files,
    clock: Clock,
) -> ReadingRows:
    progress = Progress(sys.stderr, clock, "readings")
    rows = ReadingRows(site.channels)
    reach_us = reader.reach_us
    ticks = reader.ticks(span.from_us - reach_us - 1, span.to_us + reach_us)
    length_us = max(span.to_us - span.from_us, 1)
    try:
        readings = files.open("readings.csv", READINGS_HEADER)
        faults = files.open("faults.csv", FAULTS_HEADER)
        for until_us, some in by_time(ticks, reach_us):
            wanted = [
                one
                for one in some
                if span.from_us <= one.time_us < span.to_us
                and (not channels or one.channel in channels)
            ]
            good, bad, others = rows.rows(wanted)
            readings.writerows(good)
            faults.writerows(bad)
            if others:
                files.open(OTHERS, OTHERS_HEADER).writerows(others)
            progress.at((until_us - span.from_us) / length_us)
    finally:
        progress.end()
    return rows


class _Files:
    """Files that take their names when all of them are written, in place of older ones."""

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        self._stack = ExitStack()
        self._writers: dict[str, Any] = {}

    def open(self, name: str, header: Row) -> Any:
        """The CSV writer of a file, which is begun with its header."""
        if name not in self._writers:
            path = self._folder / f"{name}.part"
            file = self._stack.enter_context(path.open("w", encoding="utf-8", newline=""))
            self._writers[name] = csv.writer(file)
            self._writers[name].writerow(header)
        return self._writers[name]

    def write(self, name: str, header: Row, rows: Iterable[Row]) -> None:
        """Write a file."""
        self.open(name, header).writerows(rows)

    def __enter__(self) -> _Files:
        return self

    def __exit__(self, kind: object, *_: object) -> None:
        self._stack.close()
        for name in self._writers:
            part = self._folder / f"{name}.part"
            if kind is None:
                os.replace(part, self._folder / name)
            else:
                part.unlink(missing_ok=True)
        if kind is None and OTHERS not in self._writers:  # an older one is of another export
            (self._folder / OTHERS).unlink(missing_ok=True)


def _channels(site: Site, asked: Sequence[str]) -> tuple[str, ...]:
    for name in asked:
        if name not in site.channels:
            known = ", ".join(site.channels) or "none: the site file has no sensors"
            raise ExportError(f'--channel "{name}": there is no such channel (known: {known})')
    return tuple(dict.fromkeys(asked))


def _span(site: Site, reader: StoreReader, begin: str | None, end: str | None) -> Span:
    first_us, last_us = reader.first_tick_us, reader.last_tick_us
    if first_us is None or last_us is None:
        raise ExportError("the database holds no readings yet: let the daemon run first")
    from_us = first_us - reader.reach_us if begin is None else _time_us(site, "--from", begin)
    to_us = last_us + 1 if end is None else min(_time_us(site, "--to", end), last_us + 1)
    if from_us >= to_us or to_us <= first_us - reader.reach_us:
        raise ExportError(
            f"no readings from {format_rfc3339(from_us)} to {end or format_rfc3339(to_us)}: the "
            f"database has those of {format_rfc3339(first_us)} to {format_rfc3339(last_us)}"
        )
    return Span(from_us, to_us, begin is not None)


def _time_us(site: Site, option: str, text: str) -> int:
    """RFC 3339 with an offset, or a date, which begins at midnight in the shop's zone."""
    try:
        if _DATE.match(text):
            midnight = datetime.fromisoformat(text).replace(tzinfo=ZoneInfo(site.timezone))
            return round(midnight.timestamp() * 1e6)
        return parse_rfc3339(text)
    except ValueError as error:
        raise ExportError(
            f'{option} "{text}": {error}; write a date like 2026-03-02, which begins at midnight '
            f"in {site.timezone}, or a time like 2026-03-02T07:10:00Z"
        ) from None


def _reach(counts: Counts) -> str:
    if counts.first_us is None or counts.last_us is None:
        return "no readings in that span"
    return f"{format_rfc3339(counts.first_us)} to {format_rfc3339(counts.last_us)}"


def _lines(site: Site, done: Exported, folder: Path) -> Iterator[str]:
    counts = done.readings
    yield f"{site.name}: {_reach(counts)}, written to {folder}/; times are UTC"
    yield f"  readings.csv     {counts.readings} readings, each with its unit"
    if counts.faults:
        yield f"  faults.csv       {counts.faults} readings that were not believed, and why"
    yield f"  drains.csv       {done.drains} drains, ml"
    yield f"  transitions.csv  {done.transitions} changes of alarms"
    yield f"  journal.csv      {done.entries} entries of the journal, all that people reported"
    if counts.others:
        yield (
            f"  {OTHERS}  {counts.others} readings, in SI, of channels that the site file does "
            "not have any more: a replay cannot take them"
        )
    for why, number in done.drains_left_out.items():
        yield f"drains that stand in journal.csv alone: {number}, {why}"
    faults = f" --faults {folder / 'faults.csv'}" if counts.faults else ""
    yield (
        f"dripleg replay {site.path} {folder / 'readings.csv'} --drains {folder / 'drains.csv'}"
        f"{faults} --out FOLDER reads them"
    )
