"""Whether a tank's pressure may have fallen fast in several ticks; what is remembered after."""

from __future__ import annotations

import numpy as np

from daemon.drain_watch import FALL_PA, FALL_WITHIN_US, DrainWatching
from daemon.judged_along import first
from daemon.moisture.conditions import LOWEST_PA
from daemon.moisture.description import Measured, Source
from daemon.moisture.drains import EMPTY_PA, LOW_PA
from daemon.moisture.model import Model
from daemon.ticks_along import Ticks

HIGHEST_BAROMETER_PA = 110_000.0
Gauges = dict[str, tuple[tuple[int, float], ...]]


def may_fall(watching: DrainWatching, ticks: Ticks) -> int:
    """The first tick that may be part of a fast fall; it may turn out to be none."""
    good = len(ticks.times_us)
    before = ticks.before.drains.gauges
    for tank, (channel, volume_m3) in watching.volumes.items():
        said = ticks.said[channel]
        if not len(said.values):
            continue
        recent = before.get(tank, ())
        times = np.concatenate((np.array([at for at, _ in recent], np.int64), said.times_us))
        values = np.concatenate((np.array([value for _, value in recent]), said.values))
        falls = np.zeros(len(values), bool)
        for back in range(1, len(values)):
            seconds = (times[back:] - times[:-back]) / 1e6
            within = seconds * 1e6 < FALL_WITHIN_US
            if not within.any():
                break
            drop = np.where(within, values[:-back] - values[back:], 0.0)
            fast = volume_m3 * drop / 1e5 > watching.most_m3_per_s * seconds
            falls[back:] |= (drop >= FALL_PA) & fast
        new = falls[len(recent) :]
        rests = np.array([_rests(ticks, row) for row in said.tick[new].tolist()], bool)
        suspect = said.tick[new][rests]
        good = min(good, int(suspect[0]) if len(suspect) else good)
    return good


def without_pressure_as_before(model: Model, ticks: Ticks) -> int:
    """The first tick in which a tank may stand without pressure, or may hold less than a bar,
    unlike before."""
    good, fitted = len(ticks.times_us), ticks.before.model.fittings
    for i, empty_us, low_us in zip(
        model.fittings.tanks, fitted.empty_since_us, fitted.low_since_us, strict=True
    ):
        source = model.plan.stations[i].pressure
        # where no gauge speaks nobody takes the tank for empty, or for one that holds a bar
        good = min(good, _as_before(ticks, source, EMPTY_PA, empty_us >= 0, unheard=False))
        good = min(good, _as_before(ticks, source, LOW_PA, low_us >= 0, unheard=True))
    return good


def _as_before(ticks: Ticks, source: Source, level_pa: float, below: bool, unheard: bool) -> int:
    """The first tick in which a gauge may be below a level, or may not be, unlike before;
    `unheard` is what counts where none speaks."""
    good = len(ticks.times_us)
    if not isinstance(source, Measured) or ticks.course.silent.get(source.channel, True):
        return good if below == unheard else 0
    values = ticks.course.values[source.channel]
    if source.gauge:
        return first((values < level_pa) != below, good)
    if below:
        return first(values >= level_pa + LOWEST_PA, good)
    return first(values < level_pa + HIGHEST_BAROMETER_PA, good)


def _rests(ticks: Ticks, row: int) -> bool:
    contact = ticks.contact(row)
    return contact.closed is False or (contact.closed is None and not ticks.pump(row).pumping)


def gauges_after(watching: DrainWatching, ticks: Ticks, count: int) -> Gauges | None:
    """The last readings of each tank after so many ticks; None where there are none."""
    if not watching.volumes:
        return None
    found = dict(ticks.before.drains.gauges)
    for tank, (channel, _) in watching.volumes.items():
        said = ticks.said[channel]
        until = said.count(count)
        if not until:
            continue
        # readings of a tick that are too old in the next one play no part any more
        enough = int(np.searchsorted(said.times_us, said.times_us[until - 1] - 2 * FALL_WITHIN_US))
        begins = int(np.searchsorted(said.tick, said.tick[enough]))
        recent = found.get(tank, ()) if begins == 0 else ()
        for row in np.unique(said.tick[begins:until]).tolist():
            of_tick = slice(*np.searchsorted(said.tick, (row, row + 1)))
            times, values = said.times_us[of_tick].tolist(), said.values[of_tick].tolist()
            recent = (*recent, *zip(times, values, strict=True))
            recent = tuple(each for each in recent if each[0] > times[-1] - FALL_WITHIN_US)
            if not _rests(ticks, row):
                recent = recent[-1:]
        found[tank] = recent
    return found
