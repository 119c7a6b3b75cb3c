"""The store through its one object: ticks, journal, checkpoints, transitions, outbox, threads."""

from __future__ import annotations

import math
import threading
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import pytest

from daemon.alarms import Transition
from daemon.clock import DAY_US, HOUR_US, SECOND_US, parse_rfc3339
from daemon.errors import JournalError, StoreError
from daemon.journal import Acknowledge, Drain
from daemon.outbox import Message
from daemon.store.store import Store
from sensors.reading import Channel, Reading, in_steps

T0 = parse_rfc3339("2026-03-02T07:00:00Z")
TICK = 10 * SECOND_US

PRESSURE = Channel("tank-gauge.pressure", "pressure", 10.0, 0.0, 1.2e6, 6000.0, gauge=True)
TEMPERATURE = Channel("pipe-end.temperature", "temperature", 0.01, 218.15, 398.15, 0.5)
MOTOR = Channel("motor.contact", "contact", 1.0, 0.0, 1.0, 0.0)
CHANNELS = {channel.name: channel for channel in (PRESSURE, TEMPERATURE, MOTOR)}


def readings_at(number: int) -> list[Reading]:
    """Invented readings of tick `number`, each channel at a time of its own."""
    now = T0 + number * TICK
    return [
        Reading(PRESSURE.name, in_steps(6.1e5 + 137.0 * number, PRESSURE.step), now - 2500),
        Reading(TEMPERATURE.name, in_steps(293.15 + 0.013 * number, TEMPERATURE.step), now - 1),
        Reading(MOTOR.name, float(number % 2), now),
    ]


def transition(number: int = 1, at_us: int = T0) -> Transition:
    return Transition(
        id=f"tank-drain-due/{number}",
        at_us=at_us,
        alarm="tank-drain-due",
        kind="drain-due",
        source="tank",
        before="normal",
        after="unacknowledged",
        priority="medium",
        text="tank: 610 ml (500-720), drain it",
        by="",
    )


def event(number: int) -> Message:
    return Message("dripleg/alder-yard/events", b'{"n": 1}', id=f"tank-drain-due/{number}")


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "dripleg.db"


@pytest.fixture
def store(path: Path) -> Iterator[Store]:
    with Store.open(path, CHANNELS) as opened:
        yield opened


# --- ticks and readings


def test_ticks_come_back_in_order_as_they_were_given(store: Store) -> None:
    for number in range(5):
        store.commit_tick(T0 + number * TICK, readings_at(number))
    assert list(store.ticks(T0, T0 + 3 * TICK)) == [
        (T0 + number * TICK, readings_at(number)) for number in (1, 2, 3)
    ]


def test_ticks_and_readings_survive_closing(path: Path) -> None:
    with Store.open(path, CHANNELS) as store:
        store.commit_tick(T0, readings_at(0))
    with Store.open(path, CHANNELS) as store:
        assert store.last_tick_us == T0
        assert list(store.ticks(T0 - 1, T0)) == [(T0, readings_at(0))]


def test_a_stream_of_ticks_reads_on_while_ticks_are_added(store: Store) -> None:
    for number in range(1100):
        store.commit_tick(T0 + number * TICK, [])
    stream = store.ticks(T0 - 1, T0 + HOUR_US * 24)
    first = next(stream)
    store.commit_tick(T0 + 1100 * TICK, readings_at(0))
    times = [first[0], *(time_us for time_us, _ in stream)]
    assert times == [T0 + number * TICK for number in range(1101)]


def test_a_tick_that_is_not_after_the_last_one_is_refused(store: Store) -> None:
    store.commit_tick(T0, readings_at(0))
    with pytest.raises(StoreError, match=r"2026-03-02T07:00:00Z.*ticks go forward only"):
        store.commit_tick(T0, readings_at(0))


def test_readings_are_chosen_by_their_own_times_the_end_left_out(store: Store) -> None:
    for number in range(4):
        store.commit_tick(T0 + number * TICK, readings_at(number))
    own = [reading for number in range(4) for reading in readings_at(number)[:1]]
    series = store.readings(PRESSURE.name, own[1].time_us, own[3].time_us)
    assert series.times_us.tolist() == [own[1].time_us, own[2].time_us]
    assert series.values.tolist() == [own[1].value, own[2].value]
    assert series.faults == ("", "")


