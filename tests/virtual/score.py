"""Figures over many virtual shops: how often an interval held the truth, how far a median was off.

A relative error means nothing for a few drops: only traps with at least 20 ml count for it, four
times what a cup is off by each time. Coverage leaves out traps of which nothing at all was said or
so (less than 2 ml on all sides): an interval cannot miss there.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from tests.virtual.runner import Run, Seen

NOTHING_KG, WORTH_A_RATIO_KG = 0.002, 0.020


@dataclass(frozen=True, slots=True)
class Score:
    """Of some drains: coverage, its standard error over shops, median relative error."""

    drains: int
    shops: int
    coverage: float
    standard_error: float  # of the coverage: shops are independent, a shop's drains are not
    error: float  # median of |said - so| / so
    below: float  # share of truths below the interval
    above: float
    width: float  # median of (high - low) / middle
    ranks: float  # mean of (2 u - 1)^2, u the truth's place among the members: 1/3 when honest


def score(seen: Iterable[Seen]) -> Score:
    """The figures of these drains."""
    chosen = [each for each in seen if max(each.true_kg, each.said.high) >= NOTHING_KG]
    if not chosen:
        return Score(0, 0, *[math.nan] * 7)
    held = np.array([each.said.holds(each.true_kg) for each in chosen], dtype=float)
    shops = np.array([each.shop for each in chosen])
    worth = [each for each in chosen if each.true_kg >= WORTH_A_RATIO_KG]
    errors = [abs(each.said.middle - each.true_kg) / each.true_kg for each in worth]
    widths = [(e.said.high - e.said.low) / max(e.said.middle, 1e-9) for e in worth]
    below = np.mean([each.true_kg < each.said.low - 1e-4 for each in chosen])
    return Score(
        drains=len(chosen),
        shops=len(set(shops.tolist())),
        coverage=float(held.mean()),
        standard_error=clustered_error(held, shops),
        error=float(np.median(errors)) if errors else math.nan,
        below=float(below),
        above=float(1.0 - held.mean() - below),
        width=float(np.median(widths)) if widths else math.nan,
        ranks=float(np.mean([(2.0 * each.said.below - 1.0) ** 2 for each in chosen])),
    )


def clustered_error(held: np.ndarray, shops: np.ndarray) -> float:
    """Standard error of a mean whose values belong together within a shop.

    The cluster-robust one: the shops' sums of deviations, squared (Liang, Zeger, "Longitudinal
    data analysis using generalized linear models", Biometrika 73, 1986).
    """
    off = held - held.mean()
    sums = np.array([off[shops == shop].sum() for shop in np.unique(shops)])
    count = sums.size
    if count < 2:
        return math.nan
    return float(np.sqrt((sums**2).sum() * count / (count - 1)) / held.size)


def least_share(share: float, count: int, together: float = 2.0, risk: float = 1e-3) -> float:
    """The least share of successes that chance allows when each has this probability.

    Binomial, of `count / together` independent trials: drains of one shop belong together
    (measured on 120 shops: variances are 1.6 times a binomial's). Less has a chance below `risk`.
    """
    trials = max(1, int(count / together))
    chance = 0.0
    for successes in range(trials + 1):
        chance += (
            math.comb(trials, successes) * share**successes * (1 - share) ** (trials - successes)
        )
        if chance > risk:
            return successes / trials
    return 1.0


def most_ranks(count: int, together: float = 2.0) -> float:
    """The most that chance allows for `Score.ranks`, once in a thousand.

    When normals are believed 1.14 times too narrow, so that 5-95 % holds but 0.85, (2 u - 1)^2 has
    the mean 0.383 and the standard deviation 0.321; 3.1 standard errors for `count / together`.
    """
    return 0.383 + 3.1 * 0.321 / math.sqrt(count / together)


Choice = Callable[[Run], Sequence[Seen]]


def untaught(run: Run) -> Sequence[Seen]:
    """Every trap before anything was measured."""
    return run.untaught


def after(least: int, most: int) -> Choice:
    """Drains of traps that had been measured so many times."""
    return lambda run: [each for each in run.drains if least <= each.round <= most]


ROWS: tuple[tuple[str, Choice], ...] = (
    ("before learning", untaught),
    ("trap not yet measured", after(0, 0)),
    ("after one measured drain", after(1, 1)),
    ("after two", after(2, 2)),
    ("after three and more", after(3, 999)),
    ("all after learning", after(1, 999)),
)


def table(runs: Sequence[Run], split: bool = False) -> str:
    """The figures as text, a row per stage of learning."""
    lines = [f"{'':38}  drains shops  held   +-   below  above  error  width"]
    for name, choice in ROWS:
        seen = [each for run in runs for each in choice(run)]
        lines.append(_row(name, score(seen)))
        if not split:
            continue
        for trap in dict.fromkeys(each.trap for each in seen):
            lines.append(_row(f"  {trap}", score(e for e in seen if e.trap == trap)))
        for rig in dict.fromkeys(each.rig for each in seen):
            lines.append(_row(f"  {rig}", score(e for e in seen if e.rig == rig)))
    flagged = sum(each.flagged for run in runs for each in run.drains)
    lines.append(f"flagged as surprising: {flagged}")
    lines.append(f"narrowest belief of all: {min(run.least_spread for run in runs):.3f} of 1")
    return "\n".join(lines)


def _row(name: str, found: Score) -> str:
    return (
        f"{name:38}  {found.drains:6d} {found.shops:5d}  {found.coverage:5.3f} "
        f"{found.standard_error:5.3f}  {found.below:5.3f}  {found.above:5.3f}  {found.error:5.3f}  "
        f"{found.width:5.2f}"
    )
