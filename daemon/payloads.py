"""The JSON objects that MQTT and the API share, and the drain that both take in.

Volumes are millilitres, whole (1 kg of water is taken as 1 L); probabilities have three digits;
times are RFC 3339 in UTC.
"""

from __future__ import annotations

import json
import sys
from typing import Any, Literal, get_args

from daemon.alarms import Alarm, Transition
from daemon.clock import SECOND_US, format_rfc3339, parse_rfc3339
from daemon.errors import JournalError
from daemon.journal import Drain, Entry, Outcome
from daemon.moisture.description import ML_PER_KG, WATER_KG_PER_M3
from daemon.reminders import Reminder
from daemon.units import to_si
from daemon.views import TrapView

Service = Literal["running", "stopped", "gone"]

_MOST_BYTES = 4096
_LARGEST = sys.float_info.max
_TEXTS = ("by", "look", "key")
_KEYS = ("trap", "outcome", "volume_ml", "at", *_TEXTS)
_OUTCOMES: tuple[str, ...] = get_args(Outcome)


def trap_payload(view: TrapView) -> dict[str, Any]:
    """What a trap holds and when its drain is due.

    `due` holds the 5, 50 and 95 % times at which it is expected to be due, by volume or by the
    calendar, whichever comes first; null where that lies beyond the forecast's ten days. `because`
    says what makes it due, or what will make it due next; null when neither will. Of a drain that
    empties itself the volumes are those of one that works, and `chance_stuck` is the chance that it
    does not; a drain that is worked by hand has no such key. `counted_from` is there alone
    while a trap's contents are counted from then because the state before could not be read, and
    `questioned_ml` while a measured volume waits to be confirmed or taken back.
    """
    stuck, counted_us, questioned = view.chance_stuck, view.counted_from_us, view.questioned_kg
    return {
        "trap": view.trap,
        "at": format_rfc3339(view.at_us),
        "p05_ml": millilitres(view.p05_kg),
        "p50_ml": millilitres(view.p50_kg),
        "p95_ml": millilitres(view.p95_kg),
        "capacity_ml": millilitres(view.capacity_kg),
        "drain_at_ml": millilitres(view.drain_at_kg),
        "probability_due": round(view.probability_due, 3),
        "due": {
            "p05": _whole_second(view.due_p05_us),
            "p50": _whole_second(view.due_p50_us),
            "p95": _whole_second(view.due_p95_us),
            "because": view.because,
        },
        "since": view.since,
        **({} if stuck is None else {"chance_stuck": round(stuck, 3)}),
        **({} if counted_us is None else {"counted_from": format_rfc3339(counted_us)}),
        **({} if questioned is None else {"questioned_ml": millilitres(questioned)}),
    }


def _whole_second(time_us: int | None) -> str | None:
    """A time as text without a fraction, which nobody could foresee."""
    return None if time_us is None else format_rfc3339(time_us - time_us % SECOND_US)


def alarm_payload(alarm: Alarm) -> dict[str, Any]:
    """An alarm as it stands."""
    return {
        "id": alarm.id,
        "kind": alarm.kind,
        "source": alarm.source,
        "state": alarm.state,
        "priority": alarm.priority,
        "since": format_rfc3339(alarm.since_us),
        "shelved_until": None
        if alarm.shelved_until_us is None
        else format_rfc3339(alarm.shelved_until_us),
        "text": alarm.text,
    }


def event_payload(transition: Transition) -> dict[str, Any]:
    """An alarm's change of state; `by` is who acknowledged it, else empty."""
    return {
        "id": transition.id,
        "at": format_rfc3339(transition.at_us),
        "alarm": transition.alarm,
        "kind": transition.kind,
        "source": transition.source,
        "from": transition.before,
        "to": transition.after,
        "priority": transition.priority,
        "text": transition.text,
        "by": transition.by,
    }


def reminder_payload(reminder: Reminder) -> dict[str, Any]:
    """A reminder to go on a round, or the list for opening up after a long closure.

    `source` is the turn of the day; `traps` are in walking order.
    """
    return {
        "id": reminder.id,
        "at": format_rfc3339(reminder.at_us),
        "kind": reminder.kind,
        "source": reminder.turn,
        "traps": list(reminder.traps),
        "text": reminder.text,
    }