def test_a_reading_far_older_than_its_tick_is_found_also_after_a_restart(path: Path) -> None:
    old = Reading(PRESSURE.name, 500.0, T0 - 3 * HOUR_US)
    with Store.open(path, CHANNELS) as store:
        store.commit_tick(T0, [old])
        assert store.readings(PRESSURE.name, old.time_us, old.time_us + 1).values.tolist() == [500]
    with Store.open(path, CHANNELS) as store:
        assert store.readings(PRESSURE.name, old.time_us, old.time_us + 1).values.tolist() == [500]


def test_bad_readings_keep_their_reason(store: Store) -> None:
    store.commit_tick(T0, [Reading(PRESSURE.name, math.nan, T0, "no answer")])
    store.commit_tick(T0 + TICK, readings_at(1))
    series = store.readings(PRESSURE.name, T0, T0 + 2 * TICK)
    assert series.faults == ("no answer", "")
    assert math.isnan(series.values[0])
    assert series.values[1] == readings_at(1)[0].value


def test_a_channel_that_never_spoke_has_no_readings(store: Store) -> None:
    store.commit_tick(T0, readings_at(0))
    assert len(store.readings("gun.pressure", T0 - TICK, T0 + TICK).times_us) == 0


def test_readings_outlive_a_change_of_the_site_s_channels(path: Path) -> None:
    with Store.open(path, CHANNELS) as store:
        store.commit_tick(T0, readings_at(0))
    finer = Channel(PRESSURE.name, "pressure", 0.1, 0.0, 1.2e6, 6000.0, gauge=True)
    added = Channel("booth-air.temperature", "temperature", 0.01, 233.15, 358.15, 1.0)
    with Store.open(path, {c.name: c for c in (added, MOTOR, finer)}) as store:
        new = [
            Reading(added.name, in_steps(290.0, 0.01), T0 + TICK),
            Reading(finer.name, in_steps(6.1e5 / 3, 0.1), T0 + TICK),
        ]
        store.commit_tick(T0 + TICK, new)
        assert [found for _, found in store.ticks(T0 - 1, T0 + TICK)] == [readings_at(0), new]
        series = store.readings(PRESSURE.name, T0 - TICK, T0 + 2 * TICK)
        assert series.values.tolist() == [readings_at(0)[0].value, new[1].value]
        assert len(store.readings(TEMPERATURE.name, T0 - TICK, T0 + 2 * TICK).values) == 1


def test_a_step_of_nothing_is_refused(path: Path) -> None:
    channel = Channel("x.contact", "contact", 0.0, 0.0, 1.0, 0.0)
    with pytest.raises(StoreError, match=r"'x\.contact' has the step 0: it must be above 0"):
        Store.open(path, {channel.name: channel})


def test_a_tick_is_stored_whole_or_not_at_all(store: Store) -> None:
    unknown = Reading("gun.pressure", 1.0, T0)
    twice = [transition(1), transition(1)]
    with pytest.raises(StoreError, match="opened without this channel"):
        store.commit_tick(T0, [unknown], twice, [event(1)], b"state")
    broken = Message("t", "not bytes")  # type: ignore[arg-type] # what a mistake would bring
    with pytest.raises(StoreError):
        store.commit_tick(T0, readings_at(0), [transition(1)], [event(1), broken], b"state")
    assert list(store.ticks(T0 - 1, T0)) == []
    assert list(store.transitions(T0, T0 + 1)) == []
    assert store.checkpoint_before(T0) is None
    assert store.outbox_waiting() == 0
    store.commit_tick(T0, readings_at(0), [transition(1)], [event(1)], b"state")
    assert store.checkpoint_before(T0) == (T0, b"state")


# --- transitions and outbox


def test_transitions_come_back_as_they_were(store: Store) -> None:
    later = transition(2, T0 + TICK)
    store.commit_tick(T0, [], [transition(1)])
    store.commit_tick(T0 + TICK, [], [later])
    assert list(store.transitions(T0, T0 + TICK)) == [transition(1)]
    assert list(store.transitions(T0, T0 + TICK + 1)) == [transition(1), later]


