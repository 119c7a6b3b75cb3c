"""Learning from a measured drain: a stochastic ensemble Kalman update of beliefs and contents.

Evensen, "Sequential data assimilation with a nonlinear quasi-geostrophic model using Monte Carlo
methods", J. Geophys. Res. 99 (1994); with perturbed observations after Burgers, van Leeuwen,
Evensen, Mon. Wea. Rev. 126 (1998). What is observed is `ln(volume + k)`: contents are products of
uncertain factors, and a cup's error is part of the volume and part of a few millilitres.

A plain filter grows too sure of itself. Against that:

- only figures of the station itself, those upstream of it and the common ones are touched, and a
  correlation is taken for what is left of it beyond chance (an adjusted r squared): else, with 128
  members, an unrelated figure would lose a little of its spread with every drain;
- every round between two drains has a small error of its own (`round of ...`), drawn anew;
- after each update part of the lost spread is given back (relaxation to the prior spread: Whitaker,
  Hamill, Mon. Wea. Rev. 140, 2012), every figure forgets a little, none falls below a floor;
- a volume more than five standard deviations off is kept, told to the person, and not learned from
  until it is confirmed, or until a second one on the same side: spreads are widened first then.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from statistics import NormalDist

import numpy as np

from daemon.moisture import beliefs as believed
from daemon.moisture.beliefs import Beliefs
from daemon.moisture.ensemble import HALF_WIDTH_TO_SD, Array, percentiles, standard_normal
from daemon.moisture.plan import Plan

GIVEN_BACK = 0.15  # of the spread that an update took away
KEEPS = 0.997  # of a belief per round; the rest is forgotten
LEAST_SD = 0.12  # of any belief, in units of its prior's
SUSPECT_SIGMAS = 5.0
WIDENED_TO_SIGMAS = 2.0  # how far off a confirmed surprise may then still be
MOST_WIDENED = 3.0  # a spread is widened by no more: beyond it, the surprise is not the model's
FARTHEST = 4.0  # from the middle of its prior that any belief is taken, in standard deviations
LEAST_K_KG = 0.002
# Standard normal quantiles at the middles of sixteen equal slices.
_PLACES = np.array([NormalDist().inv_cdf((place + 0.5) / 16.0) for place in range(16)])


@dataclass(frozen=True, slots=True)
class CupError:
    """How a person's measurement of a volume may be off; half-widths are 95 %."""

    reads_low_by: float = 0.05
    give_or_take: float = 0.05  # persistent, fraction
    each_time: float = 0.05  # fraction
    each_time_kg: float = 0.005

    @property
    def k_kg(self) -> float:
        """What keeps the logarithm finite at an empty cup."""
        return max(self.each_time_kg, LEAST_K_KG)

    def sd_kg(self, volume_kg: float) -> float:
        """Standard deviation of one measurement."""
        return (self.each_time * volume_kg + self.each_time_kg) * HALF_WIDTH_TO_SD


@dataclass(frozen=True, slots=True)
class Suspect:
    """A measurement that was too far off to be learned from at once."""

    expected: Array  # (members,), what each member had expected, transformed
    measured: float  # transformed
    sd: float
    above: bool


@dataclass(frozen=True, slots=True)
class Learned:
    """What came of one measurement, for the records and for the person."""

    at_us: int
    trap: str
    measured_kg: float
    expected_kg: tuple[float, float, float]  # 5, 50, 95 % of what the cup should have shown
    sigmas: float
    flagged: bool  # kept, but not learned from
    cup_kg: tuple[float, float, float]  # the same with what a cup is off by each time
    widened: bool = False
    narrowed: float = 1.0  # what is unknown of the water to come, against before; below 1: tighter


@dataclass(frozen=True, slots=True)
class Update:
    """A gain's ingredients: what was expected, how far off each member was."""

    expected: Array  # (members,)
    miss: Array  # (members,): perturbed observation less expectation
    variance: float  # of the expectation, plus the observation's own

    def shift(self, values: Array) -> Array:
        """By how much these values move, (members,)."""
        moved: Array = _covariance(values, self.expected) / self.variance * self.miss
        return moved


def _covariance(values: Array, expected: Array) -> float:
    """Of two figures over the members, as far as their correlation is beyond chance."""
    count = values.size
    a = values - values.mean()
    b = expected - expected.mean()
    aa, bb, ab = float(a @ a), float(b @ b), float(a @ b)
    if aa <= 0.0 or bb <= 0.0:
        return 0.0
    r2 = ab * ab / (aa * bb)
    left = max(0.0, (r2 * (count - 1) - 1.0) / max(count - 2, 1))
    beyond_chance = left / r2 if r2 > 0.0 else 0.0
    return ab / (count - 1) * math.sqrt(beyond_chance)


def narrowed(expected: Array, names: Sequence[str], before: Beliefs, after: Beliefs) -> float:
    """The spread of what lasting beliefs make of a trap's water, after an update against before.

    Their part in the logarithm of a content is linear, by the members' own regression. A round's
    own error is drawn anew for the next, and the cup's is none of the water's: both are left out.
    """
    was, now = np.zeros_like(expected), np.zeros_like(expected)
    for name in names:
        variance = float(before[name].var(ddof=1))
        if name == believed.CUP or name.startswith("round of ") or variance <= 0.0:
            continue
        slope = _covariance(before[name], expected) / variance
        was += slope * (before[name] - before[name].mean())
        now += slope * (after[name] - after[name].mean())
    spread = float(was.std(ddof=1))
    return float(now.std(ddof=1)) / spread if spread > 0.0 else 1.0


