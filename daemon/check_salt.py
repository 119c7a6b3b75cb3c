"""`dripleg check --salt SENSOR`: a humidity sensor in a closed jar over wet table salt.

It is read for a while, until it stands; what it reads beside what is true there goes into the
journal, and the estimate knows its bias better from then on.
"""

from __future__ import annotations

import threading
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from daemon import accept
from daemon.asking import ask, serves
from daemon.check_readings import Looker
from daemon.clock import Clock
from daemon.errors import JournalError, StoreError
from daemon.journal import SaltCheck
from daemon.moisture.salt import COLDEST_K, HOTTEST_K, over_sodium_chloride
from daemon.shell import GRID_KEY
from daemon.site.types import Site
from daemon.store.store import Store
from daemon.units import show_difference, show_duration, show_percent, show_temperature
from sensors.registry import Hardware

LONG_S = 600.0
SHORTEST_S, LONGEST_S = 60.0, 24 * 3600.0
FEWEST = 10  # good readings
LOOKS = 60  # in the whole time, at most one a second
# Between the first and the last third: what still moves has not come to rest with the jar.
STEADY, STEADY_K = 0.004, 0.3
_BOTH = ("relative_humidity", "temperature")

HOW = """\
{sensor} over salt: stir table salt with so little water that it is a wet paste, in a jar that
closes; hang the sensor above it, not touching, the cable through a sealed hole. Leave it closed
for some hours at room temperature, out of the sun. While it is in the jar, dripleg takes the
jar's air for the shop's: do it while the compressor is off.
Reading it for {length}..."""

Say = Callable[[str], None]


@dataclass(frozen=True, slots=True)
class Jar:
    """What a sensor read in the jar: means, and how much they moved."""

    humidity: float
    temperature_k: float
    moved: float
    moved_k: float

    @classmethod
    def of(cls, read: Sequence[tuple[float, float]]) -> Jar:
        """From (humidity, temperature) in order of time."""
        third = max(1, len(read) // 3)

        def mean(part: Sequence[tuple[float, float]], which: int) -> float:
            return sum(each[which] for each in part) / len(part)

        moved, moved_k = (mean(read[-third:], n) - mean(read[:third], n) for n in (0, 1))
        return cls(mean(read, 0), mean(read, 1), moved, moved_k)


@dataclass(frozen=True, slots=True)
class Wanted:
    """What was asked for."""

    sensor: str
    length_s: float
    by: str
    store_path: Path


def salt_check(
    site: Site, wanted: Wanted, hardware: Hardware, clock: Clock, stop: threading.Event, say: Say
) -> None:
    """Read, judge, record. JournalError says why nothing was recorded."""
    _check_wanted(site, wanted)
    say(HOW.format(sensor=wanted.sensor, length=show_duration(wanted.length_s)))
    # the sensor alone: the others have nothing to do with the jar
    mine = tuple(one for one in site.sensors if one.id == wanted.sensor)
    looker = Looker(replace(site, sensors=mine), hardware, clock, store_path=wanted.store_path)
    try:
        read = _read(looker, wanted, clock, stop)
    finally:
        looker.close()
    found = judge(site, wanted.sensor, read)
    check = SaltCheck(
        wanted.sensor,
        round(found.humidity, 4),
        round(over_sodium_chloride(found.temperature_k), 4),
        wanted.by,
    )
    _record(site, check, wanted.store_path, clock)
    say(_told(check))


def _check_wanted(site: Site, wanted: Wanted) -> None:
    names = [f"{wanted.sensor}.{what}" for what in _BOTH]
    if not all(name in site.channels for name in names):
        fit = [s.id for s in site.sensors if f"{s.id}.relative_humidity" in site.channels]
        known = ", ".join(fit) or "none"
        raise JournalError(f'--salt "{wanted.sensor}": no humidity sensor has this id ({known})')
    if not SHORTEST_S <= wanted.length_s <= LONGEST_S:
        raise JournalError(f"--for {wanted.length_s:g} s: from 1 min to 1 day")


def _read(
    looker: Looker, wanted: Wanted, clock: Clock, stop: threading.Event
) -> list[tuple[float, float]]:
    """(humidity, temperature) of every look that gave both."""
    found = []
    begun_s = clock.monotonic()
    every_s = max(1.0, wanted.length_s / LOOKS)
    while clock.monotonic() - begun_s < wanted.length_s:
        said = looker.look().said
        both = [said.get(f"{wanted.sensor}.{what}") for what in _BOTH]
        values = [one.value for one in both if one is not None and not one.fault]
        humidity, temperature_k = values if len(values) == len(_BOTH) else (None, None)
        if humidity is not None and temperature_k is not None:
            found.append((humidity, temperature_k))
        if clock.wait(every_s, stop):
            raise JournalError("stopped before the time was over: nothing was recorded")
    return found


def judge(site: Site, sensor: str, read: Sequence[tuple[float, float]]) -> Jar:
    """What was read, if it can be believed; JournalError says why not."""
    if len(read) < FEWEST:
        raise JournalError(
            f"{sensor} gave only {len(read)} good readings: run `dripleg check` and look at its "
            "wiring; nothing was recorded"
        )
    jar = Jar.of(read)
    if not COLDEST_K <= jar.temperature_k <= HOTTEST_K:
        low, high = (show_temperature(each, site.units) for each in (COLDEST_K, HOTTEST_K))
        raise JournalError(
            f"{sensor} is at {show_temperature(jar.temperature_k, site.units)}: do this between "
            f"{low} and {high}; nothing was recorded"
        )
    if abs(jar.moved) > STEADY or abs(jar.moved_k) > STEADY_K:
        raise JournalError(
            f"{sensor} still moves (by {show_percent(abs(jar.moved))} and "
            f"{show_difference(abs(jar.moved_k), site.units)} while it was read): leave it longer "
            "in the closed jar; nothing was recorded"
        )
    return jar


def _record(site: Site, check: SaltCheck, path: Path, clock: Clock) -> None:
    if serves(site, path):
        body = {
            "reads_percent": check.reads * 100.0,
            "true_percent": check.true * 100.0,
            "by": check.by or None,
        }
        answer = ask(site, f"sensors/{check.sensor}/salt-checks", body, path)
        if answer is None or answer[0] != 201:
            detail = answer[1].get("detail", "") if answer is not None else "it is gone"
            raise JournalError(f"the daemon did not take it: {detail}")
        return
    if not path.exists():
        raise StoreError(
            f"no daemon answers at {site.api.host}:{site.api.port}, and there is no database at "
            f"{path}: start the daemon first, or name its database with --store"
        )
    now_us = clock.now_us()
    with Store.open(path, site.channels) as store:
        begun_us = int(store.get_meta(GRID_KEY) or 0)
        accept.check(site, check, now_us, now_us, begun_us)
        store.add_entry(check, now_us, now_us)


def _told(check: SaltCheck) -> str:
    off = check.reads - check.true
    words = (
        "just right"
        if abs(off) < 5e-4
        else f"{show_percent(round(abs(off), 3))} " + ("too high" if off > 0 else "too low")
    )
    return (
        f"{check.sensor} reads {show_percent(round(check.reads, 3))} where "
        f"{show_percent(round(check.true, 3))} is: {words}. Recorded: the estimate takes that into "
        "account from now on. Do it again in three months; a reminder comes by itself."
    )
