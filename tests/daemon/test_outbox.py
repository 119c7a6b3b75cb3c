"""Messages and their JSON: the shapes that integrators build on."""

from __future__ import annotations

import json
from dataclasses import replace

import pytest

from daemon.alarms import Alarm, Transition
from daemon.clock import parse_rfc3339
from daemon.errors import JournalError
from daemon.journal import Acknowledge, Drain, Entry
from daemon.outbox import (
    Message,
    Topics,
    alarm_message,
    event_message,
    reminder_message,
    service_message,
    trap_message,
)
from daemon.payloads import drain_payload, read_drain, refusal_payload, trap_payload
from daemon.reminders import Reminder
from daemon.site.types import Mqtt
from daemon.views import TrapView
from tests.daemon.linking import a_site

AT_US = parse_rfc3339("2026-12-01T09:00:00Z")
TOPICS = Topics("dripleg/alder-yard")

VIEW = TrapView(
    trap="tank",
    at_us=AT_US,
    p05_kg=0.3004,
    p50_kg=0.4096,
    p95_kg=0.5604,
    capacity_kg=15.0,
    drain_at_kg=0.6,
    probability_due=0.1203125,
    due=False,
    because="calendar",
    due_at_us=parse_rfc3339("2026-12-01T17:30:00Z"),
    since="last drain",
    last_drain_us=None,
    due_p05_us=parse_rfc3339("2026-12-01T15:10:00.7Z"),
    due_p50_us=parse_rfc3339("2026-12-01T17:30:00Z"),
    due_p95_us=parse_rfc3339("2026-12-01T17:30:00Z"),
)
TRANSITION = Transition(
    id="tank-drain-due/2026-12-01T09:00:00Z/1",
    at_us=AT_US,
    alarm="tank-drain-due",
    kind="drain-due",
    source="tank",
    before="unacknowledged",
    after="acknowledged",
    priority="medium",
    text="Behälter: 410 ml (300-560), drain it",
    by="AM",
)


def test_a_trap_is_told_in_millilitres_with_every_key() -> None:
    message = trap_message(TOPICS, VIEW)
    assert (message.topic, message.qos, message.retain, message.id) == (
        "dripleg/alder-yard/traps/tank",
        1,
        True,
        "",
    )
    # the documented example's keys, in its order
    expected = {
        "trap": "tank",
        "at": "2026-12-01T09:00:00Z",
        "p05_ml": 300,
        "p50_ml": 410,
        "p95_ml": 560,
        "capacity_ml": 15000,
        "drain_at_ml": 600,
        "probability_due": 0.12,
        "due": {
            "p05": "2026-12-01T15:10:00Z",
            "p50": "2026-12-01T17:30:00Z",
            "p95": "2026-12-01T17:30:00Z",
            "because": "calendar",
        },
        "since": "last drain",
    }
    assert list(json.loads(message.payload).items()) == list(expected.items())


def test_a_trap_that_is_not_due_soon_has_no_time() -> None:
    view = replace(VIEW, because=None, due_p05_us=None, due_p50_us=None, due_p95_us=None)
    assert trap_payload(view)["due"] == {"p05": None, "p50": None, "p95": None, "because": None}


def test_an_alarm_is_retained_under_its_id() -> None:
    alarm = Alarm("tank-drain-due", "drain-due", "tank", "unacknowledged", "medium", AT_US, "text")
    message = alarm_message(TOPICS, alarm)
    assert (message.topic, message.qos, message.retain) == (
        "dripleg/alder-yard/alarms/tank-drain-due",
        1,
        True,
    )
    assert json.loads(message.payload) == {
        "id": "tank-drain-due",
        "kind": "drain-due",
        "source": "tank",
        "state": "unacknowledged",
        "priority": "medium",
        "since": "2026-12-01T09:00:00Z",
        "shelved_until": None,
        "text": "text",
    }


def test_an_event_carries_the_transition_s_id_and_is_not_retained() -> None:
    message = event_message(TOPICS, TRANSITION)
    assert (message.topic, message.qos, message.retain, message.id) == (
        "dripleg/alder-yard/events",
        1,
        False,
        TRANSITION.id,
    )
    assert json.loads(message.payload) == {
        "id": "tank-drain-due/2026-12-01T09:00:00Z/1",
        "at": "2026-12-01T09:00:00Z",
        "alarm": "tank-drain-due",
        "kind": "drain-due",
        "source": "tank",
        "from": "unacknowledged",
        "to": "acknowledged",
        "priority": "medium",
        "text": "Behälter: 410 ml (300-560), drain it",
        "by": "AM",
    }
    assert "Behälter".encode() in message.payload


def test_the_last_will_has_no_time_of_its_own() -> None:
    message = service_message(TOPICS, "gone", AT_US, None)
    assert (message.topic, message.retain) == ("dripleg/alder-yard/service", True)
    assert json.loads(message.payload) == {
        "state": "gone",
        "connected_at": "2026-12-01T09:00:00Z",
        "at": None,
    }


def test_topics_stand_under_the_prefix_and_the_site() -> None:
    topics = Topics.of(a_site(1883), Mqtt("127.0.0.1", 1883, prefix="shop/air"))
    assert topics.drains == "shop/air/alder-yard/drains"


def test_a_number_that_json_lacks_is_not_sent() -> None:
    with pytest.raises(ValueError, match="not JSON compliant"):
        trap_message(TOPICS, replace(VIEW, probability_due=float("nan")))


