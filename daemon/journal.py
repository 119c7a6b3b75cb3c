"""The ordered journal: what people and devices tell the daemon, besides readings.

A POST, a push button, an MQTT message and `dripleg drained` all write the same entries. An entry
belongs to the first tick at or after its `at_us`; one dated before the last tick makes the model go
back. Bodies are plain dataclasses that turn into JSON and back.
"""

from __future__ import annotations

import json
from dataclasses import asdict, dataclass
from typing import Any, Literal

from daemon.errors import JournalError

Outcome = Literal["emptied", "empty", "partly"]
Blotted = Literal["clean", "water", "oil"]


@dataclass(frozen=True, slots=True)
class Drain:
    """Somebody opened a drain."""

    trap: str
    outcome: Outcome = "emptied"  # "empty": opened and found empty; "partly": some was left
    volume_kg: float | None = None  # as the cup read, 1 kg to the litre; None: not measured
    by: str = ""
    look: str = ""  # clear, milky, oily, rusty


@dataclass(frozen=True, slots=True)
class Undo:
    """Somebody takes back a drain that they recorded by mistake: it never was."""

    trap: str
    entry: int  # the drain's number in the journal
    by: str = ""


@dataclass(frozen=True, slots=True)
class Acknowledge:
    """Somebody has seen an alarm."""

    alarm: str
    by: str = ""


@dataclass(frozen=True, slots=True)
class Shelve:
    """Somebody puts an alarm off for a while."""

    alarm: str
    for_s: float
    by: str = ""


@dataclass(frozen=True, slots=True)
class Unshelve:
    """Somebody ends that before its time."""

    alarm: str
    by: str = ""


@dataclass(frozen=True, slots=True)
class Gauge:
    """A painter's own gauge read how far a surface is above the dew point of the air around."""

    outlet: str
    spread_k: float
    valid_s: float = 1800.0  # how long it speaks for
    by: str = ""


@dataclass(frozen=True, slots=True)
class Blotter:
    """A blotter test after ASTM D4285: what a white absorbent showed in the discharge."""

    outlet: str
    result: Blotted
    by: str = ""


@dataclass(frozen=True, slots=True)
class Confirm:
    """Somebody says that a trap's last measured volume, which was surprising, is right."""

    trap: str
    by: str = ""


Serviced = Literal[
    "element changed", "sensor replaced", "compressor serviced", "drain seen working"
]


@dataclass(frozen=True, slots=True)
class Service:
    """A part was changed or looked at: what was learned about the old one ends."""

    what: Serviced
    of: str = ""  # a station's or a sensor's id; the compressor needs none
    by: str = ""


@dataclass(frozen=True, slots=True)
class SaltCheck:
    """A humidity sensor was read over a salt whose humidity is known; fractions."""

    sensor: str
    reads: float
    true: float
    by: str = ""


Body = (
    Drain | Undo | Acknowledge | Shelve | Unshelve | Confirm | Service | Gauge | Blotter | SaltCheck
)
_KINDS: dict[str, type[Body]] = {
    "drain": Drain,
    "undo": Undo,
    "acknowledge": Acknowledge,
    "shelve": Shelve,
    "unshelve": Unshelve,
    "confirm": Confirm,
    "service": Service,
    "gauge": Gauge,
    "blotter": Blotter,
    "salt-check": SaltCheck,
}


@dataclass(frozen=True, slots=True)
class Entry:
    """A journal entry: when it happened, what, in which order it was written, and by which key."""

    seq: int  # 1, 2, 3 ... as committed
    at_us: int  # when it happened
    written_us: int  # when it was committed
    body: Body
    key: str = ""  # idempotency key of whoever sent it; "" none


def body_to_json(body: Body) -> str:
    """One JSON object with a `kind`."""
    kind = next(name for name, cls in _KINDS.items() if isinstance(body, cls))
    return json.dumps({"kind": kind, **asdict(body)}, sort_keys=True)


def body_from_json(text: str) -> Body:
    """The body that `body_to_json` wrote; JournalError when it is not one."""
    try:
        fields: dict[str, Any] = json.loads(text)
        return _KINDS[fields.pop("kind")](**fields)
    except (ValueError, KeyError, TypeError) as error:
        raise JournalError(f"journal entry {text!r} cannot be read: {error}") from error
