"""What the link tells the broker: events, its own state, the states of traps."""

from __future__ import annotations

import json
import logging
import signal
from pathlib import Path

import pytest

from daemon.mqtt import Timing
from daemon.store.store import Store
from tests.daemon.broker import TIMEOUT_S, Broker, Heard, Listener, free_port
from tests.daemon.linking import (
    BASE,
    EVENTS,
    SERVICE,
    WatchedStore,
    child,
    linked,
    numbers,
    queue,
    state,
)
from tests.daemon.played_broker import PlayedBroker

# --- events


def test_events_arrive_once_and_in_order_and_leave_the_outbox(broker: Broker, store: Store) -> None:
    queue(store, 0, 250)  # more than a window
    with Listener(broker.port, EVENTS) as listener, linked(broker.port, store) as link:
        listener.wait_for_number(250)
        queue(store, 250, 300)
        link.wake()
        heard = listener.wait_for_number(300)
        link.stop()
    assert numbers(heard) == list(range(300))
    assert store.outbox_waiting() == 0


def test_events_arrive_also_when_nobody_wakes_the_link(broker: Broker, store: Store) -> None:
    with Listener(broker.port, EVENTS) as listener, linked(broker.port, store) as link:
        assert link.wait_for("connected", TIMEOUT_S)
        queue(store, 0, 1)
        assert numbers(listener.wait_for_number(1)) == [0]


def test_events_wait_for_a_broker_that_is_not_there_yet(
    broker: Broker, store: Store, caplog: pytest.LogCaptureFixture
) -> None:
    with Listener(broker.port, EVENTS, "listener"):
        pass
    broker.stop()
    queue(store, 0, 3)
    with caplog.at_level(logging.INFO, "dripleg.mqtt"), linked(broker.port, store) as link:
        assert not link.wait_for("connected", 0.3)
        assert link.problem == "connection refused"
        assert store.outbox_waiting() == 3
        broker.start()
        with Listener(broker.port, EVENTS, "listener") as listener:
            heard = listener.wait_for_number(3)
        assert link.wait_for("connected", TIMEOUT_S)
        assert link.problem == ""
    assert numbers(heard) == [0, 1, 2]
    told = [record.message for record in caplog.records]
    assert "connection refused" in told[0]
    assert "messages wait in the database" in told[0]
    assert told[1:] == [f"connected to the broker at 127.0.0.1:{broker.port}"]


def test_a_killed_broker_loses_nothing_that_was_not_acknowledged(
    broker: Broker, store: WatchedStore
) -> None:
    with Listener(broker.port, EVENTS, "listener") as listener, linked(broker.port, store) as link:
        queue(store, 0, 50)
        link.wake()
        store.wait_until_sent()
        listener.wait_for_number(50)
        broker.save()  # so that it knows its listener after the kill
        broker.freeze()
        queue(store, 50, 100)
        link.wake()
        broker.kill()
        assert link.wait_for("not connected", TIMEOUT_S)
        assert store.outbox_waiting() == 50
        broker.start()
        listener.wait_for(lambda heard: set(numbers(heard)) == set(range(100)))
        link.stop()
    # of the first 50 the broker may tell the listener some again, from before its kill
    assert [number for number in numbers(listener.heard) if number >= 50] == list(range(50, 100))
    assert store.outbox_waiting() == 0


def test_a_killed_daemon_with_a_thousand_events_loses_none(broker: Broker, tmp_path: Path) -> None:
    path = tmp_path / "killed.db"
    script = (
        "with Store.open(sys.argv[1], {}) as store, linked(int(sys.argv[2]), store):\n"
        "    queue(store, 0, 1000)\n"
        "    print('ready', flush=True)\n"
        "    sys.stdin.read()\n"
    )
    with child(script, path, free_port()) as daemon:
        daemon.kill()
        daemon.wait(TIMEOUT_S)
    with (
        Listener(broker.port, EVENTS) as listener,
        Store.open(path, {}) as store,
        linked(broker.port, store) as link,
    ):
        heard = listener.wait_for_number(1000)
        link.stop()
        assert store.outbox_waiting() == 0
    assert numbers(heard) == list(range(1000))


