"""A day at the make-believe shop with a fault every few minutes: it costs certainty, and no truth.

The shop is not the daemon's model: what its traps really hold is known, and has to lie within what
the daemon says of them.
"""

from __future__ import annotations

import random
import threading
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from pathlib import Path

import pytest

from daemon.clock import HOUR_US, MINUTE_US, SECOND_US, SystemClock
from daemon.demo import demo_site
from daemon.journal import Drain
from daemon.make_believe import MakeBelieveShop
from daemon.shell import Shell
from daemon.store.store import Store
from sensors.emulated.hardware import EmulatedHardware
from sensors.sampling import Sampler
from tests.daemon.shops import BEGUN_US
from tests.daemon.test_sensor_trouble import Patient
from tests.daemon.test_shell import HandClock

PERIOD_US = 30 * SECOND_US
FAULT_EVERY_US, LONGEST_US = 4 * MINUTE_US, 3 * MINUTE_US
STRUCK = ("intake-air", "tank-gauge", "pipe-end", "motor")  # the parts that `Trouble` breaks


@dataclass
class Trouble:
    """Breaks one thing every few minutes, for a minute or three; an hour's outage at noon."""

    hardware: EmulatedHardware
    seed: int
    strikes: int = 0
    _mend: Callable[[], None] = lambda: None
    _mend_us: int = 0
    _random: random.Random = field(init=False)

    def __post_init__(self) -> None:
        self._random = random.Random(self.seed)

    def at(self, now_us: int) -> None:
        """Break or mend what is due."""
        since_us = now_us - BEGUN_US
        if now_us >= self._mend_us:
            self._mend()
            self._mend = lambda: None
        if since_us % FAULT_EVERY_US == 0 and now_us >= self._mend_us:
            lasts_us = self._random.randrange(PERIOD_US, LONGEST_US)
            if since_us == 4 * HOUR_US:
                lasts_us = HOUR_US
            self._mend, self._mend_us = self._strike(), now_us + lasts_us
            self.strikes += 1

    def _strike(self) -> Callable[[], None]:
        air, adc = self.hardware.bme280(1, 0x76), self.hardware.ads1115(1, 0x48)
        probe = self.hardware.ds18b20("28-00000a1b2c3d")
        line = self.hardware.line("/dev/gpiochip0", 17)
        kinds: list[Callable[[], Callable[[], None]]] = [
            *(lambda part=part, name=name: broken(part, name, True)
              for part in (air, adc) for name in ("silent", "lines_high", "lines_low",
                                                  "stuck_busy")),
            lambda: broken(air, "flipped_data_bit", self._random.randrange(64)),
            lambda: broken(air, "chip_id", 0x58),
            lambda: broken(air, "frozen", True),
            lambda: broken(adc, "resets_while_converting", True),
            lambda: broken(adc, "flipped_data_bit", self._random.randrange(16)),
            lambda: broken(adc.rail, "supply_v", 4.2),
            lambda: broken(adc.inputs[0], "wire_off", True),
            lambda: broken(line, "missing", True),
            lambda: broken(line, "lose", 1),
            *(lambda fault=fault: failed(probe, fault)
              for fault in ("silent", "checksum", "ones", "zeros", "reset", "starved")),
        ]  # fmt: skip
        return self._random.choice(kinds)()


def broken(part: object, name: str, value: object) -> Callable[[], None]:
    """Break it; gives what mends it."""
    before = getattr(part, name)
    setattr(part, name, value)
    return lambda: setattr(part, name, before)


def failed(probe: object, fault: str) -> Callable[[], None]:
    probe.fail(fault)  # type: ignore[attr-defined]  # an emulated probe
    return lambda: probe.fail("")  # type: ignore[attr-defined]


