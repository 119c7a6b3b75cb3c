"""How long a live tick takes, and what the daemon weighs. Run by hand:

    python -m pytest -m bench -s tests/daemon/test_benchmarks.py

Goals: a tick of 12 channels, 128 members and 10 stations, commit included, under 10 ms (median);
the model's step alone under 0.5 ms; the daemon's process under 110 MB; a year replayed in blocks,
read and without forecasts, in 150 s. Figures are printed; the
tests fail only far beyond the goals, since machines differ and are shared.
"""

from __future__ import annotations

import json
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from time import perf_counter, thread_time
from typing import Any

import numpy as np
import pytest

from daemon.advance import Core
from daemon.clock import DAY_US, HOUR_US, format_rfc3339
from daemon.foreseer import Foreseen, Foreseer
from daemon.moisture.model import Heard
from daemon.record_arrays import Record, Told
from daemon.recorded_arrays import read_record
from daemon.recovery import Recovery
from daemon.replay import replay
from daemon.replay_along import replay_in_blocks
from daemon.shell import Shell
from daemon.state import Inputs
from daemon.store.store import Store
from tests.daemon.block_shops import Weather, a_shop
from tests.daemon.block_shops import a_record as shop_record
from tests.daemon.shops import BEGUN_US
from tests.daemon.test_shell import HandClock, Played
from tests.daemon.willow_yard import (
    a_day,
    a_record,
    daily_drains,
    willow_yard,
    working_willow_yard,
)
from tests.tree import ROOT

pytestmark = pytest.mark.bench

TICKS = 720  # two hours
TICK_GOAL_S, STEP_GOAL_S, MEMORY_GOAL_MB = 0.010, 0.0005, 110.0
MONTH_DAYS, WEEK_DAYS, YEAR_TICKS, YEAR_GOAL_S = 30, 7, 3_153_600, 150.0


@dataclass
class Times:
    """How long one kind of work took, each time: by the clock, and of this thread's processor."""

    name: str
    clock_s: list[float] = field(default_factory=list)
    processor_s: list[float] = field(default_factory=list)

    @contextmanager
    def one(self) -> Iterator[None]:
        clock_s, processor_s = perf_counter(), thread_time()
        yield
        self.clock_s.append(perf_counter() - clock_s)
        self.processor_s.append(thread_time() - processor_s)

    @property
    def median_s(self) -> float:
        return float(np.median(self.clock_s))

    def tell(self) -> None:
        """Medians tell of the program, the worst of the machine's other work too."""
        ms = np.array(self.clock_s) * 1e3
        middle, most, nearly_all = np.percentile(ms, [50, 90, 99])
        print(
            f"{self.name}: median {middle:.2f} ms (of the processor "
            f"{np.median(self.processor_s) * 1e3:.2f}), 90 % {most:.2f}, 99 % {nearly_all:.2f}, "
            f"worst {ms.max():.1f}"
        )


def test_a_live_tick(tmp_path: Path) -> None:
    site = willow_yard()
    record = a_day(site, TICKS)
    clock = HandClock(BEGUN_US)
    with Store.open(tmp_path / "willow-yard.db", site.channels) as store:
        shell = Shell(site, clock, Played(record), store)
        ordinary = Times("live tick, commit included")
        hourly = Times("at full hours")
        for now_us, _ in record:
            clock.wall_us = now_us
            with (hourly if now_us % HOUR_US == 0 else ordinary).one():
                shell.tick(now_us)
        again = Shell(site, clock, Played([]), store)
        back = Times(f"coming back over {(TICKS - 1) % 360} ticks")
        with back.one():
            again.recover()
        checkpoint = len(Recovery(shell.core, store).blob(shell._state))  # type: ignore[arg-type]
    print()
    for each in (ordinary, hourly, back):
        each.tell()
    print(f"a checkpoint: {checkpoint / 1024:.0f} KiB")
    assert ordinary.median_s < 5 * TICK_GOAL_S


def test_the_parts_of_a_tick(tmp_path: Path) -> None:
    """The model's step alone, all of advance, and the commit alone."""
    site = willow_yard()
    core = Core(site)
    record = a_day(site, 400)
    state = core.initial(record[0][0], Inputs(record[0][1]))[0]
    model = state.model
    step, advance, commit = (
        Times(name) for name in ("the model's step", "advance, model included", "commit")
    )
    with Store.open(tmp_path / "willow-yard.db", site.channels) as store:
        for now_us, readings in record[1:]:
            heard = Heard({r.channel: [(r.time_us, r.value, r.good)] for r in readings})
            with step.one():
                model, _ = core.model.step(model, now_us, heard)
            with advance.one():
                state = core.advance(state, now_us, Inputs(readings))[0]
            with commit.one():
                store.commit_tick(now_us, readings)
    print()
    for each in (step, advance, commit):
        each.tell()
    assert step.median_s < 10 * STEP_GOAL_S