def test_a_transition_stored_before_is_neither_stored_nor_announced_again(store: Store) -> None:
    store.commit_tick(T0, [], [transition(1)], [event(1)])
    store.mark_sent([waiting.number for waiting in store.pending(10)])
    store.commit_tick(T0 + TICK, [], [transition(1), transition(2)], [event(1), event(2)])
    assert [found.id for found in store.transitions(T0, T0 + 1)] == [
        "tank-drain-due/1",
        "tank-drain-due/2",
    ]
    assert [waiting.message for waiting in store.pending(10)] == [event(2)]


def test_the_outbox_gives_the_oldest_first_and_counts(store: Store) -> None:
    state = Message("dripleg/alder-yard/alarms/a", b"\xff\x00", qos=0, retain=True)
    store.commit_tick(T0, [], [], [event(1), state, state, event(2)])
    waiting = store.pending(10)
    assert [each.message for each in waiting] == [event(1), state, state, event(2)]
    assert [each.number for each in waiting] == sorted({each.number for each in waiting})
    assert store.pending(2) == waiting[:2]
    assert store.pending(2, after_number=waiting[1].number) == waiting[2:]
    assert store.outbox_waiting() == 4
    store.mark_sent([waiting[0].number, waiting[2].number])
    assert store.pending(10) == [waiting[1], waiting[3]]


def test_a_number_of_the_outbox_is_never_given_twice(store: Store) -> None:
    store.commit_tick(T0, [], [], [event(1)])
    (first,) = store.pending(10)
    store.mark_sent([first.number])
    store.commit_tick(T0 + TICK, [], [], [event(2)])
    (second,) = store.pending(10)
    assert second.number > first.number


# --- journal


def test_entries_are_numbered_as_they_are_written(store: Store) -> None:
    drain = Drain("tank", "partly", 0.38, "AM", "milky")
    first = store.add_entry(drain, T0, T0 + 1)
    second = store.add_entry(Acknowledge("tank-drain-due", "AM"), T0 - HOUR_US, T0 + 2)
    assert (first.entry.seq, second.entry.seq) == (1, 2)
    assert not first.repeated
    assert list(store.entries()) == [first.entry, second.entry]
    assert first.entry.body == drain
    assert list(store.entries(after_seq=1)) == [second.entry]


def test_entries_are_chosen_by_when_they_happened_and_by_trap(store: Store) -> None:
    for number, trap in enumerate(("tank", "riser", "tank")):
        store.add_entry(Drain(trap), T0 + number, T0 + 10)
    store.add_entry(Acknowledge("tank"), T0, T0 + 10)  # an alarm of the same name is no drain
    assert [entry.seq for entry in store.entries(trap="tank")] == [1, 3]
    assert [entry.seq for entry in store.entries(from_us=T0 + 1, to_us=T0 + 2)] == [2]


def test_a_key_sent_again_gives_the_first_entry(store: Store) -> None:
    first = store.add_entry(Drain("tank", volume_kg=0.38), T0, T0, key="a1")
    again = store.add_entry(Drain("tank", volume_kg=0.38), T0 + 7, T0 + 7, key="a1")
    assert again.repeated
    assert again.entry == first.entry
    assert len(store.entries()) == 1


def test_a_key_sent_again_with_other_content_is_refused(store: Store) -> None:
    store.add_entry(Drain("tank", volume_kg=0.38), T0, T0, key="a1")
    with pytest.raises(JournalError, match=r"key 'a1' was used before.*0\.38.*0\.39"):
        store.add_entry(Drain("tank", volume_kg=0.39), T0, T0, key="a1")
    assert len(store.entries()) == 1


def test_entries_without_a_key_are_never_taken_for_one(store: Store) -> None:
    store.add_entry(Drain("tank"), T0, T0)
    assert not store.add_entry(Drain("tank"), T0, T0).repeated


# --- checkpoints


def test_the_newest_checkpoint_at_or_before_a_time_is_found(store: Store) -> None:
    store.save_checkpoint(T0, b"a")
    store.save_checkpoint(T0 + HOUR_US, b"b")
    assert store.checkpoint_before(T0 - 1) is None
    assert store.checkpoint_before(T0 + HOUR_US - 1) == (T0, b"a")
    assert store.checkpoint_before(T0 + HOUR_US) == (T0 + HOUR_US, b"b")