class Day:
    """The shop, its parts and a daemon, by a hand clock."""

    def __init__(self, folder: Path, seed: int | None) -> None:
        site = demo_site(BEGUN_US, None)
        line = replace(site.line, period_s=PERIOD_US / 1e6)
        self.site = replace(site, sample_every_us=PERIOD_US, line=line)
        self.hardware = EmulatedHardware()
        setters = self.hardware.fit(self.site.sensors)
        self.hardware.make_noisy()
        held = {s.id: s.trap.holds_at_start_kg for s in line.stations if s.trap is not None}
        self.shop = MakeBelieveShop(BEGUN_US, setters, held, step_us=10 * SECOND_US)
        self.trouble = None if seed is None else Trouble(self.hardware, seed)
        self.clock = HandClock(BEGUN_US)
        self.sampler = Sampler(self.site.sensors, self.hardware, SystemClock().monotonic)
        self.store = Store.open(folder / "day.db", self.site.channels)
        self.shell = Shell(self.site, self.clock, Patient(self.sampler), self.store)
        self.shell.on_entry = lambda entry: self.shop.drain(entry.body.trap)  # type: ignore[union-attr]

    def run(self, hours: int) -> dict[str, list[bool]]:
        """Whether the truth lies within 5-95 %, by trap, hour by hour."""
        within: dict[str, list[bool]] = {trap: [] for trap in self.site.traps}
        for number in range(hours * HOUR_US // PERIOD_US + 1):
            now_us = BEGUN_US + number * PERIOD_US
            self.shop.advance_to(now_us)
            if self.trouble is not None:
                self.trouble.at(now_us)
            self.clock.wall_us = now_us
            self.shell.tick(now_us)
            if number and number * PERIOD_US % HOUR_US == 0:
                for view in self.shell.traps():
                    true_kg = self.shop.traps_kg[view.trap]
                    within[view.trap].append(view.p05_kg <= true_kg <= view.p95_kg)
                    if view.due:
                        self.shell.record(Drain(view.trap, by="AM"), now_us)
        return within

    def close(self) -> None:
        assert self.sampler.close() == ()
        self.store.close()
        self.hardware.close()


def spread(day: Day) -> tuple[float, float]:
    """How unsure the daemon is of the air drawn in: its humidity now, and all water so far (kg)."""
    state = day.shell._state
    assert state is not None
    return float(state.model.conditions.relative_humidity.std()), float(
        state.model.ledger.water_in.std()
    )


def test_a_day_with_a_fault_every_few_minutes_still_covers_the_truth(tmp_path: Path) -> None:
    before = set(threading.enumerate())
    day = Day(tmp_path, seed=4)
    within = day.run(24)
    assert day.trouble is not None
    assert day.trouble.strikes > 200
    for trap, hours in within.items():
        assert len(hours) == 24
        assert all(hours), f"{trap}: {hours}"
    bad = {
        name: sum(map(bool, day.shell.readings(name, BEGUN_US, 2 * BEGUN_US).faults))
        for name, channel in day.site.channels.items()
        if channel.sensor in STRUCK
    }
    assert len(bad) == 6
    assert all(count > 50 for count in bad.values()), bad
    assert not day.hardware.locked_buses()
    day.close()
    assert set(threading.enumerate()) <= before


def test_a_part_that_dies_for_an_hour_costs_certainty_and_nothing_else(tmp_path: Path) -> None:
    """The intake's sensor is gone for an hour: that hour's air is known less, and still truly."""
    day = Day(tmp_path, None)
    part = day.hardware.bme280(1, 0x76)
    dies_us, back_us = BEGUN_US + HOUR_US, BEGUN_US + 2 * HOUR_US
    seen: dict[int, tuple[float, float]] = {}
    for number in range(3 * HOUR_US // PERIOD_US + 1):
        now_us = BEGUN_US + number * PERIOD_US
        day.shop.advance_to(now_us)
        part.silent = dies_us < now_us <= back_us
        day.clock.wall_us = now_us
        day.shell.tick(now_us)
        seen[now_us] = spread(day)
    before, during, after = (seen[at_us] for at_us in (dies_us, back_us, back_us + 3 * PERIOD_US))
    assert during[0] > 2.0 * before[0]
    assert after[0] == pytest.approx(before[0], rel=0.2)
    grown = [seen[to_us][1] - seen[from_us][1] for from_us, to_us in
             ((BEGUN_US + PERIOD_US, dies_us), (dies_us, back_us))]  # fmt: skip
    assert grown[1] > 1.2 * grown[0]
    for view in day.shell.traps():
        assert view.p05_kg <= day.shop.traps_kg[view.trap] <= view.p95_kg
    health = day.shell.health()
    assert health.ok, health.problems
    bad = day.shell.readings("intake-air.pressure", BEGUN_US, 2 * BEGUN_US)
    assert set(bad.faults) == {"", "no answer"}
    assert sum(map(bool, bad.faults)) == HOUR_US // PERIOD_US
    day.close()