def test_a_year_in_blocks(monkeypatch: pytest.MonkeyPatch) -> None:
    """A month in blocks, from arrays, beside a week tick by tick: each told for a whole year."""
    site = working_willow_yard()
    record, entries = a_record(site, MONTH_DAYS), daily_drains(site, MONTH_DAYS)
    forecasts = Times("a forecast")
    forecast = Foreseer.forecast

    def timed(self: Foreseer, *arguments: Any) -> Foreseen:
        with forecasts.one():
            return forecast(self, *arguments)

    monkeypatch.setattr(Foreseer, "forecast", timed)
    blocks = Times("in blocks")
    with blocks.one():
        found = replay_in_blocks(Core(site, hourly=False), record, entries)
    foresight_s = sum(forecasts.clock_s)
    until_us = BEGUN_US + WEEK_DAYS * DAY_US - 1
    week = record.readings(BEGUN_US - 1, until_us)
    plain = Times("tick by tick")
    with plain.one():
        ticks = replay(Core(site, hourly=False), week, [e for e in entries if e.at_us < until_us])
    years = YEAR_TICKS / found.ticks, YEAR_TICKS / ticks.ticks
    in_blocks_s = (blocks.clock_s[0] - foresight_s) * years[0]
    print(
        f"\na year in blocks: {in_blocks_s:.0f} s, and {foresight_s * years[0]:.0f} s of forecasts"
    )
    print(f"of the processor: {blocks.processor_s[0] * years[0]:.0f} s, forecasts included")
    print(f"ticks taken: {dict(found.taken)}")
    print(f"a year tick by tick, by a week of it: {plain.clock_s[0] * years[1]:.0f} s")
    print(f"as often as quick: {plain.clock_s[0] * years[1] / (blocks.clock_s[0] * years[0]):.1f}")
    assert in_blocks_s < 5 * YEAR_GOAL_S


def test_the_demos_line_in_blocks() -> None:
    """A line with a dryer: two days in blocks, beside an hour tick by tick, each for a week."""
    site = a_shop("the demo's line", members=128)
    record = shop_record(site, Weather(BEGUN_US, 48.0), 1)
    told = record.channels["intake-air.pressure"]  # two barometers of one shop agree
    channels = {**record.channels, "booth-air.pressure": Told(told.times_us, told.values + 10.0)}
    record = Record(channels)
    blocks, plain = Times("in blocks"), Times("tick by tick")
    with blocks.one():
        found = replay_in_blocks(Core(site, hourly=False), record, [])
    hour = record.readings(BEGUN_US - 1, BEGUN_US + HOUR_US)
    with plain.one():
        ticks = replay(Core(site, hourly=False), hour, [])
    weeks = [WEEK_DAYS * 8640 / each.ticks for each in (found, ticks)]
    print(f"\nticks taken: {dict(found.taken)}")
    print(f"a week in blocks: {blocks.processor_s[0] * weeks[0]:.1f} s of the processor")
    print(f"a week tick by tick: {plain.processor_s[0] * weeks[1]:.1f} s")
    assert blocks.processor_s[0] * weeks[0] < 0.5 * plain.processor_s[0] * weeks[1]


def test_reading_a_file_into_arrays(tmp_path: Path) -> None:
    """A day of twelve channels as CSV."""
    site = working_willow_yard()
    record = a_record(site, 1)
    path = tmp_path / "readings.csv"
    units = {"temperature": "K", "relative_humidity": "%", "pressure": "Pa", "contact": ""}
    with path.open("w") as file:
        file.write("time,channel,value,unit\n")
        for each in record.readings(BEGUN_US - 1, record.last_us):
            unit = units[site.channels[each.channel].quantity]
            value = each.value * 100.0 if unit == "%" else each.value
            file.write(f"{format_rfc3339(each.time_us)},{each.channel},{value:.6g},{unit}\n")
    reading = Times("a day of a file into arrays")
    for _ in range(3):
        with reading.one():
            found, _ = read_record(site, path)
    rows = sum(len(told.values) for told in found.channels.values())
    print()
    reading.tell()
    print(f"a year of it: {reading.median_s / rows * 12 * YEAR_TICKS:.0f} s")
    assert rows == 12 * 8640


def test_what_the_daemon_weighs(tmp_path: Path) -> None:
    """A process of its own, with its API and emulated parts, after 200 ticks."""
    done = subprocess.run(
        [sys.executable, "-m", "tests.daemon.willow_yard", str(tmp_path / "willow-yard.db")],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=True,
    )
    found = json.loads(done.stdout)
    print(f"\nresident after 200 ticks: {found['VmRSS']:.0f} MB, at most {found['VmHWM']:.0f} MB")
    assert found["VmRSS"] < 2 * MEMORY_GOAL_MB