def test_a_checkpoint_of_the_same_time_takes_the_place_of_the_first(store: Store) -> None:
    store.save_checkpoint(T0, b"a")
    store.save_checkpoint(T0, b"b")
    assert store.checkpoint_before(T0) == (T0, b"b")


def test_checkpoints_after_a_late_entry_can_be_dropped(store: Store) -> None:
    for hour in range(3):
        store.save_checkpoint(T0 + hour * HOUR_US, bytes([hour]))
    store.drop_checkpoints_after(T0 + HOUR_US)
    assert store.checkpoint_before(T0 + DAY_US) == (T0 + HOUR_US, b"\x01")


def test_eight_days_of_checkpoints_are_kept_and_one_before_them(store: Store) -> None:
    for half_days in range(2 * 20 + 1):
        store.save_checkpoint(T0 + half_days * DAY_US // 2, b"x")
    now = T0 + 20 * DAY_US
    assert store.checkpoint_before(now - 8 * DAY_US) == (now - 8 * DAY_US, b"x")
    assert store.checkpoint_before(now - 8 * DAY_US - 1) is None


def test_a_long_stop_leaves_a_checkpoint_to_go_back_to(store: Store) -> None:
    store.save_checkpoint(T0, b"a")
    store.save_checkpoint(T0 + HOUR_US, b"b")
    store.save_checkpoint(T0 + 30 * DAY_US, b"c")
    assert store.checkpoint_before(T0 + 25 * DAY_US) == (T0 + HOUR_US, b"b")
    assert store.checkpoint_before(T0) is None


# --- named values, threads


def test_named_values_are_kept(path: Path) -> None:
    with Store.open(path, CHANNELS) as store:
        assert store.get_meta("grid.origin_us") is None
        store.set_meta("grid.origin_us", "5")
        store.set_meta("grid.origin_us", "6")
    with Store.open(path, CHANNELS) as store:
        assert store.get_meta("grid.origin_us") == "6"


def test_threads_share_one_store(store: Store) -> None:
    ticks, each = 200, 50
    begin = threading.Barrier(6)

    def tick() -> None:
        begin.wait(10)
        for number in range(ticks):
            store.commit_tick(T0 + number * TICK, readings_at(number), [], [event(number)])

    def record(writer: int) -> list[int]:
        begin.wait(10)
        return [
            store.add_entry(Drain("tank", by=str(writer)), T0, T0, key=f"{writer}/{n}").entry.seq
            for n in range(each)
        ]

    def read() -> None:
        begin.wait(10)
        seen = 0
        while seen < ticks:
            found = len(store.readings(MOTOR.name, T0, T0 + ticks * TICK).values)
            assert found >= seen
            seen = found

    def send() -> int:
        begin.wait(10)
        sent = 0
        while sent < ticks:
            numbers = [waiting.number for waiting in store.pending(20)]
            store.mark_sent(numbers)
            sent += len(numbers)
        return sent

    with ThreadPoolExecutor(6) as pool:
        writers = [pool.submit(record, writer) for writer in range(3)]
        ticking, reading, sending = pool.submit(tick), pool.submit(read), pool.submit(send)
        numbers = [writer.result(60) for writer in writers]
        ticking.result(60)
        reading.result(60)
        assert sending.result(60) == ticks
    assert all(own == sorted(own) for own in numbers)
    assert sorted(seq for own in numbers for seq in own) == list(range(1, 3 * each + 1))
    assert store.outbox_waiting() == 0


def test_one_key_from_many_threads_makes_one_entry(store: Store) -> None:
    begin = threading.Barrier(8)

    def record(_: int) -> bool:
        begin.wait(10)
        return store.add_entry(Drain("tank"), T0, T0, key="same").repeated

    with ThreadPoolExecutor(8) as pool:
        repeated = list(pool.map(record, range(8)))
    assert sorted(repeated) == [False] + [True] * 7


def test_a_closed_store_says_so(path: Path) -> None:
    store = Store.open(path, CHANNELS)
    store.close()
    store.close()
    with pytest.raises(StoreError, match="was closed"):
        store.outbox_waiting()
    with pytest.raises(StoreError, match="was closed"):
        store.commit_tick(T0, [])
