"""In which of several ticks something happens that tells of the plant.

The guards of `ByProducts.tick`, over columns: where they say nothing, that gives back the plant
as it was.
"""

from __future__ import annotations

from collections.abc import Sequence

from daemon.clock import HOUR_US
from daemon.moisture.along import Stretch
from daemon.moisture.byproducts import FLOOR_GAUGE_PA, SETTLES_US, ByProducts
from daemon.moisture.plant import Phase, Plant
from daemon.ticks_along import Ticks


class PlantAlong:
    """What `ByProducts` looks at in the ticks of one stretch."""

    def __init__(
        self, byproducts: ByProducts, ticks: Ticks, found: Stretch, first: int, count: int
    ) -> None:
        self._contact = byproducts.contact is not None
        self._gauge = byproducts.gauge
        self._times_us: list[int] = found.course.times_us[:count].tolist()
        self._before = found.before
        self.is_open: list[bool] = found.course.is_open[:count].tolist()
        self._closed_at_all = not all(self.is_open)
        self.on_s: list[float] = found.on_s[:count, 0].tolist()
        if not self._closed_at_all:
            return
        last = first + count
        self._unknown_us = ticks.unknown_us(first, last)
        self._closed = ticks.closed(first, last)
        self._running: Sequence[bool] = self._closed
        if not self._contact:
            self._running = ticks.pumping(first, last)
        if self._gauge is not None:
            self._measured = self._gauge.row in found.conditions.measured
            values = found.course.values.get(self._gauge.channel)
            self._low = [] if values is None else (values[:count] < FLOOR_GAUGE_PA).tolist()

    def next(self, plant: Plant, row: int) -> int:
        """The first tick from `row` on in which something may happen; the end where none does."""
        ticks = len(self._times_us)
        if plant.closed_us < 0 and not self._closed_at_all:
            return ticks
        while row < ticks and not self._happens(plant, row):
            row += 1
        return row

    def _happens(self, plant: Plant, row: int) -> bool:
        if self.is_open[row]:
            return plant.closed_us >= 0
        if plant.closed_us < 0:
            return True
        if self._gauge is None:
            return self._contact and self._contact_tells(plant, row)
        if not self._measured or (self._contact and self._unknown_us[row] >= 0):
            return plant.phase is not None
        if plant.phase is None:
            return self._running[row] or not self._low[row]
        return self._ends(plant.phase, row)

    def _ends(self, phase: Phase, row: int) -> bool:
        """Whether a stretch of the compressor ends, or is to be noted."""
        if self._running[row] != phase.running:
            return True
        if phase.running:
            return False
        if self.on_s[row] > 0.0 or self._low[row]:
            return True
        if phase.settled is None:
            return self._times_us[row] - phase.first.time_us >= SETTLES_US
        before_us = self._times_us[row - 1] if row else self._before.time_us
        return self._times_us[row] // HOUR_US != before_us // HOUR_US

    def _contact_tells(self, plant: Plant, row: int) -> bool:
        if self._unknown_us[row] >= 0:
            return plant.turn_us >= 0
        was = self._closed[row - 1] if row else bool(self._before.contact.closed)
        started = self._closed[row] and not was
        return started or (plant.turn_us >= 0 and self.on_s[row] > 0.0)
