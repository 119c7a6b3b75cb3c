"""The link to the broker, against a real mosquitto on loopback and one that the test plays."""

from __future__ import annotations

import json
import logging
import shutil
import signal
import ssl
import subprocess
import sys
import threading
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest

from daemon.clock import SystemClock, parse_rfc3339
from daemon.errors import BrokerError, JournalError, StoreError
from daemon.journal import Body, Drain, Entry
from daemon.mqtt import MqttLink, Timing
from daemon.outbox import Message
from daemon.store.store import Store
from daemon.views import Recorded
from tests.daemon.broker import (
    TIMEOUT_S,
    Broker,
    Heard,
    Listener,
    PlayedBroker,
    a_site,
    free_port,
)

ROOT = Path(__file__).parents[2]
BASE = "dripleg/alder-yard"
EVENTS = f"{BASE}/events"
SERVICE = f"{BASE}/service"
DRAINS = f"{BASE}/drains"
REFUSED = f"{BASE}/drains/refused"
QUICK = Timing(keepalive_s=1, retry_least_s=0.05, retry_most_s=0.2)


def event(number: int) -> Message:
    return Message(EVENTS, json.dumps({"id": f"e/{number}"}).encode(), id=f"e/{number}")


def state(trap: str, text: str) -> Message:
    return Message(f"{BASE}/traps/{trap}", text.encode(), retain=True)


def queue(store: Store, first: int, beyond: int) -> None:
    """Put numbered events into the outbox, in one tick."""
    tick_us = (store.last_tick_us or 0) + 1
    store.commit_tick(tick_us, [], [], [event(number) for number in range(first, beyond)])


def numbers(heard: list[Heard]) -> list[int]:
    return [int(each.body["id"].split("/")[1]) for each in heard if each.topic == EVENTS]


class WatchedStore(Store):
    """A store that tells when its outbox has been emptied, and that can be made to fail."""

    full = False

    def mark_sent(self, numbers: Sequence[int]) -> None:
        if self.full:
            raise StoreError("no space left (invented)")
        super().mark_sent(numbers)
        with marked:
            marked.notify_all()

    def wait_until_sent(self) -> None:
        with marked:
            assert marked.wait_for(lambda: self.outbox_waiting() == 0, TIMEOUT_S)


marked = threading.Condition()


class Journal:
    """Stands in for the daemon's own recording: remembers what came, by key as the store does."""

    def __init__(self) -> None:
        self.entries: list[Entry] = []
        self.fault: Exception | None = None

    def record(self, body: Body, at_us: int | None, key: str) -> Recorded:
        if self.fault is not None:
            raise self.fault
        if isinstance(body, Drain) and body.trap != "tank":
            raise JournalError(f'"{body.trap}" is not a trap of this site (known: tank)')
        for entry in self.entries:
            if key and entry.key == key:
                return Recorded(entry, repeated=True)
        self.entries.append(Entry(len(self.entries) + 1, at_us or 0, 0, body, key))
        return Recorded(self.entries[-1], repeated=False)


@pytest.fixture
def journal() -> Journal:
    return Journal()


@pytest.fixture
def store(tmp_path: Path) -> Iterator[WatchedStore]:
    with WatchedStore.open(tmp_path / "dripleg.db", {}) as opened:
        yield opened


@contextmanager
def linked(
    port: int, store: Store, journal: Journal | None = None, timing: Timing = QUICK, **mqtt: Any
) -> Iterator[MqttLink]:
    record = (journal or Journal()).record
    link = MqttLink(a_site(port, **mqtt), store, record, SystemClock(), timing)
    link.start()
    try:
        yield link
    finally:
        link.stop()


@contextmanager
def child(script: str, *arguments: object) -> Iterator[subprocess.Popen[str]]:
    """Another process that runs this script after these tests' names; killed at the end."""
    head = "import sys\nfrom tests.daemon.test_mqtt import *\n"
    process = subprocess.Popen(
        [sys.executable, "-c", head + script, *map(str, arguments)],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
        cwd=ROOT,
    )
    try:
        assert process.stdout is not None
        assert process.stdout.readline() == "ready\n"
        yield process
    finally:
        process.kill()
        process.communicate(timeout=TIMEOUT_S)


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
            link.wake()
            link.publish_states([state("tank", "{}")])
            known = len(listener.heard)
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
        with linked(broker.port, store):
            heard = listener.wait_for_number(3)
    assert [each.body["state"] for each in heard[:3]] == ["running", "gone", "running"]


# --- trouble with the broker


def test_a_frozen_broker_is_noticed_within_two_keepalives(broker: Broker, store: Store) -> None:
    with Listener(broker.port, EVENTS, "listener") as listener, linked(broker.port, store) as link:
        assert link.wait_for("connected", TIMEOUT_S)
        broker.freeze()
        queue(store, 0, 10)
        link.wake()
        rounding_s = 0.75
        assert link.wait_for("not connected", 2 * QUICK.keepalive_s + rounding_s)
        assert "keep alive timeout" in link.problem
        assert store.outbox_waiting() == 10
        broker.thaw()
        assert link.wait_for("connected", TIMEOUT_S)
        listener.wait_for(lambda heard: set(numbers(heard)) == set(range(10)))
        link.stop()
    assert store.outbox_waiting() == 0