def local_names(plan: Plan, station: int) -> list[str]:
    """The beliefs that a drain at this station can say something about."""
    found: list[str] = []
    at = station
    while at >= 0:
        found += believed.own_names(plan.stations[at])
        at = plan.parent[at]
    found = [name for name in found if not name.startswith("round of ")]
    found.append(believed.round_of(plan.stations[station].id))
    found += [believed.bias_of(channel) for channel in plan.line_channels]
    return [*found, believed.HUMIDITY, believed.DELIVERED, believed.POOL, believed.CUP]


def expectation(contents_kg: Array, beliefs: Beliefs, cup: CupError) -> Array:
    """What each member expects the cup to show, kg."""
    low = cup.reads_low_by + beliefs[believed.CUP] * (cup.give_or_take * HALF_WIDTH_TO_SD)
    shown: Array = contents_kg * (1.0 - low)
    return shown


def compare(
    contents_kg: Array, beliefs: Beliefs, cup: CupError, volume_kg: float
) -> tuple[Suspect, float]:
    """A measurement beside what was expected, transformed; and how many sigmas it is off."""
    k = cup.k_kg
    expected = np.log(expectation(contents_kg, beliefs, cup) + k)
    measured = math.log(volume_kg + k)
    sd = cup.sd_kg(volume_kg) / (volume_kg + k)
    spread = math.sqrt(float(expected.var(ddof=1)) + sd * sd)
    off = measured - float(expected.mean())
    return Suspect(expected, measured, sd, off > 0.0), abs(off) / spread


def prepare(seen: Suspect, seed: int, name: str, when_us: int, widen: bool) -> tuple[Update, float]:
    """The update for a measurement, and the factor that spreads are widened by first (>= 1)."""
    middle = float(seen.expected.mean())
    variance = float(seen.expected.var(ddof=1))
    factor = 1.0
    if widen and variance > 0.0:
        needed = abs(seen.measured - middle) / WIDENED_TO_SIGMAS
        factor = math.sqrt(max(needed * needed - seen.sd**2, 0.0) / variance)
        factor = min(max(factor, 1.0), MOST_WIDENED)
    expected = middle + factor * (seen.expected - middle)
    noise = standard_normal(seed, f"cup at {name}", seen.expected.size, when_us)
    miss = seen.measured + seen.sd * noise - expected
    return Update(expected, miss, factor * factor * variance + seen.sd**2), factor


def update_beliefs(
    beliefs: Beliefs,
    names: Sequence[str],
    update: Update,
    factor: float,
    seed: int,
    when_us: int,
) -> dict[str, Array]:
    """The beliefs after a measurement, kept from growing too sure."""
    after = dict(beliefs)
    for name in names:
        before = beliefs[name]
        wide = before.mean() + factor * (before - before.mean())
        moved = wide + update.shift(wide)
        stir = standard_normal(seed, f"forgetting {name}", before.size, when_us)
        after[name] = _kept_honest(moved, float(wide.std(ddof=1)), stir)
    return after


def _kept_honest(moved: Array, prior_sd: float, stir: Array) -> Array:
    """Give back part of the lost spread, forget a little, and keep to the floor."""
    sd = float(moved.std(ddof=1))
    middle = moved.mean()
    wanted = max(sd + GIVEN_BACK * max(prior_sd - sd, 0.0), LEAST_SD)
    if sd > 0.0:
        moved = middle + (moved - middle) * (wanted / sd)
    return within_reach(KEEPS * moved + math.sqrt(1.0 - KEEPS * KEEPS) * stir)


def within_reach(belief: Array) -> Array:
    """A belief no farther from its prior's middle than any is taken, and still with a spread."""
    kept: Array = np.clip(belief, -FARTHEST, FARTHEST)
    sd = float(belief.std(ddof=1))
    if kept.std(ddof=1) >= LEAST_SD or sd <= 0.0:
        return kept
    # the bound took the spread away, and all members at the bound would be certainty
    place = (belief - belief.mean()) * (LEAST_SD / sd)
    middle = math.copysign(FARTHEST - 3.0 * LEAST_SD, float(belief.mean()))
    spread: Array = np.clip(middle + place, -FARTHEST, FARTHEST)
    return spread


def update_contents(contents_kg: Array, update: Update, k_kg: float, most_kg: Array) -> Array:
    """Another trap's contents after a measurement, (members,), within 0 and its capacity."""
    logs = np.log(contents_kg + k_kg)
    moved = np.exp(logs + update.shift(logs)) - k_kg
    held: Array = np.clip(moved, 0.0, most_kg)
    return held


def told(
    at_us: int,
    trap: str,
    volume_kg: float,
    shown_kg: Array,
    sigmas: float,
    flagged: bool,
    cup: CupError,
) -> Learned:
    """The record of a measurement."""
    low, middle, high = (float(value) for value in percentiles(shown_kg))
    least, median, most = (float(value) for value in percentiles(_as_read(shown_kg, cup)))
    return Learned(
        at_us, trap, volume_kg, (low, middle, high), sigmas, flagged, (least, median, most)
    )


def _as_read(shown_kg: Array, cup: CupError) -> Array:
    """What the cup may be read as, (members * places,): each time it is off by another amount.

    Every member at as many equally likely places of that error.
    """
    sd = (cup.each_time * shown_kg + cup.each_time_kg) * HALF_WIDTH_TO_SD
    read = shown_kg[:, None] + sd[:, None] * _PLACES
    floored: Array = np.maximum(read, 0.0).ravel()
    return floored


def with_outcome(learned: Learned, factor: float, ratio: float) -> Learned:
    """The same, saying whether spreads were widened first, and how much narrower they are now."""
    return replace(learned, widened=factor > 1.0, narrowed=ratio)
