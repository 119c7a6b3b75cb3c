"""Draws for the ensemble, and percentiles over its members.

Random numbers are counter-based (Philox 4x64, Salmon et al., "Parallel random numbers: as easy as
1, 2, 3", SC11, 2011), keyed by seed, name of the draw and time: the same draw gives the same bits
whenever and in whatever order it is asked for, so a replay of the same readings gives the same
answer. Within a draw the members are stratified (Latin hypercube; McKay, Beckman, Conover,
Technometrics 21, 1979): every member stands for an equal slice of the distribution, so that a
median over 128 members is not off by chance.
"""

from __future__ import annotations

from functools import lru_cache
from hashlib import blake2b
from statistics import NormalDist

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]

HALF_WIDTH_TO_SD = 0.5  # a give_or_take is k = 2
WIDEST_LOGIT_SD = 1.2  # beyond it a logit-normal piles up at its ends
PERCENTILES = (5.0, 50.0, 95.0)


@lru_cache(maxsize=8)
def _strata(members: int) -> Array:
    """Standard normal quantiles at the middles of `members` equal slices, ascending."""
    normal = NormalDist()
    return np.array([normal.inv_cdf((rank + 0.5) / members) for rank in range(members)])


def standard_normal(seed: int, name: str, members: int, when: int = 0) -> Array:
    """Standard normal values, shape (members,), for the draw `name` at counter `when`."""
    name_key = int.from_bytes(blake2b(name.encode(), digest_size=8).digest(), "little")
    key = np.array([seed & (2**64 - 1), name_key], dtype=np.uint64)
    # the first word counts up as bits are taken: times of their own must differ in another
    bits = np.random.Philox(key=key, counter=[0, when, 0, 0]).random_raw(members)
    order = np.argsort(bits, kind="stable")
    values = np.empty(members)
    values[order] = _strata(members)
    return values


def normal(base: Array, value: float, give_or_take: float) -> Array:
    """Values about `value` with a 95 % half-width, from standard normal `base`; same unit."""
    return value + base * (give_or_take * HALF_WIDTH_TO_SD)


def positive(base: Array, value: float, give_or_take: float) -> Array:
    """Values that cannot be negative: lognormal with median `value`, same relative width near it.

    Used for volumes and flows, where `value +- give_or_take` is small against the value and a
    normal would differ by less than the width's own uncertainty, but a wide one would cross zero.
    """
    if value <= 0.0:
        return np.full_like(base, max(value, 0.0))
    spread: Array = value * np.exp(base * (give_or_take * HALF_WIDTH_TO_SD / value))
    return spread


def share(base: Array, value: float, give_or_take: float) -> Array:
    """Values between 0 and 1, normal on the logit scale with median `value`.

    The standard deviation on that scale is give_or_take / 2 / (v (1 - v)), at most 1.2. A value of
    exactly 0 or 1 has no spread.
    """
    if value <= 0.0 or value >= 1.0:
        return np.full_like(base, min(max(value, 0.0), 1.0))
    sd = min(give_or_take * HALF_WIDTH_TO_SD / (value * (1.0 - value)), WIDEST_LOGIT_SD)
    middle = np.log(value / (1.0 - value))
    drawn: Array = 1.0 / (1.0 + np.exp(-(middle + base * sd)))
    return drawn


def spread(values: Array, members: int) -> Array:
    """What an ensemble held, for one of so many members: as it was, else spread alike."""
    if values.size == members:
        return values
    alike: Array = np.quantile(values, (np.arange(members) + 0.5) / members)
    return alike


def percentiles(values: Array) -> Array:
    """5, 50 and 95 % over the last axis (numpy's linear percentiles), shape (3, ...).

    NaN where any value is. As `np.percentile` to the bit, at a third of its time.
    """
    ordered = np.sort(values, axis=-1)
    last = ordered.shape[-1] - 1
    result = np.empty((len(PERCENTILES), *ordered.shape[:-1]))
    for row, percent in enumerate(PERCENTILES):
        place = percent / 100.0 * last
        whole = int(place)
        part, low, high = place - whole, ordered[..., whole], ordered[..., min(whole + 1, last)]
        step = high - low
        # from the nearer end, so that the way there never overshoots
        result[row] = low + step * part if part < 0.5 else high - step * (1.0 - part)
    result[..., np.isnan(ordered[..., -1])] = np.nan
    return result
