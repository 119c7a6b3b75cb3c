"""What readings cost in the database. Run by hand:

    python -m pytest -m bench -s tests/daemon/test_store_benchmarks.py

Goals: at most 2 bytes a reading over a year of the demo's channels; a channel's week in well under
50 ms; an hour packed in a few ms. The readings are those of the demo: its make-believe shop, its
emulated parts with their noise, the real drivers, two days of them, of which the second is repeated
over a quarter of a year: bytes a reading are those of a year. Figures are printed; the tests fail
only far beyond the goals, since machines differ.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator, Sequence
from contextlib import closing
from dataclasses import replace
from itertools import groupby
from pathlib import Path
from time import perf_counter

import numpy as np
import pytest
from sqlalchemy import insert

from daemon.clock import DAY_US, HOUR_US, SystemClock, parse_rfc3339
from daemon.demo import demo_site
from daemon.make_believe import MakeBelieveShop
from daemon.site import hours as opening
from daemon.site.types import Site
from daemon.store.packing import pack
from daemon.store.store import Store
from daemon.store.tables import ticks
from sensors.emulated.hardware import EmulatedHardware
from sensors.reading import Reading
from sensors.sampling import Sampler

pytestmark = pytest.mark.bench

BEGUN_US = parse_rfc3339("2026-11-30T00:00:00Z")  # a Monday
DAYS = 91


@pytest.fixture(scope="module")
def site() -> Site:
    return replace(demo_site(BEGUN_US, None), timezone="UTC")


def sampled(site: Site, days: int) -> Iterator[tuple[int, list[Reading]]]:
    """What the demo's daemon samples, tick by tick."""
    with EmulatedHardware() as parts:
        setters = parts.fit(site.sensors)
        parts.make_noisy()
        held = {s.id: s.trap.holds_at_start_kg for s in site.line.stations if s.trap is not None}
        shop = MakeBelieveShop(
            BEGUN_US,
            setters,
            held,
            at_work=lambda time_us: opening.is_open(site.hours, site.timezone, time_us),
        )
        sampler = Sampler(site.sensors, parts, SystemClock().monotonic)
        for now_us in range(BEGUN_US + 1, BEGUN_US + days * DAY_US, site.sample_every_us):
            tick_us = now_us - 1 + site.sample_every_us
            shop.advance_to(tick_us)
            yield tick_us, sampler.sample(tick_us, 4.0, patient=True)
        sampler.close()


@pytest.fixture(scope="module")
def quarter(tmp_path_factory: pytest.TempPathFactory, site: Site) -> Path:
    """A database with a quarter of a year in it, each hour packed as it ended."""
    path = tmp_path_factory.mktemp("quarter") / "larch-lane.db"
    times: list[float] = []
    with Store.open(path, site.channels) as store:
        layout = store._ticks._layout
        day = [
            (tick_us, pack(layout, tick_us, readings))  # the same bytes at any other time
            for tick_us, readings in sampled(site, 2)
            if tick_us > BEGUN_US + DAY_US
        ]
        hours = [list(group) for _, group in groupby(day, key=lambda each: each[0] // HOUR_US)]
        for number in range(DAYS):
            for hour in hours:
                _store(store, hour, number * DAY_US)
                begun_s = perf_counter()
                if store.seal_next():
                    times.append(perf_counter() - begun_s)
    ms = np.percentile(np.array(times) * 1e3, [50, 90, 99])
    print(
        f"\nan hour of {len(site.channels)} channels packed: median {ms[0]:.1f} ms, "
        f"90 % {ms[1]:.1f}, 99 % {ms[2]:.1f} (commit with a synced disk included)"
    )
    assert ms[0] < 100.0
    return path


def _store(store: Store, rows: Sequence[tuple[int, bytes]], shift_us: int) -> None:
    version = store._ticks._layout.version
    with store._database.write() as connection:
        connection.execute(
            insert(ticks),
            [{"at_us": at + shift_us, "layout": version, "packed": row} for at, row in rows],
        )
    store._ticks.committed(rows[-1][0] + shift_us)


def test_bytes_a_reading(quarter: Path) -> None:
    with closing(sqlite3.connect(quarter)) as connection:
        readings = connection.execute("SELECT sum(good + bad) FROM channel_hours").fetchone()[0]
        sizes = dict(connection.execute("SELECT name, sum(pgsize) FROM dbstat GROUP BY name"))
    used = {
        name: size / readings
        for name, size in sizes.items()
        if name.startswith(("sealed", "channel_hours", "sqlite_autoindex_sealed"))
    }
    whole = quarter.stat().st_size / readings
    print(
        f"\n{readings / 1e6:.1f} M readings: {whole:.2f} bytes each, the whole file counted; "
        f"a year {quarter.stat().st_size / 1e6 * 365.25 / DAYS:.0f} MB"
    )
    for name, size in sorted(used.items()):
        print(f"  {name}: {size:.2f}")
    assert whole < 2.0


def test_reading_a_channel(quarter: Path, site: Site) -> None:
    with Store.open(quarter, site.channels) as store:
        end_us = store.last_tick_us or 0
        week_us, begin_us = end_us - 7 * DAY_US, end_us - (DAYS - 1) * DAY_US
        hour_us = begin_us - begin_us % HOUR_US
        for channel in ("tank-gauge.pressure", "motor.contact"):
            week = _median_ms(lambda name=channel: store.readings(name, week_us, end_us))
            by_week = _median_ms(lambda name=channel: store.hours(name, week_us, end_us))
            by_hour = _median_ms(lambda name=channel: store.hours(name, hour_us, end_us))
            print(
                f"\n{channel}: a week of readings {week:.1f} ms, its hours {by_week:.1f} ms, "
                f"a quarter's hours {by_hour:.0f} ms"
            )
            assert week < 500.0
            assert by_week < 250.0


def _median_ms(work: object, times: int = 9) -> float:
    assert callable(work)
    taken = []
    for _ in range(times):
        begun_s = perf_counter()
        work()
        taken.append(perf_counter() - begun_s)
    return float(np.median(taken)) * 1e3
