"""`python -m tests.virtual`: virtual shops by the hundred, in several processes; figures out."""

from __future__ import annotations

import argparse
import pickle
from concurrent.futures import ProcessPoolExecutor
from functools import partial
from pathlib import Path

from tests.virtual.physics import KINDS
from tests.virtual.runner import Run, run_all
from tests.virtual.score import table
from tests.virtual.shops import Trial

CHUNK = 10  # shops simulated together


def runs_of(shops: int, trial: Trial, jobs: int) -> list[Run]:
    """All runs, in the order of the shops."""
    chunks = [range(n, min(n + CHUNK, shops)) for n in range(0, shops, CHUNK)]
    work = partial(run_all, trial=trial)
    if jobs == 1:
        return [run for chunk in chunks for run in work(chunk)]
    with ProcessPoolExecutor(jobs) as pool:
        return [run for found in pool.map(work, chunks) for run in found]


def main() -> None:
    """Read the command line, run, print."""
    usual = Trial()
    parser = argparse.ArgumentParser(prog="python -m tests.virtual", description=__doc__)
    parser.add_argument("--shops", type=int, default=300)
    parser.add_argument("--days", type=int, default=usual.days)
    parser.add_argument("--kind", choices=KINDS, default=usual.kind)
    parser.add_argument("--jobs", type=int, default=2)
    parser.add_argument("--measured", type=float, default=usual.measured, help="share of drains")
    parser.add_argument("--every", type=int, default=usual.every_s, help="sampling period, s")
    parser.add_argument("--split", action="store_true", help="also by trap and by rig")
    parser.add_argument("--keep", type=Path, help="file to keep what was said in, pickled")
    told = parser.parse_args()
    trial = Trial(told.days, told.kind, told.measured, told.every)
    runs = runs_of(told.shops, trial, told.jobs)
    if told.keep is not None:
        told.keep.write_bytes(pickle.dumps(runs))
    print(f"{told.shops} shops, {told.days} days, {told.kind}")
    print(table(runs, told.split))


if __name__ == "__main__":
    main()
