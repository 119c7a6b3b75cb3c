"""`dripleg replay` from files to files."""

from __future__ import annotations

import argparse
import sys
from dataclasses import replace
from pathlib import Path

from daemon.advance import Core
from daemon.clock import SystemClock, format_rfc3339
from daemon.csv_rows import BadRow
from daemon.due import interval_words
from daemon.errors import ReplayError
from daemon.journal import Entry
from daemon.moisture.ensemble import percentiles
from daemon.progress import Progress
from daemon.recorded import read_drains, read_readings
from daemon.recorded_arrays import read_record
from daemon.recorded_faults import read_faults
from daemon.replay import Result, replay, write
from daemon.replay_along import replay_in_blocks
from daemon.site.reader import read_site
from daemon.site.types import Site
from sensors.reading import Reading

FEWEST_MEMBERS, MOST_MEMBERS = 2, 100_000


def replay_files(options: argparse.Namespace) -> str:
    """Run a replay; what to say about it."""
    site = _site(options)
    core = Core(site, hourly=False)
    run = _in_blocks if options.blocks else _tick_by_tick
    result, entries, bad = run(core, options)
    write(core, result, entries, options.out)
    return _report(core, result, bad, options.out)


Run = tuple[Result, list[Entry], list[BadRow]]


def _tick_by_tick(core: Core, options: argparse.Namespace) -> Run:
    reading = Progress(sys.stderr, SystemClock(), "reading")
    recorded = read_readings(core.site, options.readings, options.skip_bad, reading.at)
    reading.end()
    faults, bad_faults = _faults(core.site, options)
    readings = sorted([*recorded.readings, *faults], key=lambda one: one.time_us)
    entries, bad_drains = _drains(core.site, options, readings[0].time_us)
    progress = _Progress("replaying", readings[0].time_us, readings[-1].time_us)
    result = replay(core, readings, entries, progress.reached)
    progress.end()
    return result, entries, [*recorded.bad, *bad_faults, *bad_drains]


def _in_blocks(core: Core, options: argparse.Namespace) -> Run:
    reading = Progress(sys.stderr, SystemClock(), "reading")
    record, bad = read_record(core.site, options.readings, options.skip_bad, reading.at)
    reading.end()
    faults, bad_faults = _faults(core.site, options)
    record = replace(record, faults=faults)
    entries, bad_drains = _drains(core.site, options, record.first_us)
    progress = _Progress("replaying", record.first_us, record.last_us)
    result = replay_in_blocks(core, record, entries, progress.reached)
    progress.end()
    return result, entries, [*bad, *bad_faults, *bad_drains]


def _faults(site: Site, options: argparse.Namespace) -> tuple[list[Reading], list[BadRow]]:
    if options.faults is None:
        return [], []
    return read_faults(site, options.faults, options.skip_bad)


def _drains(
    site: Site, options: argparse.Namespace, first_us: int
) -> tuple[list[Entry], list[BadRow]]:
    if options.drains is None:
        return [], []
    return read_drains(site, options.drains, first_us, options.skip_bad)


class _Progress:
    """How far a replay is between the first reading and the last, on a terminal only."""

    def __init__(self, what: str, from_us: int, until_us: int) -> None:
        self._line = Progress(sys.stderr, SystemClock(), what)
        self._from_us, self._length_us = from_us, max(until_us - from_us, 1)

    def reached(self, now_us: int) -> None:
        """This time was reached."""
        self._line.at((now_us - self._from_us) / self._length_us)

    def end(self) -> None:
        """It is done."""
        self._line.end()


def _site(options: argparse.Namespace) -> Site:
    site = read_site(options.site)
    members, seed = options.members, options.seed
    if members is not None:
        if not FEWEST_MEMBERS <= members <= MOST_MEMBERS:
            raise ReplayError(
                f"--members {members}: give a whole number from {FEWEST_MEMBERS} to {MOST_MEMBERS}"
            )
        site = replace(site, line=replace(site.line, members=members))
    if seed is not None:
        if not 0 <= seed < 2**63:
            raise ReplayError(f"--seed {seed}: give a whole number, 0 or more")
        site = replace(site, line=replace(site.line, seed=seed))
    return site


def _report(core: Core, result: Result, bad: list[BadRow], folder: Path) -> str:
    lines = [
        f"{core.site.name}: {format_rfc3339(result.begun_us)} to "
        f"{format_rfc3339(result.state.time_us)}, {result.ticks} ticks",
    ]
    plan, water = core.model.plan, result.state.model.water
    for row in plan.traps:
        low, middle, high = (float(value) for value in percentiles(water.trap[row]))
        holds = interval_words(core.site, low, middle, high)
        lines.append(f"  {plan.stations[row].id:<20} holds {holds}")
    if bad:
        lines.append(f"{len(bad)} bad rows left out:")
        lines += [f"  {row}" for row in bad]
    lines.append(
        f"written to {folder}/: traps.csv, outlets.csv, flow.csv, transitions.csv, summary.json"
    )
    return "\n".join(lines)