def test_a_message_is_sent_at_least_once_unless_said_otherwise() -> None:
    assert Message("t", b"").qos == 1


# --- drains


def test_a_recorded_drain_is_told_as_it_was_sent() -> None:
    entry = Entry(4, AT_US, AT_US + 1_500_000, Drain("tank", "partly", 0.38, "AM", "clear"), "k")
    assert drain_payload(entry) == {
        "seq": 4,
        "trap": "tank",
        "outcome": "partly",
        "volume_ml": 380,
        "at": "2026-12-01T09:00:00Z",
        "written": "2026-12-01T09:00:01.500000Z",
        "by": "AM",
        "look": "clear",
        "key": "k",
    }


def test_a_drain_that_was_not_measured_has_no_volume() -> None:
    assert drain_payload(Entry(4, AT_US, AT_US, Drain("tank")))["volume_ml"] is None


def test_only_a_drain_is_told_as_one() -> None:
    with pytest.raises(TypeError, match="entry 4 is not a drain"):
        drain_payload(Entry(4, AT_US, AT_US, Acknowledge("tank-drain-due")))


@pytest.mark.parametrize(
    ("payload", "expected"),
    [
        ('{"trap": "tank"}', (Drain("tank", "emptied"), None, "")),
        (
            '{"trap": "tank", "outcome": null, "volume_ml": null, "at": null, "by": null,'
            ' "look": null, "key": null}',
            (Drain("tank", "emptied"), None, ""),
        ),
        ('{"trap": "tank", "volume_ml": 0}', (Drain("tank", "empty", 0.0), None, "")),
        (
            '{"trap": "tank", "outcome": "partly", "volume_ml": 12.5, "by": "Ü", "look": "oily",'
            ' "at": "2026-12-01T10:00:00+01:00", "key": "7"}',
            (Drain("tank", "partly", 0.0125, "Ü", "oily"), AT_US, "7"),
        ),
    ],
)
def test_an_inbound_drain_is_read(payload: str, expected: tuple[Drain, int | None, str]) -> None:
    assert read_drain(payload.encode()) == expected


@pytest.mark.parametrize(
    ("payload", "reason"),
    [
        (b"", "not a JSON object in UTF-8"),
        (b"\xff", "not a JSON object in UTF-8"),
        (b"[" * 4000, "not a JSON object in UTF-8"),
        (b"[1]", r"\[1\] is not an object"),
        (b'{"trap": "' + b"x" * 5000 + b'"}', "5012 bytes: a drain has at most 4096"),
        (b"{}", "trap is missing: say which trap"),
        (b'{"trap": ["tank"]}', r'trap is \["tank"\]: say which trap'),
        (b'{"trap": "tank", "volume": 3}', "unknown key 'volume': a drain has trap, outcome, vol"),
        (b'{"trap": "tank", "outcome": "some"}', 'outcome is "some": say one of emptied, empty'),
        (b'{"trap": "tank", "outcome": ["empty"]}', "outcome is .*: say one of"),
        (b'{"trap": "tank", "volume_ml": -1}', "volume_ml is -1: write millilitres, 0 or more"),
        (b'{"trap": "tank", "volume_ml": "380"}', 'volume_ml is "380": write millilitres'),
        (b'{"trap": "tank", "volume_ml": true}', "volume_ml is true: write millilitres"),
        (b'{"trap": "tank", "volume_ml": NaN}', "volume_ml is NaN: write millilitres"),
        (b'{"trap": "tank", "volume_ml": 1e999}', "volume_ml is Infinity: write millilitres"),
        (b'{"trap": "tank", "volume_ml": 1' + b"0" * 400 + b"}", "volume_ml is 1000.*write milli"),
        (b'{"trap": "tank", "at": "nine"}', 'at is "nine": write a time with its offset, like'),
        (b'{"trap": "tank", "at": 5}', "at is 5: write a time"),
        (b'{"trap": "tank", "by": 5}', "by is 5: write it as one line of text"),
        (b'{"trap": "tank", "by": "a\\nb"}', "by is .*: write it as one line of text"),
        (b'{"trap": "tank", "key": false}', "key is false: write it as one line of text"),
    ],
)
def test_an_inbound_drain_that_cannot_be_is_refused_with_the_reason(
    payload: bytes, reason: str
) -> None:
    with pytest.raises(JournalError, match=reason):
        read_drain(payload)


def test_a_refusal_shows_what_was_sent_as_far_as_it_can_be_shown() -> None:
    assert refusal_payload("why", b"\xff" + b"x" * 9000, AT_US) == {
        "at": "2026-12-01T09:00:00Z",
        "reason": "why",
        "payload": "\ufffd" + "x" * 4095,
    }


def test_a_reminder_is_an_event_of_its_own_kind() -> None:
    reminder = Reminder(
        "reminder/shift-end/2026-12-01T17:20:00Z",
        parse_rfc3339("2026-12-01T17:21:00Z"),
        "round",
        "shift end",
        ("bowl", "tank"),
        "Drain, in this order: ...",
    )
    message = reminder_message(TOPICS, reminder)
    assert (message.topic, message.qos, message.retain) == ("dripleg/alder-yard/events", 1, False)
    assert message.id == "reminder/shift-end/2026-12-01T17:20:00Z"
    assert json.loads(message.payload) == {
        "id": "reminder/shift-end/2026-12-01T17:20:00Z",
        "at": "2026-12-01T17:21:00Z",
        "kind": "round",
        "source": "shift end",
        "traps": ["bowl", "tank"],
        "text": "Drain, in this order: ...",
    }
