"""Virtual shops: what their site files say, what is so in them, and a week of their work."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from daemon.site.types import Site
from tests.virtual import week
from tests.virtual.physics import Kind, simulate
from tests.virtual.rigs import OFTEN, RIGS, TRAPS, Rig, certain, site_of
from tests.virtual.truth import Array, Truth, draw_truth
from tests.virtual.week import Round, Weather

CUP_LOW = 0.12  # of a cup that breaks what `[cup]` says by default


@dataclass(frozen=True, slots=True)
class Trial:
    """How virtual shops are tried."""

    days: int = 5
    kind: Kind = "plain"
    measured: float = week.MEASURED_ODDS  # share of drains whose volume is measured
    every_s: int = 60  # sampling period; a real shop's is 10 s, which takes six times as long
    quiet_after_s: float = math.inf  # no drain is opened after this time
    certain: bool = False  # nothing is unknown: every width is 0


@dataclass(frozen=True, slots=True)
class Shop:
    """One shop: what its file says, what is so, and what happened. Times are steps'."""

    number: int
    rig: Rig
    trial: Trial
    site: Site
    truth: Truth
    times_s: Array
    weather: Weather
    tank_k: Array  # (times,)
    riser_k: Array
    tank_pa: Array  # absolute
    running: Array  # (times - 1,): 1 while the compressor ran
    rounds: Sequence[Round]
    held_kg: Sequence[float]  # in the trap when each round's drain was opened
    contents_kg: Array  # (times, traps), before a drain at that time
    missing: float  # of all water, what the simulation lost or made
    random: np.random.Generator  # for noise and cups


def build(numbers: Sequence[int], trial: Trial) -> list[Shop]:
    """Simulate these shops."""
    times = week.step_times(trial.days)
    randoms = [np.random.default_rng([7, number]) for number in numbers]
    rigs = [RIGS[int(random.choice(len(RIGS), p=OFTEN))] for random in randoms]
    sites = [
        site_of(rig, random, number, trial.every_s)
        for rig, random, number in zip(rigs, randoms, numbers, strict=True)
    ]
    if trial.certain:
        sites = [certain(site) for site in sites]
    truths = [draw_truth(site, random) for site, random in zip(sites, randoms, strict=True)]
    if trial.kind == "cup":
        truths = [replace(truth, cup_low=CUP_LOW) for truth in truths]
    skies = [week.weather(random, times) for random in randoms]
    wants = np.array(
        [
            week.demand(random, times, site.line.compressor.delivered.value)
            for random, site in zip(randoms, sites, strict=True)
        ]
    )
    plans = [
        [
            each
            for each in week.rounds(random, trial.days, trial.measured)
            if each.at_s <= trial.quiet_after_s
        ]
        for random in randoms
    ]
    seen = simulate(truths, trial.kind, times, skies, wants, plans)
    return [
        Shop(
            number,
            rigs[n],
            trial,
            sites[n],
            truths[n],
            times,
            skies[n],
            tank_k=seen["tank_k"][:, n],
            riser_k=seen["riser_k"][:, n],
            tank_pa=seen["tank_pa"][:, n],
            running=seen["running"][:, n],
            rounds=plans[n],
            held_kg=[_held(seen["contents"], times, each, n) for each in plans[n]],
            contents_kg=seen["contents"][:, :, n],
            missing=float(seen["missing"][n]),
            random=randoms[n],
        )
        for n, number in enumerate(numbers)
    ]


def _held(contents: Array, times: Array, each: Round, shop: int) -> float:
    step = int(np.searchsorted(times, each.at_s))
    return float(contents[step, TRAPS.index(each.trap), shop])
