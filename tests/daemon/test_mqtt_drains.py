"""Drains that arrive over MQTT."""

from __future__ import annotations

import json

import pytest

from daemon.clock import parse_rfc3339
from daemon.journal import Drain
from daemon.store.store import Store
from tests.daemon.broker import TIMEOUT_S, Broker, Listener
from tests.daemon.linking import (
    DRAINS,
    REFUSED,
    Journal,
    linked,
)
from tests.daemon.played_broker import PlayedBroker


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
        (b'{"trap": "\\ud800"}', r'trap is "\ud800": say which trap was drained'),
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


def test_a_drain_reported_while_the_daemon_is_away_is_taken_in_later(
    broker: Broker, store: Store, journal: Journal
) -> None:
    with linked(broker.port, store, journal) as link:
        assert link.wait_for("connected", TIMEOUT_S)
    with Listener(broker.port, REFUSED) as listener:
        listener.say(DRAINS, b'{"trap": "tank", "volume_ml": 380}')
        listener.say(DRAINS, b"-")
        with linked(broker.port, store, journal):
            listener.wait_for_number(1)
    assert [entry.body for entry in journal.entries] == [Drain("tank", volume_kg=0.38)]


def test_a_delivery_repeated_after_a_kill_counts_once(store: Store, journal: Journal) -> None:
    """MQTT 3.1.1, 4.4: what was not acknowledged comes again with its number and the DUP flag."""
    drained = b'{"trap": "tank"}'
    with PlayedBroker() as broker, linked(broker.port, store, journal):
        broker.accept()
        broker.publish()
        broker.answer_subscribe()
        broker.say_once(DRAINS, drained, 7)
        assert broker.acknowledgement() == 7
        broker.drop()  # the acknowledgement was lost, as far as this broker knows
        broker.accept()
        broker.publish()
        broker.answer_subscribe()
        broker.say_once(DRAINS, drained, 7, again=True)
        assert broker.acknowledgement() == 7
        assert len(journal.entries) == 1
        broker.say_once(DRAINS, drained, 8)  # somebody drained it a second time
        assert broker.acknowledgement() == 8
        broker.say_once(DRAINS, drained, 8)  # and a third, the broker having begun to count anew
        assert broker.acknowledgement() == 8
        assert len(journal.entries) == 3
        broker.drop()
