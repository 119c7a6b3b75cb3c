"""`dripleg replay` from files to files."""

from __future__ import annotations

import argparse
from dataclasses import replace
from pathlib import Path

from daemon.advance import Core
from daemon.clock import format_rfc3339
from daemon.csv_rows import BadRow
from daemon.due import interval_words
from daemon.errors import ReplayError
from daemon.journal import Entry
from daemon.moisture.ensemble import percentiles
from daemon.recorded import read_drains, read_readings
from daemon.recorded_faults import read_faults
from daemon.replay import Result, replay, write
from daemon.site.reader import read_site
from daemon.site.types import Site

FEWEST_MEMBERS, MOST_MEMBERS = 2, 100_000


def replay_files(options: argparse.Namespace) -> str:
    """Run a replay; what to say about it."""
    site = _site(options)
    recorded = read_readings(site, options.readings, options.skip_bad)
    readings = recorded.readings
    bad = list(recorded.bad)
    if options.faults is not None:
        faults, bad_faults = read_faults(site, options.faults, options.skip_bad)
        readings = sorted([*readings, *faults], key=lambda one: one.time_us)
        bad += bad_faults
    entries: list[Entry] = []
    if options.drains is not None:
        first_us = readings[0].time_us
        entries, bad_drains = read_drains(site, options.drains, first_us, options.skip_bad)
        bad += bad_drains
    core = Core(site)
    result = replay(core, readings, entries)
    write(core, result, entries, options.out)
    return _report(core, result, bad, options.out)


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
