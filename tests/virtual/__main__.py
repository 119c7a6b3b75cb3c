"""`python -m tests.virtual`: virtual shops by the hundred, in several processes; figures out."""

from __future__ import annotations

import argparse
import pickle
from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor
from functools import partial
from pathlib import Path
from typing import TypeVar

from tests.virtual.foreseen import foresee_all, foreseen_table
from tests.virtual.physics import KINDS
from tests.virtual.runner import run_all
from tests.virtual.score import table
from tests.virtual.shops import Trial

T = TypeVar("T")
CHUNK = 10  # shops simulated together


def in_chunks(work: Callable[[range], list[T]], numbers: range, jobs: int) -> list[T]:
    """All that this work gives, in the order of the shops."""
    chunks = [numbers[n : n + CHUNK] for n in range(0, len(numbers), CHUNK)]
    if jobs == 1:
        return [each for chunk in chunks for each in work(chunk)]
    with ProcessPoolExecutor(jobs) as pool:
        return [each for found in pool.map(work, chunks) for each in found]


def main() -> None:
    """Read the command line, run, print."""
    usual = Trial()
    parser = argparse.ArgumentParser(prog="python -m tests.virtual", description=__doc__)
    parser.add_argument("--shops", type=int, default=300)
    parser.add_argument("--first", type=int, default=0, help="number of the first shop")
    parser.add_argument("--days", type=int, default=usual.days)
    parser.add_argument("--kind", choices=KINDS, default=usual.kind)
    parser.add_argument("--jobs", type=int, default=2)
    parser.add_argument("--measured", type=float, default=usual.measured, help="share of drains")
    parser.add_argument("--every", type=int, default=usual.every_s, help="sampling period, s")
    parser.add_argument("--forecast", action="store_true", help="score forecasts, not contents")
    parser.add_argument("--split", action="store_true", help="also by trap and by rig")
    parser.add_argument("--keep", type=Path, help="file to keep the runs in, pickled")
    parser.add_argument("--kept", type=Path, nargs="+", help="show the runs of such files instead")
    told = parser.parse_args()
    numbers = range(told.first, told.first + told.shops)
    trial = Trial(told.days, told.kind, told.measured, told.every)
    if told.forecast:
        print(f"{len(numbers)} shops, {told.kind}")
        print(foreseen_table(in_chunks(partial(foresee_all, trial=trial), numbers, told.jobs)))
        return
    if told.kept is not None:
        runs = [run for path in told.kept for run in pickle.loads(path.read_bytes())]
    else:
        runs = in_chunks(partial(run_all, trial=trial), numbers, told.jobs)
    if told.keep is not None:
        told.keep.write_bytes(pickle.dumps(runs))
    print(f"{len(runs)} shops, {', '.join(dict.fromkeys(run.kind for run in runs))}")
    print(table(runs, told.split))


if __name__ == "__main__":
    main()
