"""The live shell: replay equals live to the bit, also after kills and late entries."""

from __future__ import annotations

import threading
from collections.abc import Iterator, Sequence
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from daemon.advance import Core
from daemon.checkpoint import encode
from daemon.clock import HOUR_US, MINUTE_US, SECOND_US
from daemon.errors import JournalError
from daemon.journal import Acknowledge, Body, Drain, Entry
from daemon.replay import replay
from daemon.shell import Shell
from daemon.state import CoreState
from daemon.store.store import Store
from sensors.reading import Reading
from sensors.sampling import HungBus
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, flat, site, working

SHOP = site()


class HandClock:
    """A clock that a test sets; waiting makes it go on by what was waited for."""

    def __init__(self, now_us: int) -> None:
        self.wall_us = now_us
        self.seconds = 0.0

    def now_us(self) -> int:
        return self.wall_us

    def monotonic(self) -> float:
        return self.seconds

    def wait(self, seconds: float, stop: threading.Event) -> bool:
        self.seconds += seconds
        self.wall_us += round(seconds * 1e6)
        return stop.is_set()


class Played:
    """A sampler that plays a record; a tick without one has no readings."""

    def __init__(self, record: Sequence[tuple[int, list[Reading]]]) -> None:
        self.record = dict(record)

    def sample(self, now_us: int, deadline_s: float) -> list[Reading]:
        return self.record.get(now_us, [])

    def hung_buses(self) -> tuple[HungBus, ...]:
        return ()


class Rig:
    """A daemon that can be killed: what is not in its store is gone."""

    def __init__(self, path: Path, record: Sequence[tuple[int, list[Reading]]]) -> None:
        self.path, self.sampler = path, Played(record)
        self.clock = HandClock(BEGUN_US)
        self.open()

    def open(self) -> None:
        self.store = Store.open(self.path, SHOP.channels)
        self.shell = Shell(SHOP, self.clock, self.sampler, self.store)
        self.shell.recover()

    def kill(self) -> None:
        self.store.close()
        self.open()

    def tick(self, now_us: int) -> None:
        self.clock.wall_us = now_us
        self.shell.tick(now_us)

    @property
    def state(self) -> CoreState:
        state = self.shell._state
        assert state is not None
        return state


@pytest.fixture
def rig(tmp_path: Path) -> Iterator[Rig]:
    made = Rig(tmp_path / "birch-works.db", list(working(SHOP, 900)))
    yield made
    made.store.close()


def bits(state: CoreState) -> bytes:
    return encode(state, "")


def entry(seq: int, at_us: int, body: Body) -> Entry:
    return Entry(seq, at_us, at_us, body)


