"""A late entry is reckoned with beside the ticks, which go on meanwhile; then nothing tells it."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from daemon import recovery
from daemon.clock import MINUTE_US
from daemon.journal import Drain, Entry, Undo
from tests.daemon.shops import BEGUN_US, PERIOD_US
from tests.daemon.test_recovery import Daemon, replayed
from tests.daemon.test_shell import HandClock, bits

TICKS = 800
AT_US = BEGUN_US + 60 * PERIOD_US + 5


class Slow(HandClock):
    """Every look at it takes a second: of advancing again, ten minutes fit into a tick."""

    def monotonic(self) -> float:
        self.seconds += 1.0
        return self.seconds


@pytest.fixture
def daemon(tmp_path: Path) -> Iterator[Daemon]:
    made = Daemon(tmp_path / "birch-works.db", TICKS)
    made.shell._clock = made.clock = Slow(BEGUN_US)
    made.tick(*range(700))
    made.clock.wall_us += 1
    yield made
    made.store.close()


def late(daemon: Daemon, at_us: int = AT_US, trap: str = "tank") -> Entry:
    return daemon.shell.record(Drain(trap, volume_kg=0.03, by="AM"), at_us).entry


def test_ticks_go_on_while_it_goes_back_and_then_it_counts(daemon: Daemon) -> None:
    entry = late(daemon)
    daemon.tick(700)
    assert bits(daemon.state) == replayed(daemon, 701)  # not yet, and nothing else is lost
    daemon.tick(*range(701, 730))
    assert bits(daemon.state) == replayed(daemon, 730, entry)
    assert daemon.shell._pending == []


def test_what_is_recorded_meanwhile_counts_too(daemon: Daemon) -> None:
    first = late(daemon)
    daemon.tick(700, 701)
    daemon.clock.wall_us += 3
    then = daemon.shell.record(Drain("riser", by="AM")).entry
    daemon.tick(702, 703)
    behind = late(daemon, AT_US + 2 * MINUTE_US, "bowl")  # where it has been already
    ahead = late(daemon, BEGUN_US + 600 * PERIOD_US + 5, "bowl")
    daemon.tick(*range(704, 740))
    entries = sorted((first, then, behind, ahead), key=lambda entry: entry.at_us)
    assert bits(daemon.state) == replayed(daemon, 740, *entries)


@pytest.mark.parametrize("clean", [True, False])
def test_a_stop_on_the_way_forgets_nothing(daemon: Daemon, clean: bool) -> None:
    """Another drain lies on the way: at other times it leaves a checkpoint."""
    entry = late(daemon)
    daemon.tick(*range(700, 704))
    daemon.clock.wall_us += 3
    then = daemon.shell.record(Drain("riser", by="AM")).entry
    daemon.tick(704, 705)
    if clean:
        daemon.stop()
    else:
        daemon.kill()
    daemon.start()
    assert bits(daemon.state) == replayed(daemon, 706, entry, then)


@pytest.fixture
def undone(daemon: Daemon) -> Daemon:
    """A drain of long ago was reckoned with, and has just been taken back."""
    entry = late(daemon)
    daemon.tick(*range(700, 725))
    assert bits(daemon.state) == replayed(daemon, 725, entry)
    daemon.clock.wall_us += 1
    daemon.shell.record(Undo("tank", entry.seq, "AM"))
    assert bits(daemon.state) == replayed(daemon, 725, entry)  # ticks go on with it meanwhile
    return daemon


def test_ticks_go_on_while_it_goes_back_for_an_undo_and_then_it_never_was(undone: Daemon) -> None:
    undone.tick(725)
    assert undone.state.time_us == BEGUN_US + 725 * PERIOD_US
    assert undone.shell._going is not None
    undone.tick(*range(726, 755))
    assert bits(undone.state) == replayed(undone, 755)
    undone.tick(*range(755, 765))  # a full hour lies at 720: checkpoints are kept again
    undone.shell.checkpoint()
    found = undone.store.checkpoint_before(undone.state.time_us)
    assert found is not None
    assert found[0] == undone.state.time_us


def test_no_checkpoint_knows_of_a_drain_that_was_undone(undone: Daemon) -> None:
    at_us = undone.state.time_us
    undone.tick(725, 726)
    undone.shell.checkpoint()
    undone.tick(727)
    assert undone.store.checkpoint_before(undone.state.time_us)[0] <= at_us  # type: ignore[index]
    undone.tick(*range(728, 760))
    assert bits(undone.state) == replayed(undone, 760)


def test_what_is_recorded_and_undone_while_it_goes_back_for_an_undo_counts_too(
    undone: Daemon,
) -> None:
    undone.tick(725, 726)
    undone.clock.wall_us += 3
    behind = late(undone, AT_US - 2 * MINUTE_US, "bowl")  # before all that it went back to
    undone.tick(727, 728)
    undone.clock.wall_us += 3
    ahead = late(undone, BEGUN_US + 600 * PERIOD_US + 5, "riser")
    then = undone.shell.record(Drain("riser", by="AM")).entry
    undone.tick(729)
    undone.shell.record(Undo("riser", ahead.seq, "AM"))  # on the way
    undone.tick(730)
    undone.shell.record(Undo("riser", then.seq, "AM"))  # taken in by a tick
    undone.tick(*range(731, 775))
    assert bits(undone.state) == replayed(undone, 775, behind)


@pytest.mark.parametrize("clean", [True, False])
def test_a_stop_on_the_way_back_for_an_undo_forgets_nothing(undone: Daemon, clean: bool) -> None:
    undone.tick(725, 726)
    undone.clock.wall_us += 3
    then = undone.shell.record(Drain("riser", by="AM")).entry
    undone.tick(727, 728)
    (undone.stop if clean else undone.kill)()
    undone.start()
    undone.tick(*range(729, 760))
    assert bits(undone.state) == replayed(undone, 760, then)


@pytest.mark.parametrize("stops", [1, 2])
@pytest.mark.parametrize("clean", [True, False])
def test_a_start_does_not_wait_for_what_it_was_long_on_the_way_to(
    daemon: Daemon, monkeypatch: pytest.MonkeyPatch, clean: bool, stops: int
) -> None:
    monkeypatch.setattr(recovery, "LONGEST_AT_START_US", 10 * MINUTE_US)
    entry = late(daemon)
    daemon.tick(*range(700, 704))
    daemon.clock.wall_us += 3
    then = daemon.shell.record(Drain("riser", by="AM")).entry
    daemon.tick(704, 705)
    for _ in range(stops):
        (daemon.stop if clean else daemon.kill)()
        daemon.start()
        assert bits(daemon.state) == replayed(daemon, 706, then)  # as it was before the stop
    daemon.tick(706)
    assert daemon.shell._going is not None
    daemon.tick(*range(707, 740))
    assert bits(daemon.state) == replayed(daemon, 740, entry, then)


@pytest.mark.parametrize("clean", [True, False])
def test_a_start_does_not_wait_for_an_undo_that_it_was_long_on_the_way_to(
    undone: Daemon, monkeypatch: pytest.MonkeyPatch, clean: bool
) -> None:
    monkeypatch.setattr(recovery, "LONGEST_AT_START_US", 10 * MINUTE_US)
    undone.tick(725, 726)
    held = bits(undone.state)
    for _ in range(2):
        (undone.stop if clean else undone.kill)()
        undone.start()
        assert bits(undone.state) == held
    undone.tick(727)
    assert undone.shell._going is not None
    undone.tick(*range(728, 760))
    assert bits(undone.state) == replayed(undone, 760)


def test_one_that_is_taken_back_on_the_way_never_was(daemon: Daemon) -> None:
    entry = late(daemon)
    daemon.tick(700, 701)
    daemon.shell.record(Undo("tank", entry.seq, "AM"))
    daemon.tick(*range(702, 720))
    assert bits(daemon.state) == replayed(daemon, 720)
    daemon.tick(720)  # a full hour: checkpoints are kept again
    found = daemon.store.checkpoint_before(daemon.state.time_us)
    assert found is not None
    assert found[0] == daemon.state.time_us
