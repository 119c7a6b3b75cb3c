"""Taking back a drain: within ten minutes, by the same initials, as if it had never been."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from daemon.clock import MINUTE_US, SECOND_US
from daemon.errors import JournalError, UndoError
from daemon.journal import Acknowledge, Drain, Undo, body_from_json, body_to_json
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, site
from tests.daemon.test_recovery import Daemon, replayed
from tests.daemon.test_shell import bits


@pytest.fixture
def daemon(tmp_path: Path) -> Iterator[Daemon]:
    made = Daemon(tmp_path / "birch-works.db", 400)
    yield made
    made.store.close()


def drained(daemon: Daemon, by: str = "AM", trap: str = "tank", kg: float | None = 0.38) -> int:
    """A drain recorded a second after the last tick; its number."""
    daemon.clock.wall_us += SECOND_US
    return daemon.shell.record(Drain(trap, volume_kg=kg, by=by)).entry.seq


def undo(daemon: Daemon, seq: int, by: str = "AM", trap: str = "tank") -> None:
    daemon.clock.wall_us += SECOND_US
    daemon.shell.record(Undo(trap, seq, by))


def medians(daemon: Daemon) -> list[float]:
    return [view.p50_kg for view in daemon.shell.traps()]


def test_a_drain_that_is_taken_back_leaves_the_bits_of_one_that_never_was(daemon: Daemon) -> None:
    daemon.tick(*range(200))
    seq = drained(daemon)
    daemon.tick(*range(200, 230))
    undo(daemon, seq)
    assert daemon.state.time_us == BEGUN_US + 229 * PERIOD_US
    daemon.tick(*range(230, 260))
    assert bits(daemon.state) == replayed(daemon, 260)


def test_what_is_shown_is_as_before_at_once(daemon: Daemon) -> None:
    daemon.tick(*range(200))
    before = medians(daemon)
    seq = drained(daemon)
    daemon.tick(200)
    assert medians(daemon)[0] < 0.01
    undo(daemon, seq)
    assert medians(daemon)[0] == pytest.approx(before[0], rel=0.02)


def test_a_drain_that_no_tick_has_taken_in_is_taken_back_too(daemon: Daemon) -> None:
    daemon.tick(*range(100))
    before = medians(daemon)
    undo(daemon, drained(daemon))
    assert medians(daemon) == before
    daemon.tick(*range(100, 110))
    assert bits(daemon.state) == replayed(daemon, 110)


@pytest.mark.parametrize("ticks_after", [0, 1, 9])
@pytest.mark.parametrize("clean", [True, False])
def test_it_stays_taken_back_after_a_stop_or_a_kill(
    daemon: Daemon, ticks_after: int, clean: bool
) -> None:
    daemon.tick(*range(380))  # a full hour lies at tick 360
    seq = drained(daemon)
    daemon.tick(*range(380, 390))
    undo(daemon, seq)
    last = 390 + ticks_after
    daemon.tick(*range(390, last))
    (daemon.stop if clean else daemon.kill)()
    daemon.start()
    daemon.tick(last)
    assert bits(daemon.state) == replayed(daemon, last + 1)


def test_a_kill_before_anything_was_gone_back_to_still_takes_it_back(daemon: Daemon) -> None:
    """The entry is committed, and the power fails before the model has gone back."""
    daemon.tick(*range(100))
    seq = drained(daemon)
    daemon.tick(*range(100, 110))
    daemon.shell.checkpoint()
    at_us = daemon.state.time_us + SECOND_US
    daemon.store.add_entry(Undo("tank", seq, "AM"), at_us, at_us)
    daemon.kill()
    daemon.start()
    daemon.tick(110)
    assert bits(daemon.state) == replayed(daemon, 111)


def test_other_entries_of_that_time_stay(daemon: Daemon) -> None:
    daemon.tick(*range(100))
    seq = drained(daemon)
    other = daemon.shell.record(Drain("bowl", by="AM")).entry
    daemon.tick(*range(100, 110))
    undo(daemon, seq)
    daemon.tick(*range(110, 120))
    assert bits(daemon.state) == replayed(daemon, 120, other)


def test_what_was_announced_stays_and_a_correction_follows(tmp_path: Path) -> None:
    text = SITE.replace('drain_at = "600 ml"', 'drain_at = "600 ml", holds_at_start = "650 ml"')
    daemon = Daemon(tmp_path / "a.db", 200, site(text))
    daemon.tick(*range(100))
    assert daemon.alarm("tank-drain-due") == "unacknowledged"
    seq = drained(daemon, kg=None)
    daemon.tick(*range(100, 105))
    assert daemon.alarm("tank-drain-due") == "normal"
    undo(daemon, seq)
    assert daemon.alarm("tank-drain-due") == "unacknowledged"
    daemon.tick(105)
    changes = [
        (each.before, each.after, each.text)
        for each in daemon.store.transitions(BEGUN_US, daemon.state.time_us + 1)
        if each.alarm == "tank-drain-due"
    ]
    assert ("acknowledged", "normal") in [each[:2] for each in changes]
    before, after, words = changes[-1]
    assert (before, after) == ("normal", "unacknowledged")
    assert words.startswith("Corrected after a late entry.")
    daemon.store.close()


@pytest.mark.parametrize("clean", [True, False])
def test_the_correction_follows_also_after_a_stop_in_between(tmp_path: Path, clean: bool) -> None:
    text = SITE.replace('drain_at = "600 ml"', 'drain_at = "600 ml", holds_at_start = "650 ml"')
    daemon = Daemon(tmp_path / "a.db", 200, site(text))
    daemon.tick(*range(100))
    seq = drained(daemon, kg=None)
    daemon.tick(*range(100, 105))
    undo(daemon, seq)
    (daemon.stop if clean else daemon.kill)()
    daemon.start()
    daemon.tick(105)
    last = [
        each
        for each in daemon.store.transitions(BEGUN_US, daemon.state.time_us + 1)
        if each.alarm == "tank-drain-due"
    ][-1]
    assert (last.before, last.after) == ("normal", "unacknowledged")
    daemon.store.close()


def test_the_drain_stays_in_the_record_with_who_took_it_back(daemon: Daemon) -> None:
    daemon.tick(*range(20))
    seq = drained(daemon)
    undo(daemon, seq)
    (listed,) = daemon.shell.drains("tank", BEGUN_US, BEGUN_US + 60 * MINUTE_US)
    assert listed.seq == seq
    assert daemon.shell.undoings()[seq].body == Undo("tank", seq, "AM")
    assert daemon.store.entries() == []
    assert len(daemon.store.entries(every=True)) == 2


def test_taking_it_back_twice_is_taking_it_back_once(daemon: Daemon) -> None:
    daemon.tick(*range(20))
    seq = drained(daemon)
    first = daemon.shell.record(Undo("tank", seq, "AM"))
    daemon.clock.wall_us += 20 * MINUTE_US  # the answer was lost, and the phone asks again
    again = daemon.shell.record(Undo("tank", seq, "am"))
    assert (first.repeated, again.repeated) == (False, True)
    assert again.entry == first.entry


def test_somebody_else_cannot_take_it_back(daemon: Daemon) -> None:
    daemon.tick(*range(20))
    seq = drained(daemon)
    words = 'it was recorded with "AM", and the undo came with "BK": the same initials are asked'
    with pytest.raises(UndoError, match=words):
        undo(daemon, seq, by="BK")
    daemon.tick(20)
    assert medians(daemon)[0] < 0.01


def test_capitals_and_blanks_are_no_other_person(daemon: Daemon) -> None:
    daemon.tick(*range(20))
    undo(daemon, drained(daemon, by="AM"), by=" am ")
    assert daemon.store.entries() == []


def test_after_ten_minutes_it_is_too_late(daemon: Daemon) -> None:
    daemon.tick(*range(20))
    seq = drained(daemon)
    daemon.clock.wall_us += 10 * MINUTE_US
    with pytest.raises(UndoError, match=r"recorded 10 minutes ago.*: drain tank again and record"):
        undo(daemon, seq)


def test_ten_minutes_count_from_when_it_was_recorded(daemon: Daemon) -> None:
    """A tap that waited on a phone without network can be taken back once it has arrived."""
    daemon.tick(*range(200))
    at_us = BEGUN_US + 50 * PERIOD_US + SECOND_US
    late = daemon.shell.record(Drain("tank", by="AM"), at_us).entry
    daemon.tick(*range(200, 205))
    undo(daemon, late.seq)
    daemon.tick(*range(205, 210))
    assert bits(daemon.state) == replayed(daemon, 210)


def test_only_a_drain_of_that_trap_can_be_taken_back(daemon: Daemon) -> None:
    daemon.tick(*range(20))
    seen = daemon.shell.record(Acknowledge("tank-drain-due", "AM")).entry.seq
    seq = drained(daemon)
    for number, trap in ((seen, "tank"), (seq, "bowl"), (99, "tank")):
        with pytest.raises(UndoError, match=f"entry {number} is no drain of {trap}"):
            undo(daemon, number, trap=trap)
    with pytest.raises(JournalError, match='"barrel" is not a trap of this site'):
        undo(daemon, seq, trap="barrel")


def test_what_lies_before_all_that_is_kept_cannot_be_taken_back(daemon: Daemon) -> None:
    """Recorded before the first tick, it was part of how the record began."""
    seq = daemon.shell.record(Drain("tank", by="AM"), BEGUN_US).entry.seq
    daemon.tick(*range(5))
    with pytest.raises(UndoError, match="keeps nothing from before it"):
        undo(daemon, seq)
    assert [entry.seq for entry in daemon.store.entries()] == [seq]


def test_an_undo_goes_through_the_journal_s_text() -> None:
    body = Undo("tank", 41, "AM")
    assert body_from_json(body_to_json(body)) == body
