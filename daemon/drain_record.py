"""What is remembered of drains and of the pressure in tanks. Plain records."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field


@dataclass(frozen=True, slots=True)
class DrainRecord:
    """A drain that empties itself: when it was last known to work."""

    seen_us: int  # last seen working; the beginning of the record counts
    passed_kg: float = 0.0  # what it had passed by then, the members' median
    found_us: int = -1  # when more was found in its trap than a working drain leaves
    found_kg: float = 0.0


@dataclass(frozen=True, slots=True)
class Fall:
    """A tank's pressure that fell faster than use explains."""

    at_us: int
    drop_pa: float
    seconds: float


@dataclass(frozen=True, slots=True)
class Leak:
    """The line's leak while nobody works, as it was last measured and as it was before."""

    measured_us: int = -1  # when the last one was taken in; -1: none yet
    figure_kg_per_s: float = 0.0  # the plant's running figure then
    last_kg_per_s: float = 0.0
    before_kg_per_s: float = -1.0  # -1: there was none
    blows: bool = False  # the last one is so much more that a drain must stand open


@dataclass(frozen=True, slots=True)
class DrainsWatched:
    """What is carried from tick to tick."""

    drains: Mapping[str, DrainRecord] = field(default_factory=dict)  # by trap
    gauges: Mapping[str, tuple[tuple[int, float], ...]] = field(default_factory=dict)  # by tank
    falls: Mapping[str, Fall] = field(default_factory=dict)  # by tank: the last one
    leak: Leak = field(default_factory=Leak)
