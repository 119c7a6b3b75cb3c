"""Brokers that are frozen, missing, silent or strict."""

from __future__ import annotations

import logging
import shutil
import subprocess
from pathlib import Path

import pytest

from daemon.store.store import Store
from tests.daemon.broker import TIMEOUT_S, Broker, Listener
from tests.daemon.linking import (
    EVENTS,
    QUICK,
    linked,
    numbers,
    queue,
)
from tests.daemon.played_broker import PlayedBroker


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
