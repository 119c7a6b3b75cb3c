"""Putting an alarm off in the running daemon: journal, events, kills, late entries, drains."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from daemon.advance import Core
from daemon.alarms import AlarmState
from daemon.clock import MINUTE_US, format_rfc3339
from daemon.errors import JournalError
from daemon.journal import Drain, Entry, Shelve, Unshelve
from daemon.state import Inputs
from tests.daemon.shops import BEGUN_US, PERIOD_US, working
from tests.daemon.test_shell import SHOP, Rig, bits

DUE, FLOODED = "tank-drain-due", "tank-flooded"
SPARSE = list(working(SHOP, 3000))


@pytest.fixture
def rig(tmp_path: Path) -> Iterator[Rig]:
    made = Rig(tmp_path / "birch-works.db", SPARSE)
    yield made
    made.store.close()


def run(rig: Rig, minutes: float) -> None:
    """Tick for so long."""
    begun_us = rig.state.time_us + PERIOD_US if rig.shell._state is not None else BEGUN_US
    for now_us in range(begun_us, begun_us + round(minutes * MINUTE_US), PERIOD_US):
        rig.tick(now_us)


def state(rig: Rig, alarm: str = DUE) -> AlarmState:
    (found,) = (each for each in rig.shell.alarms() if each.id == alarm)
    return found.state


def until(rig: Rig) -> str | None:
    (found,) = (each for each in rig.shell.alarms() if each.id == DUE)
    return None if found.shelved_until_us is None else format_rfc3339(found.shelved_until_us)


def told(rig: Rig, alarm: str = DUE) -> list[tuple[AlarmState, AlarmState]]:
    found = rig.store.transitions(0, 2**62)
    return [(each.before, each.after) for each in found if each.alarm == alarm]


def test_it_is_shown_at_once_told_at_the_next_tick_and_over_in_its_time(rig: Rig) -> None:
    run(rig, 2)
    recorded = rig.shell.record(Shelve(DUE, 600.0, "AM"))
    assert state(rig) == "shelved"
    assert until(rig) == format_rfc3339(recorded.entry.at_us + 10 * MINUTE_US)
    run(rig, 9)
    assert told(rig) == [("normal", "shelved")]
    run(rig, 2)
    assert told(rig) == [("normal", "shelved"), ("shelved", "normal")]
    (shelved, _) = (each for each in rig.store.transitions(0, 2**62) if each.alarm == DUE)
    assert shelved.text.startswith("Put off until 07:1")
    assert shelved.text.endswith("by AM.")
    assert shelved.by == "AM"


def test_a_kill_changes_nothing(tmp_path: Path) -> None:
    through, killed = (Rig(tmp_path / f"{name}.db", SPARSE) for name in ("a", "b"))
    for each in (through, killed):
        run(each, 2)
        each.shell.record(Shelve(DUE, 600.0, "AM"))
        if each is killed:
            each.kill()
        run(each, 5)
        if each is killed:
            each.kill()
        assert state(each) == "shelved"
        run(each, 6)
    assert told(killed) == told(through)
    assert bits(killed.state) == bits(through.state)
    for each in (through, killed):
        each.store.close()


def test_it_can_be_ended_before_its_time(rig: Rig) -> None:
    run(rig, 1)
    rig.shell.record(Shelve(DUE, 3600.0, "AM"))
    run(rig, 1)
    rig.shell.record(Unshelve(DUE, "BC"))
    run(rig, 1)
    assert told(rig) == [("normal", "shelved"), ("shelved", "normal")]


def test_a_drain_ends_it(rig: Rig) -> None:
    run(rig, 1)
    rig.shell.record(Shelve(DUE, 3600.0, "AM"))
    rig.shell.record(Shelve("riser-drain-due", 3600.0, "AM"))
    run(rig, 1)
    rig.shell.record(Drain("tank", by="AM"))
    run(rig, 1)
    assert (state(rig), state(rig, "riser-drain-due")) == ("normal", "shelved")


def test_a_drain_that_left_some_does_not(rig: Rig) -> None:
    run(rig, 1)
    rig.shell.record(Shelve(DUE, 3600.0, "AM"))
    run(rig, 1)
    rig.shell.record(Drain("tank", "partly", by="AM"))
    run(rig, 1)
    assert state(rig) == "shelved"


def test_a_trap_whose_alarm_is_put_off_is_due_all_the_same(rig: Rig) -> None:
    """The round must not forget it."""
    run(rig, 1)
    rig.shell.record(Shelve(DUE, 36000.0, "AM"))
    run(rig, 1)
    core, raised = rig.shell.core, rig.state
    full = core.model.plan.index["tank"]
    raised.model.water.trap[full] = 1.0  # kg: above its 0.6
    for number in range(20):
        now_us = rig.state.time_us + (number + 1) * PERIOD_US
        raised, estimate, transitions = core.advance(raised, now_us, Inputs())
        assert [each for each in transitions if each.alarm == DUE] == []
    (tank,) = (each for each in estimate.traps if each.trap == "tank")
    assert tank.due


def test_an_urgent_alarm_is_never_put_off_for_longer_than_an_hour() -> None:
    core = Core(SHOP)
    first, _, _ = core.initial(BEGUN_US, Inputs(SPARSE[0][1]))
    asked = Entry(1, BEGUN_US + 1, BEGUN_US + 1, Shelve(FLOODED, 86400.0))
    after, _, _ = core.advance(first, BEGUN_US + PERIOD_US, Inputs((), (asked,)))
    assert after.alarms[FLOODED].until_us == BEGUN_US + 1 + 60 * MINUTE_US


@pytest.mark.parametrize("seconds", [0.0, 59.0, 86401.0, -1.0, float("nan"), float("inf")])
def test_a_time_that_cannot_be_is_not_taken(rig: Rig, seconds: float) -> None:
    with pytest.raises(JournalError, match="from 1 min to 1 day"):
        rig.shell.record(Shelve(DUE, seconds))


def test_a_late_entry_leaves_it_put_off_for_the_same_time(rig: Rig) -> None:
    """The model goes back before the shelving, and takes it in once more."""
    run(rig, 3)
    rig.shell.record(Shelve("riser-drain-due", 1200.0, "AM"))
    run(rig, 2)
    before = rig.state.alarms["riser-drain-due"]
    rig.shell.record(Drain("tank", volume_kg=0.1, by="AM"), BEGUN_US + MINUTE_US)
    run(rig, 1)
    after = rig.state.alarms["riser-drain-due"]
    assert rig.state.traps["tank"].last_drain_us == BEGUN_US + MINUTE_US
    assert (after.state, after.until_us) == ("shelved", before.until_us)
    assert told(rig, "riser-drain-due") == [("normal", "shelved")]
