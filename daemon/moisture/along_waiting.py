"""Liquid that waits for air to take it along, at several ticks. Arrays are (ticks, members)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from daemon.moisture.along_course import Bools
from daemon.moisture.ensemble import Array


@dataclass(slots=True)
class Waiting:
    """Liquid that waits for air: what there is after each tick."""

    start: Array  # (members,)
    rows: Array | None = None  # None: `start` until air first moves, then nothing
    moving: Bools | None = None  # None: air moves at the first tick already

    def at(self, row: int) -> Array:
        """After one tick, (members,)."""
        if self.rows is not None:
            found: Array = self.rows[row]
            return found
        if self.moving is None:
            return np.zeros_like(self.start)
        still = ~self.moving[: row + 1].any(axis=0)
        return self.start * still

    def all(self, ticks: int) -> Array:
        """After every tick, (ticks, members)."""
        if self.rows is not None:
            return self.rows
        return np.array([self.at(row) for row in range(ticks)])


def released(
    start: Array, new: Array | None, moving: Bools | None, shape: tuple[int, ...], waits: bool
) -> tuple[Array | None, Waiting]:
    """Liquid that air takes along, of what waits and of what is new; and what then waits."""
    waits = waits and bool(start.any())
    if moving is None or new is None or not (new * ~moving).any():
        if not waits:
            return new, Waiting(start)
        out = np.zeros(shape) if new is None else new.copy()
        if moving is None:
            out[0] += start
            return out, Waiting(start)
        ever = np.flatnonzero(moving.any(axis=0))
        out[moving.argmax(axis=0)[ever], ever] += start[ever]
        return out, Waiting(start, None, moving)
    out, rows = np.empty(shape), np.empty(shape)
    before, add, multiply, subtract = start, np.add, np.multiply, np.subtract
    each = zip(*map(list, (new, moving.astype(np.float64), out, rows)), strict=True)
    for more, flows, goes, stays in each:
        add(before, more, stays)
        multiply(stays, flows, goes)
        subtract(stays, goes, stays)
        before = stays
    return out, Waiting(start, rows)
