"""What some stations do besides cooling and catching, for one step of the water.

Made anew for each step; the step fills in what happened.
"""

from __future__ import annotations

from dataclasses import dataclass, field

from daemon.moisture.drains import Opening
from daemon.moisture.ensemble import Array
from daemon.moisture.power import Mask


@dataclass(slots=True)
class Bed:
    """A desiccant in one step. Arrays are (members,)."""

    ratio: Array  # humidity ratio that it dries air to
    works: Mask  # where it does not, it is a pipe
    takes: Array  # of the water that comes, the share that it can take up at that flow
    room: Array  # kg that it can still take up
    taken: Array | None = None  # kg, set by the step


@dataclass(slots=True)
class Fitted:
    """The stations that dry by desiccant, that drain themselves, and whose heat counts."""

    beds: dict[int, Bed] = field(default_factory=dict)
    drains: dict[int, Opening] = field(default_factory=dict)
    coils: frozenset[int] = frozenset()
    condensed: dict[int, Array] = field(default_factory=dict)  # kg at each coil, set by the step
