"""Coming back, going back for late entries, and replay: from hours that are packed. Invented."""

from __future__ import annotations

from pathlib import Path

import pytest

from daemon.advance import Core
from daemon.clock import DAY_US, HOUR_US, SECOND_US
from daemon.journal import Drain
from daemon.replay import replay
from daemon.store.store import Store
from tests.daemon.sealed import seal_all
from tests.daemon.shops import BEGUN_US, PERIOD_US, flat, working
from tests.daemon.test_shell import SHOP, Rig, bits

TICKS = 1100  # three hours and some minutes


@pytest.mark.parametrize("late_ticks", [30, 400, 1000])
def test_kills_and_late_drains_leave_the_bits_of_a_replay_from_packed_hours(
    tmp_path: Path, late_ticks: int
) -> None:
    """Hours are packed as soon as they end; a drain is told of up to three hours late."""
    record = list(working(SHOP, TICKS))
    rig = Rig(tmp_path / "a.db", record)
    entries, sealed = [], 0
    for number, (now_us, _) in enumerate(record):
        if number == 1060:
            rig.clock.wall_us = now_us - SECOND_US
            at_us = now_us - late_ticks * PERIOD_US - 3 * SECOND_US
            drain = rig.shell.record(Drain("tank", volume_kg=0.05, by="AM"), at_us)
            entries.append(drain.entry)
        if number in (370, 725, 1062, 1090):
            rig.kill()
        rig.tick(now_us)
        sealed += seal_all(rig.store)
    replayed = replay(Core(SHOP), flat(record), entries)
    live = rig.state
    rig.store.close()
    assert sealed == 3
    assert bits(live) == bits(replayed.state)


def test_a_state_is_come_back_to_from_packed_hours_alone(tmp_path: Path) -> None:
    """All checkpoints but the first are lost: the way back leads through every packed hour."""
    record = list(working(SHOP, 800))
    rig = Rig(tmp_path / "a.db", record)
    for now_us, _ in record:
        rig.tick(now_us)
    live = bits(rig.state)
    seal_all(rig.store)
    rig.store.drop_checkpoints_after(BEGUN_US)
    rig.kill()
    assert bits(rig.state) == live
    steps = rig.shell.reading_steps("motor.contact", BEGUN_US, BEGUN_US + 2 * HOUR_US, HOUR_US)
    assert steps.count.tolist() == [360, 360]
    rig.store.close()


def test_eight_days_back_are_read_from_packed_hours(tmp_path: Path) -> None:
    with Store.open(tmp_path / "a.db", SHOP.channels) as store:
        record = list(working(SHOP, 9 * 24, BEGUN_US))
        moved = [(BEGUN_US + n * HOUR_US, readings) for n, (_, readings) in enumerate(record)]
        for tick_us, readings in moved:
            store.commit_tick(tick_us, readings)
        seal_all(store)
        since = moved[-1][0] - 8 * DAY_US
        found = list(store.ticks(since, moved[-1][0]))
        assert found == [each for each in moved if each[0] > since]
        assert len(found) == 8 * 24
