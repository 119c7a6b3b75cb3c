"""A channel that another device publishes over MQTT, as a plain number or a field of a JSON object.

Nothing to wire. A message counts at the time when it arrived; a retained one, whose age nobody
knows, does not count. A device that is not heard for `silent_after` is a fault: an old value never
stands in for a new one.
"""

from __future__ import annotations

import json
import math
from collections.abc import Sequence
from typing import Any, get_args

from daemon import units
from sensors import keys, reasons
from sensors.inbox import Inbox
from sensors.reading import Channel, Quantity, Reading, SensorFault, reading
from sensors.registry import Driver, Hardware, Key, SensorConfig, register

# quantity: kind of unit, step, lowest, highest, give or take (SI; errors are a cheap device's,
# "common practice, no source")
_KINDS: dict[str, tuple[units.Kind | None, float, float, float, float]] = {
    "temperature": ("temperature", 0.01, 200.0, 500.0, 1.0),
    "relative_humidity": (None, 1e-4, 0.0, 1.0, 0.05),
    "pressure": ("pressure", 1.0, -101_325.0, 5e6, 10_000.0),
    "contact": (None, 1.0, 0.0, 1.0, 0.0),
    "dew_point": ("temperature", 0.01, 150.0, 350.0, 3.0),
    "free_air_flow": ("flow", 1e-6, 0.0, 10.0, 1e-3),
}
_PLAIN_UNITS = {"%": 0.01, "1": 1.0}
_ON = {"on": 1.0, "true": 1.0, "closed": 1.0, "1": 1.0}
_OFF = {"off": 0.0, "false": 0.0, "open": 0.0, "0": 0.0}


class MqttChannel:
    """One quantity of one topic."""

    def __init__(self, config: SensorConfig, hardware: Hardware) -> None:
        settings = config.settings
        self._id = config.id
        self._channels = channels(config)
        self._topic = str(settings["topic"])
        self._field = str(settings["field"])
        self._unit = str(settings["unit"])
        self._silent_us = round(float(settings["silent_after"]) * 1e6)
        self._heard_us: int | None = None
        self._last_us: int | None = None
        self._inbox: Inbox = hardware.inbox()
        self._inbox.want(self._topic, self._id)

    @property
    def id(self) -> str:
        return self._id

    @property
    def channels(self) -> Sequence[Channel]:
        return self._channels

    def read(self, now_us: int) -> Sequence[Reading]:
        """A reading for each message since the last call, at its own time; none may have come."""
        messages = self._inbox.take(self._topic, self._id, now_us)
        after_us = now_us - 1 if self._last_us is None else self._last_us
        self._last_us = now_us
        if messages:
            self._heard_us = now_us
        elif self._heard_us is None:
            self._heard_us = now_us  # the first call begins the wait
        elif now_us - self._heard_us >= self._silent_us:
            raise SensorFault(self._id, reasons.SILENT, f"topic {self._topic}")
        found: list[Reading] = []
        for message in messages:
            at_us = max(message.arrived_us, after_us + 1)
            if at_us > now_us:  # several in one microsecond: the last one counts
                found.pop()
                at_us = now_us
            found.append(self._reading(message.payload, at_us))
            after_us = at_us
        return found

    def close(self) -> None:
        """The client keeps the connection: nothing to let go of."""

    def _reading(self, payload: bytes, at_us: int) -> Reading:
        (channel,) = self._channels
        value = self._value(payload)
        if value is None:
            return Reading(channel.name, math.nan, at_us, reasons.ERROR_ANSWER)
        return reading(channel, to_si(value, self._unit, channel.quantity), at_us)

    def _value(self, payload: bytes) -> float | None:
        """The number in a message; None when there is none."""
        text = payload.decode("utf-8", errors="replace").strip()
        try:
            found: Any = json.loads(text)
        except ValueError:
            found = text
        for name in self._field.split(".") if self._field else ():
            found = found.get(name) if isinstance(found, dict) else None
        word = str(found).strip().lower()
        if self._channels[0].quantity == "contact":
            return (_ON | _OFF).get(word)
        if isinstance(found, bool) or not isinstance(found, int | float | str):
            return None
        try:
            return float(found)
        except ValueError:
            return None


def to_si(value: float, unit: str, quantity: str) -> float:
    """A number in the unit that the site file names, in SI."""
    kind = _KINDS[quantity][0]
    if kind is None:
        return value * _PLAIN_UNITS[unit or "1"]
    return units.to_si(value, unit, kind)


def channels(config: SensorConfig) -> tuple[Channel, ...]:
    """One channel, named after its quantity."""
    settings = config.settings
    quantity: Quantity = settings["quantity"]
    _, step, lowest, highest, error = _KINDS[quantity]
    said = settings["give_or_take"]
    if said is not None and not _clashes(config):
        error = abs(
            to_si(said, settings["unit"], quantity) - to_si(0.0, settings["unit"], quantity)
        )
    gauge = quantity == "pressure" and settings["gauge"]
    return (
        Channel(f"{config.id}.{quantity}", quantity, step, lowest, highest, error, gauge=gauge),
    )


def _clashes(config: SensorConfig) -> tuple[tuple[str, str], ...]:
    """Whether the unit is one of the quantity's."""
    kind = _KINDS[config.settings["quantity"]][0]
    unit = config.settings["unit"]
    if kind is None:
        known = tuple(_PLAIN_UNITS)
        good = unit in (*known, "")
    else:
        known = units.units_of(kind)
        good = unit in known
    return () if good else (("unit", "write one of " + ", ".join(known)),)


MQTT_CHANNEL = register(
    Driver(
        name="mqtt-channel",
        summary="a quantity that another device publishes over MQTT",
        keys=(
            Key(
                "topic",
                keys.text(r"[^#+\s]+", "write the whole topic, without # and +"),
                meaning="the topic that the device publishes on",
            ),
            Key(
                "field",
                keys.text(r"[^\s]*", 'write the field\'s name, or "sensor.temperature" for nested'),
                "",
                "the field of a JSON object; left out when the message is the number itself",
            ),
            Key("quantity", keys.choice(*get_args(Quantity)), meaning="what the number is"),
            Key(
                "unit",
                keys.text(r"[\w/%]*", 'write the unit\'s name, like "degC"'),
                "",
                "the number's unit; contacts have none",
            ),
            Key("gauge", keys.yes_or_no, True, "a pressure above the atmosphere's"),
            Key(
                "give_or_take",
                keys.optional(keys.number(0.0, 1e6)),
                None,
                "the device's error, 95 % of the time, in the same unit",
            ),
            Key(
                "silent_after",
                keys.duration(1.0, 86_400.0),
                60.0,
                "how long the device may say nothing",
            ),
        ),
        channels=channels,
        occupies=lambda c: (f"MQTT topic {c.settings['topic']} field {c.settings['field']!r}",),
        bus=lambda c: "mqtt",
        open=MqttChannel,
        clashes=_clashes,
    )
)
