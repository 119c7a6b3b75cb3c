"""A receiver's vapor and pool at several ticks: what hangs on the tick before.

Arrays are (ticks, members) unless said.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from daemon.moisture.along_drains import DrainAlong
from daemon.moisture.ensemble import Array


@dataclass(frozen=True, slots=True)
class Pool:
    """What lies in a receiver, and what comes to it besides what condenses."""

    start: Array  # (members,): what its trap holds before
    capacity: Array  # (members,)
    kept: Array  # (members,): the share of liquid that its trap keeps
    besides: Array | None  # liquid that came and may not evaporate; None: none
    spilt: Array | None  # what the trap keeps of what ran over before it; None: none
    drain: DrainAlong | None


@dataclass(frozen=True, slots=True)
class Ordered:
    """A receiver that was taken tick by tick."""

    held: Array  # vapor after condensing, and with what the pool gave back
    liquid: Array  # what condensed and came
    back: Array  # what the pool gave back
    trap: Array  # after each tick
    over: Array  # what ran over


@dataclass(slots=True)
class Receiver:
    """A receiver's vapor over several ticks."""

    comes: Array  # vapor, and liquid that may evaporate
    possible: Array  # all that its air can hold
    goes: Array  # the share of its air that leaves
    pool: Array  # (members,): what its pool gives to perfectly dry air in a tick
    start: Array  # (members,): its vapor before
    came: Array = field(init=False)  # vapor and what came to it, before any condensed

    def mix(self) -> Array:
        """Its vapor after condensing, before the pool, if the pool never runs empty."""
        stays = 1.0 - self.goes
        factor = stays * (1.0 - self.pool / self.possible)
        stays *= self.pool
        stays[:-1] += self.comes[1:]
        came = np.empty((len(factor) + 1, factor.shape[1]))
        np.add(self.start, self.comes[0], out=came[0])
        rows, kept = list(came), np.empty_like(self.start)
        minimum, multiply, add = np.minimum, np.multiply, np.add
        each = zip(rows, rows[1:], *map(list, (self.possible, factor, stays)), strict=False)
        for there, then, possible, share, more in each:
            minimum(there, possible, out=kept)
            multiply(kept, share, kept)
            add(kept, more, then)
        self.came = came[:-1]
        held: Array = np.minimum(self.came, self.possible)
        return held

    def in_order(self, pool: Pool) -> Ordered:
        """All of it where the pool may run empty, or a drain empties it."""
        comes, possible, gives = self.comes, self.possible, self.pool
        stays, small = 1.0 - self.goes, bool((gives > possible).any())
        besides = np.zeros_like(comes) if pool.besides is None else pool.besides
        found = Ordered(*(np.empty_like(comes) for _ in range(5)))
        vapor, in_trap = self.start.copy(), pool.start
        came, in_trap_now = np.empty_like(vapor), np.empty_like(vapor)
        given = zip(*map(list, (comes, besides, possible, stays)), strict=True)
        parts = found.held, found.liquid, found.back, found.trap, found.over
        made = zip(*map(list, parts), strict=True)
        add, subtract, multiply = np.add, np.subtract, np.multiply
        least, most = np.minimum, np.maximum
        for n, (now, made_now) in enumerate(zip(given, made, strict=True)):
            comes_now, besides_now, possible_now, stays_now = now
            held, liquid, back, trap, over = made_now
            add(vapor, comes_now, came)
            least(came, possible_now, out=held)
            subtract(came, held, liquid)
            add(liquid, besides_now, liquid)
            np.divide(held, possible_now, back)
            subtract(1.0, back, back)
            multiply(gives, back, back)
            least(back, in_trap, out=back)
            if small:
                least(back, possible_now - held, out=back)
                most(back, 0.0, out=back)
            add(held, back, held)
            multiply(held, stays_now, vapor)
            multiply(pool.kept, liquid, trap)
            if pool.spilt is not None:
                add(trap, pool.spilt[n], trap)
            subtract(in_trap, back, in_trap_now)
            add(trap, in_trap_now, trap)
            if pool.drain is not None:
                trap[:] = pool.drain.left(n, trap)
            subtract(trap, pool.capacity, over)
            most(over, 0.0, out=over)
            subtract(trap, over, trap)
            in_trap = trap
        return found


def filled(start: Array, net: Array, capacity: Array) -> tuple[Array, Array]:
    """What a trap holds after each tick, and what ran over in it, where it gains and loses."""
    holds, over = np.empty_like(net), np.empty_like(net)
    before, add, subtract, most = start, np.add, np.subtract, np.maximum
    for gains, after, runs_over in zip(*map(list, (net, holds, over)), strict=True):
        add(before, gains, after)
        subtract(after, capacity, runs_over)
        most(runs_over, 0.0, out=runs_over)
        subtract(after, runs_over, after)
        before = after
    return holds, over
