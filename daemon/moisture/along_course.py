"""What was heard at each of several ticks, for the model."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from daemon.moisture.ensemble import Array

Ints = npt.NDArray[np.int64]
Bools = npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Course:
    """What was heard at each of several ticks. Arrays are (ticks,)."""

    times_us: Ints
    values: Mapping[str, Array]  # by the line's channels: the last good value by each tick
    told_us: Mapping[str, Ints]  # and when that was
    silent: Mapping[str, bool]  # all along; a channel that never spoke is none of the three
    is_open: Bools
    on_us: Ints  # how long the contact was closed in each tick
    unknown_us: Ints  # and how long nobody knows
    booked_us: Ints  # what the gauge tells afterwards

    def rows(self, first: int, last: int) -> Course:
        """The ticks from `first` on, before `last`."""
        part = slice(first, last)
        return Course(
            self.times_us[part],
            {name: values[part] for name, values in self.values.items()},
            {name: times[part] for name, times in self.told_us.items()},
            self.silent,
            self.is_open[part],
            self.on_us[part],
            self.unknown_us[part],
            self.booked_us[part],
        )