def test_a_broker_that_never_lets_us_in_is_given_up(store: Store) -> None:
    with PlayedBroker() as broker, linked(broker.port, store) as link:
        with link._changed:
            assert link._changed.wait_for(lambda: link.problem, TIMEOUT_S)
        assert "keep alive timeout" in link.problem
        assert link.status == "not connected"


def test_the_log_tells_of_a_missing_broker_once(
    store: Store, caplog: pytest.LogCaptureFixture
) -> None:
    with (
        PlayedBroker() as broker,
        caplog.at_level(logging.INFO, "dripleg.mqtt"),
        linked(broker.port, store),
    ):
        for _ in range(6):
            broker.turn_away()
        assert [record.levelname for record in caplog.records] == ["WARNING"]


def test_a_broker_that_does_not_let_us_listen_is_told_of(
    store: Store, caplog: pytest.LogCaptureFixture
) -> None:
    with PlayedBroker() as broker, linked(broker.port, store) as link:
        broker.accept()
        broker.publish()
        subscription = broker.packet()
        broker.answer_ping()
        assert link.status == "not connected"
        broker.answer_subscription(subscription, granted=False)
        assert link.wait_for("connected", TIMEOUT_S)
        broker.answer_ping()
        broker.drop()
    assert "does not let this user listen on dripleg/alder-yard/drains" in caplog.text


def test_a_wrong_password_is_told_and_the_right_one_lets_in(tmp_path: Path, store: Store) -> None:
    passwords = tmp_path / "passwords"
    program = shutil.which("mosquitto_passwd")
    assert program is not None, "these tests need mosquitto_passwd: apt-get install mosquitto"
    subprocess.run([program, "-b", "-c", str(passwords), "compressor", "right"], check=True)
    passwords.chmod(0o600)
    broker = Broker(tmp_path, extra=f"password_file {passwords}", anonymous=False).start()
    try:
        with linked(broker.port, store, user="compressor", password="wrong") as link:
            with link._changed:
                assert link._changed.wait_for(lambda: link.problem, TIMEOUT_S)
            assert link.problem == "the broker refused: not authorized"
            assert link.status == "not connected"
        with linked(broker.port, store, user="compressor", password="right") as link:
            assert link.wait_for("connected", TIMEOUT_S)
        kept = tmp_path / "kept"
        with linked(broker.port, store, user="compressor", password_file=str(kept)) as link:
            with link._changed:
                assert link._changed.wait_for(lambda: link.problem, TIMEOUT_S)
            assert "password_file: " in link.problem
            assert "cannot be read (No such file" in link.problem
            kept.write_text("right\n")  # and it is read again at the next try
            assert link.wait_for("connected", TIMEOUT_S)
    finally:
        broker.stop()