def test_a_daemon_killed_while_it_sends_loses_none(broker: Broker, tmp_path: Path) -> None:
    path = tmp_path / "killed.db"
    script = (
        "with Store.open(sys.argv[1], {}) as store:\n"
        "    queue(store, 0, 1000)\n"
        "    timing = Timing(window=5)\n"
        "    print('ready', flush=True)\n"
        "    with linked(int(sys.argv[2]), store, timing=timing):\n"
        "        sys.stdin.read()\n"
    )
    with Listener(broker.port, EVENTS) as listener:
        with child(script, path, broker.port) as daemon:
            listener.wait_for_number(20)
            daemon.kill()
            daemon.wait(TIMEOUT_S)
        with Store.open(path, {}) as store, linked(broker.port, store):
            assert store.outbox_waiting() > 0
            listener.wait_for(lambda heard: len(set(numbers(heard))) == 1000)
    assert set(numbers(listener.heard)) == set(range(1000))
    assert len(listener.heard) <= 1000 + 5  # again only what was under way


def test_after_a_reconnection_only_unacknowledged_events_are_sent_again(store: Store) -> None:
    queue(store, 0, 5)
    with PlayedBroker() as broker, linked(broker.port, store) as link:
        broker.accept()
        broker.publish()  # service
        sent = [broker.publish() for _ in range(5)]
        for packet in sent[:3]:
            broker.acknowledge(packet)
        queue(store, 5, 6)
        link.wake()
        assert json.loads(broker.publish().payload)["id"] == "e/5"
        broker.drop()
        broker.accept()
        broker.publish()
        again = [json.loads(broker.publish().payload)["id"] for _ in range(3)]
        assert again == ["e/3", "e/4", "e/5"]
        assert store.outbox_waiting() == 3
        broker.drop()


def test_what_was_acknowledged_is_not_sent_again_when_the_store_is_full(
    store: WatchedStore,
) -> None:
    queue(store, 0, 2)
    with PlayedBroker() as broker, linked(broker.port, store):
        broker.accept()
        broker.publish()
        broker.answer_subscribe()
        first, _ = broker.publish(), broker.publish()
        store.full = True
        broker.acknowledge(first)
        broker.answer_ping()
        broker.drop()
        broker.accept()
        broker.publish()
        broker.answer_subscribe()
        second = broker.publish()
        assert json.loads(second.payload)["id"] == "e/1"
        store.full = False
        broker.acknowledge(second)
        store.wait_until_sent()
        broker.drop()


def test_a_message_larger_than_the_network_s_buffers_arrives(store: Store) -> None:
    large = "x" * 20_000_000
    with PlayedBroker() as broker, linked(broker.port, store) as link:
        broker.accept()
        broker.publish()
        broker.answer_subscribe()
        link.publish_states([state("tank", large)])
        assert broker.publish().payload.decode() == large
        broker.drop()


def test_no_more_events_are_under_way_than_the_window_takes(store: Store) -> None:
    queue(store, 0, 30)
    timing = Timing(keepalive_s=1, window=10)
    with PlayedBroker() as broker, linked(broker.port, store, timing=timing):
        broker.accept()
        broker.publish()
        broker.answer_subscribe()
        sent = [broker.publish() for _ in range(10)]
        broker.answer_ping()
        broker.acknowledge(sent[4])
        assert json.loads(broker.publish().payload)["id"] == "e/10"
        broker.answer_ping()
        broker.drop()


def test_an_outbox_that_fails_does_not_end_the_link(
    broker: Broker, store: Store, caplog: pytest.LogCaptureFixture
) -> None:
    with Listener(broker.port, f"{BASE}/#") as listener, linked(broker.port, store) as link:
        assert link.wait_for("connected", TIMEOUT_S)
        store.close()
        for _ in range(3):
            known = len(listener.heard)
            link.wake()
            link.publish_states([state("tank", "{}")])
            listener.wait_for_number(known + 1)
        assert link.status == "connected"
    told = [record.message for record in caplog.records if "outbox" in record.message]
    assert len(told) == 1
    assert "the database was closed" in told[0]


# --- service


def test_service_says_running_and_after_a_clean_stop_stopped(broker: Broker, store: Store) -> None:
    with Listener(broker.port, SERVICE) as listener:
        with linked(broker.port, store):
            listener.wait_for_number(1)
        listener.wait_for_number(2)
    running, stopped = (each.body for each in listener.heard)
    assert running["state"] == "running"
    assert running["at"] == running["connected_at"]
    assert stopped["state"] == "stopped"
    assert stopped["connected_at"] == running["connected_at"]
    with Listener(broker.port, SERVICE) as late:
        assert late.wait_for_number(1) == [Heard(SERVICE, listener.heard[1].payload, True)]


