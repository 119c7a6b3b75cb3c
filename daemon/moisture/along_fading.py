"""Values that go a share of the way to another one at every tick, over several ticks."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from daemon.moisture.ensemble import Array


@dataclass(frozen=True, slots=True)
class Fading:
    """x += (wanted - x) weight, tick by tick."""

    start: Array  # (members,): before the first tick
    wanted: Array  # (ticks, members)
    weights: Array  # (ticks,)

    def at(self, row: int) -> Array:
        """After one tick, (members,)."""
        weights = self.weights[: row + 1]
        # of what was before each tick, and before all: what is left after the last
        left = np.cumprod(1.0 - weights[::-1])[::-1]
        shares = weights * np.append(left[1:], 1.0)
        found: Array = self.start * left[0] + shares @ self.wanted[: row + 1]
        return found

    def rows(self) -> Array:
        """After every tick, (ticks, members)."""
        rows = np.empty_like(self.wanted)
        before = self.start
        for after, wanted, weight in zip(rows, self.wanted, self.weights.tolist(), strict=True):
            np.subtract(wanted, before, out=after)
            np.multiply(after, weight, out=after)
            np.add(after, before, out=after)
            before = after
        return rows

    @property
    def most(self) -> Array:
        """What it does not go beyond, (members,)."""
        highest: Array = np.maximum(self.start, self.wanted.max(axis=0))
        return highest