def drain_payload(entry: Entry) -> dict[str, Any]:
    """A drain as recorded; `volume_ml` is null when it was not measured."""
    drain = entry.body
    if not isinstance(drain, Drain):
        raise TypeError(f"entry {entry.seq} is not a drain: {drain!r}")
    return {
        "seq": entry.seq,
        "trap": drain.trap,
        "outcome": drain.outcome,
        "volume_ml": None if drain.volume_kg is None else millilitres(drain.volume_kg),
        "at": format_rfc3339(entry.at_us),
        "written": format_rfc3339(entry.written_us),
        "by": drain.by,
        "look": drain.look,
        "key": entry.key,
    }


def service_payload(state: Service, connected_us: int, at_us: int | None) -> dict[str, Any]:
    """Whether the daemon runs: since when it was connected, and when it said so.

    The last will ("gone") is written down beforehand, so its `at` is null.
    """
    return {
        "state": state,
        "connected_at": format_rfc3339(connected_us),
        "at": None if at_us is None else format_rfc3339(at_us),
    }


def refusal_payload(reason: str, payload: bytes, at_us: int) -> dict[str, Any]:
    """Why an inbound message was not taken, with the message as far as it can be shown."""
    shown = payload[:_MOST_BYTES].decode(errors="replace")
    return {"at": format_rfc3339(at_us), "reason": reason, "payload": shown}


def millilitres(volume_kg: float) -> int:
    """Whole millilitres of water from kg."""
    return round(volume_kg * ML_PER_KG)


def read_drain(payload: bytes) -> tuple[Drain, int | None, str]:
    """An inbound drain: the body, when it happened (us, None when not said) and its key.

    All but `trap` may be left out or null: without an outcome it was emptied, or empty when the
    volume is 0. JournalError says what is wrong; whether the trap exists and can hold that much is
    for whoever records the drain to judge.
    """
    fields = _object(payload)
    unknown = sorted(set(fields) - set(_KEYS))
    if unknown:
        raise JournalError(f"unknown key {unknown[0]!r}: a drain has {', '.join(_KEYS)}")
    trap = fields.get("trap")
    if not isinstance(trap, str) or not trap or not trap.isprintable():
        raise JournalError(f"trap is {_shown(trap)}: say which trap was drained, by its name")
    volume_ml = _volume_ml(fields.get("volume_ml"))
    outcome = fields.get("outcome", "empty" if volume_ml == 0.0 else "emptied")
    if outcome not in _OUTCOMES:
        raise JournalError(f"outcome is {_shown(outcome)}: say one of {', '.join(_OUTCOMES)}")
    for name in _TEXTS:
        text = fields.get(name, "")
        if not isinstance(text, str) or not text.isprintable():
            raise JournalError(f"{name} is {_shown(text)}: write it as one line of text")
    drain = Drain(
        trap=trap,
        outcome=outcome,
        volume_kg=None if volume_ml is None else to_si(volume_ml, "ml", "volume") * WATER_KG_PER_M3,
        by=fields.get("by", ""),
        look=fields.get("look", ""),
    )
    return drain, _at_us(fields.get("at")), fields.get("key", "")


def _object(payload: bytes) -> dict[str, Any]:
    if len(payload) > _MOST_BYTES:
        raise JournalError(f"{len(payload)} bytes: a drain has at most {_MOST_BYTES}")
    try:
        fields = json.loads(payload)
    except (ValueError, RecursionError) as error:
        raise JournalError(f"not a JSON object in UTF-8: {error}") from error
    if not isinstance(fields, dict):
        raise JournalError(f'{_shown(fields)} is not an object: write {{"trap": "...", ...}}')
    return {name: value for name, value in fields.items() if value is not None}


def _volume_ml(value: object) -> float | None:
    if value is None:
        return None
    if isinstance(value, int | float) and not isinstance(value, bool) and 0 <= value <= _LARGEST:
        return float(value)
    raise JournalError(
        f"volume_ml is {_shown(value)}: write millilitres, 0 or more, or leave it out when it was "
        "not measured"
    )


def _at_us(value: object) -> int | None:
    if value is None:
        return None
    try:
        if not isinstance(value, str):
            raise ValueError("it is not text")
        return parse_rfc3339(value)
    except ValueError as error:
        raise JournalError(
            f"at is {_shown(value)}: write a time with its offset, like 2026-03-02T07:10:00Z"
        ) from error


def _shown(value: object) -> str:
    if value is None:
        return "missing"
    text = json.dumps(value, ensure_ascii=False)
    if not text.isprintable():  # nor fit for a log or for UTF-8
        text = json.dumps(value)
    return text if len(text) <= 80 else text[:77] + "..."