def test_a_clean_stop_sends_what_still_waits(broker: Broker, store: Store) -> None:
    with Listener(broker.port, f"{BASE}/#") as listener, linked(broker.port, store) as link:
        assert link.wait_for("connected", TIMEOUT_S)
        queue(store, 0, 50)
        link.stop()
        listener.wait_for(lambda heard: heard[-1].body.get("state") == "stopped")
    assert numbers(listener.heard) == list(range(50))
    assert store.outbox_waiting() == 0


def test_the_last_will_of_a_killed_daemon_says_gone(broker: Broker, tmp_path: Path) -> None:
    script = (
        "with Store.open(sys.argv[1], {}) as store, linked(int(sys.argv[2]), store) as link:\n"
        "    assert link.wait_for('connected', TIMEOUT_S)\n"
        "    print('ready', flush=True)\n"
        "    sys.stdin.read()\n"
    )
    with Listener(broker.port, SERVICE) as listener:
        with child(script, tmp_path / "killed.db", broker.port):
            running = listener.wait_for_number(1)[0].body
        gone = listener.wait_for_number(2)[1].body
    assert running["state"] == "running"
    assert gone == {"state": "gone", "connected_at": running["connected_at"], "at": None}
    with Listener(broker.port, SERVICE) as late:
        assert late.wait_for_number(1)[0].body == gone


def test_a_daemon_that_takes_over_from_a_hung_one_ends_as_running(
    broker: Broker, store: Store, tmp_path: Path
) -> None:
    # the will of the connection that hangs must not come after the new one's word
    script = (
        "with Store.open(sys.argv[1], {}) as store:\n"
        "    with linked(int(sys.argv[2]), store, timing=Timing()) as link:\n"
        "        assert link.wait_for('connected', TIMEOUT_S)\n"
        "        print('ready', flush=True)\n"
        "        sys.stdin.read()\n"
    )
    with (
        Listener(broker.port, SERVICE) as listener,
        child(script, tmp_path / "hung.db", broker.port) as hung,
    ):
        hung.send_signal(signal.SIGSTOP)
        first = listener.wait_for_number(1)[0].body
        with linked(broker.port, store):
            listener.wait_for(lambda heard: heard[-1].body["connected_at"] > first["connected_at"])
            with Listener(broker.port, SERVICE) as late:
                kept = late.wait_for_number(1)[0].body
            assert kept["state"] == "running"
            assert kept["connected_at"] > first["connected_at"]


# --- states


def test_a_state_is_retained_and_the_newest_counts(broker: Broker, store: Store) -> None:
    with Listener(broker.port, f"{BASE}/traps/+") as listener, linked(broker.port, store) as link:
        link.publish_states([state("tank", "1"), state("riser", "1")])
        listener.wait_for_number(2)
        for text in "23456789":
            link.publish_states([state("tank", text)])
        listener.wait_for(lambda heard: heard[-1].payload == b"9")
    with Listener(broker.port, f"{BASE}/traps/+") as late:
        late.wait_for_number(2)
    assert {(each.topic, each.payload, each.retained) for each in late.heard} == {
        (f"{BASE}/traps/tank", b"9", True),
        (f"{BASE}/traps/riser", b"1", True),
    }


def test_states_are_told_again_to_a_broker_that_forgot_them(broker: Broker, store: Store) -> None:
    with linked(broker.port, store) as link:
        link.publish_states([state("tank", "1"), state("riser", "1")])
        with Listener(broker.port, f"{BASE}/traps/+") as listener:
            listener.wait_for_number(2)
        broker.kill()
        broker.forget()
        assert link.wait_for("not connected", TIMEOUT_S)
        link.publish_states([state("tank", "2")])
        broker.start()
        with Listener(broker.port, f"{BASE}/traps/+") as listener:
            listener.wait_for_number(2)
        assert sorted(each.payload for each in listener.heard) == [b"1", b"2"]


def test_states_do_not_pile_up_at_a_broker_that_does_not_answer(store: Store) -> None:
    with PlayedBroker() as broker, linked(broker.port, store) as link:
        link.publish_states([state("tank", "0")])
        broker.accept()
        broker.publish()
        broker.answer_subscribe()
        first = broker.publish()
        for number in range(1, 100):
            link.publish_states([state("tank", str(number))])
        broker.answer_ping()  # so nothing more was sent
        broker.acknowledge(first)
        assert (first.payload, broker.publish().payload) == (b"0", b"99")
        broker.drop()