@pytest.fixture(scope="module")
def certificate(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    """A certificate for 127.0.0.1 that signs itself, and its key."""
    folder = tmp_path_factory.mktemp("tls")
    certificate, key = folder / "broker.pem", folder / "broker.key"
    subprocess.run(
        ["openssl", "req", "-x509", "-newkey", "ec", "-pkeyopt", "ec_paramgen_curve:prime256v1",
         "-nodes", "-days", "2", "-subj", "/CN=broker", "-addext", "subjectAltName=IP:127.0.0.1",
         "-keyout", str(key), "-out", str(certificate)],
        check=True,
        capture_output=True,
    )  # fmt: skip
    return certificate, key


@pytest.fixture
def tls_broker(tmp_path: Path, certificate: tuple[Path, Path]) -> Iterator[Broker]:
    extra = "certfile {}\nkeyfile {}".format(*certificate)
    started = Broker(tmp_path, extra=extra).start()
    yield started
    started.stop()


def test_over_tls_events_arrive_and_drains_are_taken_in(
    tls_broker: Broker, certificate: tuple[Path, Path], store: Store, journal: Journal
) -> None:
    queue(store, 0, 500)
    port, ca_file = tls_broker.port, str(certificate[0])
    with (
        Listener(port, f"{BASE}/#", ca_file=ca_file) as listener,
        linked(port, store, journal, tls=True, ca_file=ca_file) as link,
    ):
        listener.wait_for(lambda heard: len(numbers(heard)) == 500)
        for number in range(20):
            listener.say(DRAINS, json.dumps({"trap": "tank", "by": str(number)}))
        listener.say(DRAINS, b"-")
        listener.wait_for(lambda heard: heard[-1].topic == REFUSED)
        assert link.status == "connected"
    assert [entry.body for entry in journal.entries] == [
        Drain("tank", by=str(n)) for n in range(20)
    ]


def test_drains_that_arrive_in_one_piece_over_tls_are_all_taken_in(
    certificate: tuple[Path, Path], store: Store, journal: Journal
) -> None:
    tls = ssl.SSLContext(ssl.PROTOCOL_TLS_SERVER)
    tls.load_cert_chain(*certificate)
    ca_file = str(certificate[0])
    with (
        PlayedBroker(tls) as broker,
        linked(broker.port, store, journal, Timing(keepalive_s=60), tls=True, ca_file=ca_file),
    ):
        broker.accept()
        broker.publish()
        broker.answer_subscribe()
        broker.say(DRAINS, *(json.dumps({"trap": "tank", "by": n}).encode() for n in "abc"), b"-")
        assert broker.publish().topic == REFUSED
        broker.drop()
    assert [entry.body for entry in journal.entries] == [Drain("tank", by=n) for n in "abc"]


def test_a_certificate_of_an_unknown_authority_is_refused(tls_broker: Broker, store: Store) -> None:
    with linked(tls_broker.port, store, tls=True) as link:
        with link._changed:
            assert link._changed.wait_for(lambda: link.problem, TIMEOUT_S)
        assert "certificate verify failed" in link.problem.lower()


def test_a_ca_file_that_cannot_be_read_is_told_at_once(store: Store, tmp_path: Path) -> None:
    site = a_site(1, tls=True, ca_file=str(tmp_path / "nowhere.pem"))
    with pytest.raises(BrokerError, match=r"ca_file .*nowhere\.pem: cannot be used .*No such file"):
        MqttLink(site, store, Journal().record, SystemClock())


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


# --- drains that arrive


def test_a_drain_is_taken_in(broker: Broker, store: Store, journal: Journal) -> None:
    said = {
        "trap": "tank",
        "outcome": "partly",
        "volume_ml": 380,
        "at": "2026-03-02T10:00:00+01:00",
        "by": "AM",
        "look": "milky",
        "key": "button-1",
    }
    with (
        Listener(broker.port, REFUSED) as listener,
        linked(broker.port, store, journal) as link,
    ):
        assert link.wait_for("connected", TIMEOUT_S)
        listener.say(DRAINS, json.dumps(said))
        listener.say(DRAINS, json.dumps(said))
        listener.say(DRAINS, "a last one, to know that the others were taken in")
        listener.wait_for_number(1)
    assert [(entry.body, entry.at_us, entry.key) for entry in journal.entries] == [
        (Drain("tank", "partly", 0.38, "AM", "milky"), parse_rfc3339("2026-03-02T09:00:00Z"),
         "button-1")
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("payload", "reason"),
    [
        (b"drained!", "not a JSON object in UTF-8"),
        (b"\xff\xfe", "not a JSON object in UTF-8"),
        (b'{"trap": "\\ud800"}', 'trap is "?": say which trap was drained'),
        (b'{"trap": "riser", "outcome": "empty"}', '"riser" is not a trap of this site'),
        (b'{"trap": "tank", "volume": 380}', "unknown key 'volume': a drain has trap, outcome"),
    ],
)
def test_a_bad_drain_is_answered_with_the_reason(
    broker: Broker, store: Store, journal: Journal, payload: bytes, reason: str
) -> None:
    with (
        Listener(broker.port, REFUSED) as listener,
        linked(broker.port, store, journal) as link,
    ):
        assert link.wait_for("connected", TIMEOUT_S)
        listener.say(DRAINS, payload)
        answer = listener.wait_for_number(1)[0]
        listener.say(DRAINS, b'{"trap": "tank"}')
        listener.say(DRAINS, payload)
        listener.wait_for_number(2)
    assert reason in answer.body["reason"]
    assert answer.body["payload"] == payload.decode(errors="replace")
    assert not answer.retained
    assert [entry.body for entry in journal.entries] == [Drain("tank")]


def test_a_fault_while_recording_does_not_end_the_link(
    broker: Broker, store: Store, journal: Journal
) -> None:
    journal.fault = RuntimeError("invented")
    with (
        Listener(broker.port, REFUSED) as listener,
        linked(broker.port, store, journal) as link,
    ):
        assert link.wait_for("connected", TIMEOUT_S)
        listener.say(DRAINS, b'{"trap": "tank"}')
        answer = listener.wait_for_number(1)[0].body
        assert answer["reason"] == "it could not be recorded: see the daemon's log"
        journal.fault = None
        listener.say(DRAINS, b'{"trap": "tank"}')
        listener.say(DRAINS, b"-")
        listener.wait_for_number(2)
    assert [entry.body for entry in journal.entries] == [Drain("tank")]


def test_a_retained_drain_is_ignored_with_a_warning(
    broker: Broker, store: Store, journal: Journal, caplog: pytest.LogCaptureFixture
) -> None:
    with Listener(broker.port, REFUSED) as listener:
        listener.say(DRAINS, b'{"trap": "tank"}', retain=True)
        with linked(broker.port, store, journal) as link:
            assert link.wait_for("connected", TIMEOUT_S)
            listener.say(DRAINS, b"-")
            listener.wait_for_number(1)
    assert journal.entries == []
    assert any("a retained message" in record.message for record in caplog.records)