@settings(
    max_examples=12, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(
    st.integers(20, 420),
    st.sets(st.integers(1, 400), max_size=4),
    st.lists(st.tuples(st.integers(2, 400), st.integers(0, 380)), max_size=3),
)
def test_replay_equals_live_to_the_bit_whatever_happens(
    tmp_path_factory: pytest.TempPathFactory,
    length: int,
    kills: set[int],
    drains: list[tuple[int, int]],
) -> None:
    """Kills at any tick, and drains reported up to an hour late, leave the bits of a replay."""
    record = list(working(SHOP, length))
    rig = Rig(tmp_path_factory.mktemp("rig") / "a.db", record)
    entries = []
    for number, (now_us, _) in enumerate(record):
        for at_tick, late in drains:
            if at_tick == number:
                at_us = max(BEGUN_US + 1, now_us - late * PERIOD_US - 3 * SECOND_US)
                rig.clock.wall_us = now_us - SECOND_US
                recorded = rig.shell.record(Drain("tank", volume_kg=0.05, by="AM"), at_us)
                entries.append(recorded.entry)
        if number in kills:
            rig.kill()
        rig.tick(now_us)
    entries.sort(key=lambda each: (each.at_us, each.seq))
    replayed = replay(Core(SHOP), flat(record), entries)
    live = rig.state
    rig.store.close()
    assert bits(live) == bits(replayed.state)


def test_a_daemon_that_was_away_goes_on_as_a_replay_of_the_gap(rig: Rig) -> None:
    record = list(working(SHOP, 900))
    heard = record[:100] + record[700:800]
    rig.sampler = Played(heard)
    rig.shell._sampler = rig.sampler
    for now_us, _ in record[:100]:
        rig.tick(now_us)
    rig.kill()
    for now_us, _ in record[700:800]:
        rig.tick(now_us)
    assert bits(rig.state) == bits(replay(Core(SHOP), flat(heard), []).state)


def test_a_drain_empties_the_trap_at_once_for_whoever_looks(rig: Rig) -> None:
    for number in range(400):
        rig.tick(BEGUN_US + number * PERIOD_US)
    before = rig.shell.traps()[0]
    rig.clock.wall_us += SECOND_US
    rig.shell.record(Drain("tank", by="AM"))
    after = rig.shell.traps()[0]
    assert before.p50_kg > 0.02
    assert after.p95_kg < 0.002
    assert after.since == "last drain"


def test_a_drain_reported_late_counts_from_when_it_was(rig: Rig) -> None:
    for number in range(720):
        rig.tick(BEGUN_US + number * PERIOD_US)
    rig.shell.record(Drain("tank"), BEGUN_US + HOUR_US + 5 * MINUTE_US)
    rig.tick(BEGUN_US + 720 * PERIOD_US)
    view = rig.shell.traps()[0]
    assert view.last_drain_us == BEGUN_US + HOUR_US + 5 * MINUTE_US
    assert 0.005 < view.p50_kg < 0.03


def test_the_same_key_is_one_drain(rig: Rig) -> None:
    rig.tick(BEGUN_US)
    first = rig.shell.record(Drain("tank"), key="tap-1")
    again = rig.shell.record(Drain("tank"), key="tap-1")
    assert (first.repeated, again.repeated) == (False, True)
    assert again.entry.seq == first.entry.seq


@pytest.mark.parametrize(
    ("body", "minutes", "words"),
    [
        (Drain("tnak"), 0, '"tnak" is not a trap of this site'),
        (Drain("tank", volume_kg=-0.1), 0, "-100 ml cannot be"),
        (Drain("tank", volume_kg=31.0), 0, "more than twice what tank can hold"),
        (Drain("tank", "empty", 0.2), 0, "contradicts itself"),
        (Drain("tank", look="purple"), 0, 'look "purple" is not one of clear'),
        (Drain("tank"), 10, "ahead of the daemon's clock"),
        (Drain("tank"), -10, "before the record begins"),
        (Acknowledge("tank-drain-due", by="x" * 41), 0, "at most 40"),
    ],
)
def test_an_entry_that_cannot_be_is_refused_in_words(
    rig: Rig, body: Body, minutes: int, words: str
) -> None:
    rig.tick(BEGUN_US)
    with pytest.raises(JournalError, match=words):
        rig.shell.record(body, BEGUN_US + minutes * MINUTE_US)


def test_a_clock_set_back_does_not_stop_the_sampling(rig: Rig) -> None:
    stop = threading.Event()
    ticked: list[int] = []
    tick = rig.shell.tick

    def counted(now_us: int) -> None:
        tick(now_us)
        ticked.append(now_us)
        if len(ticked) == 5:
            rig.clock.wall_us -= HOUR_US
        if len(ticked) == 12:
            stop.set()

    rig.shell.tick = counted  # type: ignore[method-assign]
    rig.shell.run(stop)
    assert ticked == [BEGUN_US + number * PERIOD_US for number in range(12)]
    assert any("set back" in problem for problem in rig.shell.health().problems)


def test_a_sensor_that_falls_silent_is_on_record_and_costs_certainty(tmp_path: Path) -> None:
    record = [
        (
            now_us,
            [
                each
                for each in readings
                if now_us < BEGUN_US + HOUR_US or not each.channel.startswith("intake-air")
            ],
        )
        for now_us, readings in working(SHOP, 1080)
    ]
    whole = replay(Core(SHOP), flat(list(working(SHOP, 1080))), [])
    result = replay(Core(SHOP), flat(record), [])
    raised = [each for each in result.transitions if each.alarm == "intake-air-sensor-fault"]
    assert [each.after for each in raised] == ["unacknowledged"]
    assert "has said nothing for 3 periods" in raised[0].text

    def width(state: CoreState) -> float:
        water_in = np.percentile(state.model.ledger.water_in, [5, 95])
        return float(water_in[1] - water_in[0])

    assert width(result.state) > 1.5 * width(whole.state)


def test_traps_keep_what_they_hold_when_the_site_file_changes(tmp_path: Path) -> None:
    path = tmp_path / "birch-works.db"
    rig = Rig(path, list(working(SHOP, 400)))
    for number in range(360):
        rig.tick(BEGUN_US + number * PERIOD_US)
    held = rig.shell.core.model.contents(rig.state.model)[1]
    rig.shell.checkpoint()
    rig.store.close()
    changed = site(SITE.replace('set = "3 bar"', 'set = "4 bar"'))
    store = Store.open(path, changed.channels)
    shell = Shell(changed, rig.clock, rig.sampler, store)
    shell.recover()
    shell.tick(BEGUN_US + 360 * PERIOD_US)
    state = shell._state
    store.close()
    assert state is not None
    assert np.array_equal(shell.core.model.contents(state.model)[1], held)
