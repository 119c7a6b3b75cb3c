"""Messages for the outside, built from transitions, alarms, trap and outlet views; pure.

Topics stand under `<prefix>/<site>`, `dripleg/alder-yard` for example:

    service            retained: running, stopped, gone (the last will)
    traps/<trap>       retained: what the trap holds
    outlets/<outlet>   retained: whether the air there, and the surface, are dry enough
    alarms/<alarm>     retained: how the alarm stands
    events             every alarm transition and reminder at least once, with its id, QoS 1
    weekly             retained: the newest week's log in short
    drains             inbound: a button or another device reports a drain
    drains/refused     why an inbound drain was not taken
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass

from daemon import payloads
from daemon.alarms import Alarm, Transition
from daemon.outlet_payloads import outlet_payload
from daemon.payloads import Service
from daemon.reminders import Reminder
from daemon.site.types import Mqtt, Site
from daemon.views import OutletView, TrapView

AT_LEAST_ONCE = 1  # MQTT's quality of service 1


@dataclass(frozen=True, slots=True)
class Message:
    """One MQTT message. `id` is that of the event it announces, "" for a state."""

    topic: str
    payload: bytes
    qos: int = AT_LEAST_ONCE
    retain: bool = False
    id: str = ""


@dataclass(frozen=True, slots=True)
class Waiting:
    """A message in the outbox with its row's number; numbers grow, and none is used twice."""

    number: int
    message: Message


@dataclass(frozen=True, slots=True)
class Topics:
    """The topics of one site."""

    base: str  # "dripleg/alder-yard"

    @classmethod
    def of(cls, site: Site, mqtt: Mqtt) -> Topics:
        return cls(f"{mqtt.prefix}/{site.id}")

    @property
    def service(self) -> str:
        return f"{self.base}/service"

    @property
    def events(self) -> str:
        return f"{self.base}/events"

    @property
    def weekly(self) -> str:
        return f"{self.base}/weekly"

    @property
    def drains(self) -> str:
        return f"{self.base}/drains"

    @property
    def refused_drains(self) -> str:
        return f"{self.base}/drains/refused"

    def trap(self, trap: str) -> str:
        return f"{self.base}/traps/{trap}"

    def outlet(self, outlet: str) -> str:
        return f"{self.base}/outlets/{outlet}"

    def alarm(self, alarm: str) -> str:
        return f"{self.base}/alarms/{alarm}"


def event_message(topics: Topics, transition: Transition) -> Message:
    """The event that announces a transition: for the outbox, in the transition's own tick."""
    payload = encode(payloads.event_payload(transition))
    return Message(topics.events, payload, id=transition.id)


def reminder_message(topics: Topics, reminder: Reminder) -> Message:
    """The event that is a reminder: for the outbox, in its own tick."""
    return Message(topics.events, encode(payloads.reminder_payload(reminder)), id=reminder.id)


def alarm_message(topics: Topics, alarm: Alarm) -> Message:
    """How an alarm stands: retained, the newest one counts."""
    return Message(topics.alarm(alarm.id), encode(payloads.alarm_payload(alarm)), retain=True)


def trap_message(topics: Topics, view: TrapView) -> Message:
    """What a trap holds: retained, the newest one counts."""
    return Message(topics.trap(view.trap), encode(payloads.trap_payload(view)), retain=True)


def outlet_message(topics: Topics, view: OutletView) -> Message:
    """Whether it is dry enough at an outlet: retained, the newest one counts."""
    return Message(topics.outlet(view.outlet), encode(outlet_payload(view)), retain=True)


def service_message(
    topics: Topics, state: Service, connected_us: int, at_us: int | None
) -> Message:
    """Whether the daemon runs: retained."""
    payload = encode(payloads.service_payload(state, connected_us, at_us))
    return Message(topics.service, payload, retain=True)


def encode(payload: Mapping[str, object]) -> bytes:
    """A payload as JSON in UTF-8."""
    return json.dumps(payload, ensure_ascii=False, allow_nan=False).encode()
