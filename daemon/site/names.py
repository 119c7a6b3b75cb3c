"""Who is called what in a site file, and which names are used where.

An unknown name is told once, where it was met first: one sensor that is spelled wrong in its own
table is one mistake, however many stations name it.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import NoReturn

from daemon.site.notes import Told, Unknown, nearest, suggestion
from sensors.reading import Channel, Quantity

QUANTITY_WORDS: Mapping[Quantity, str] = {
    "temperature": "a temperature",
    "relative_humidity": "a relative humidity",
    "pressure": "a pressure",
    "contact": "a contact",
    "dew_point": "a dew point",
    "free_air_flow": "a flow of air",
}


@dataclass(slots=True)
class Names:
    """The sensors' channels and the stations' ids, as far as they could be read."""

    channels: dict[str, Channel] = field(default_factory=dict)
    sensors: list[str] = field(default_factory=list)  # in the file's order
    broken_sensors: set[str] = field(default_factory=set)  # their channels are not known
    in_line: set[str] = field(default_factory=set)  # bled from the line: no room's air
    stations: list[str] = field(default_factory=list)
    used_channels: set[str] = field(default_factory=set)
    used_sensors: set[str] = field(default_factory=set)  # as a whole: an outlet's surroundings

    def channel(self, name: str, wanted: Quantity) -> Channel:
        """The channel of that name, noted as used. ValueError when it is unknown or no `wanted`."""
        found = self.channels.get(name)
        if found is None:
            self._unknown_channel(name, wanted)
        self.used_channels.add(name)
        if found.quantity != wanted:
            others = [c.name for c in self.channels.values() if c.quantity == wanted]
            raise ValueError(
                f"gives {QUANTITY_WORDS[found.quantity]}, but {QUANTITY_WORDS[wanted]} belongs "
                f"here{_these(others)}"
            )
        return found

    def of(self, sensor: str, quantity: Quantity) -> Channel | None:
        """A sensor's channel of a quantity, if it has one."""
        for channel in self.channels.values():
            if channel.sensor == sensor and channel.quantity == quantity:
                return channel
        return None

    def used(self, sensor: str) -> bool:
        """Whether anything in the file names this sensor or one of its channels."""
        return sensor in self.used_sensors or any(
            self.channels[name].sensor == sensor for name in self.used_channels
        )

    def free(self, *quantities: Quantity) -> list[str]:
        """Sensors in the shop's air that give all of these and that nothing names yet."""
        return [
            sensor
            for sensor in self.sensors
            if sensor not in self.in_line
            and not self.used(sensor)
            and all(self.of(sensor, quantity) for quantity in quantities)
        ]

    def sensor(self, name: str, what: str) -> str:
        """A sensor named as a whole, noted as used."""
        if name not in self.sensors:
            head = name.rsplit(".", 1)[0]
            if head in self.sensors:
                raise ValueError(f'name the sensor alone, as {what}: write "{head}"')
            raise Unknown("sensor", name, "no sensor has this id" + self._suggest(name))
        self.used_sensors.add(name)
        return name

    def station(self, name: object) -> str:
        """A station that another one names."""
        if not isinstance(name, str):
            raise ValueError("must be a station's id in quotes" + self._known_stations())
        if name not in self.stations:
            end = suggestion(name, self.stations, "; there is no [[station]] yet")
            raise Unknown("station", name, f"no station has this id{end}")
        return name

    def is_channel(self, text: str) -> bool:
        """Whether a text is meant as a channel and not as a literal."""
        head = text.rsplit(".", 1)[0]
        return head in self.sensors or text.lstrip()[:1] not in "+-\u2212.0123456789"

    def _known_stations(self) -> str:
        return f"; known: {', '.join(self.stations)}" if self.stations else ""

    def _unknown_channel(self, name: str, wanted: Quantity) -> NoReturn:
        sensor, _, quantity = name.rpartition(".")
        if not sensor:
            self._no_quantity(name, wanted)
        if sensor in self.broken_sensors:
            raise Told
        if sensor not in self.sensors:
            right = f"{nearest(sensor, self.sensors)}.{quantity}"
            end = f'; did you mean "{right}"?' if sensor and right in self.channels else ""
            end = end or self._suggest(sensor)
            raise Unknown("sensor", sensor, f'no sensor has the id "{sensor}"{end}', quantity)
        own = [each for each in self.channels if each.rsplit(".", 1)[0] == sensor]
        end = suggestion(name, own)
        raise Unknown("channel", name, f'the sensor "{sensor}" gives no "{quantity}"{end}')

    def _no_quantity(self, name: str, wanted: Quantity) -> NoReturn:
        """A word that is neither a literal nor "sensor.quantity"."""
        if name in self.broken_sensors:
            raise Told
        mine = self.of(name, wanted)
        if mine is not None:
            raise ValueError(f'names a sensor, not what it gives; write "{mine.name}"')
        fitting = [c.name for c in self.channels.values() if c.quantity == wanted]
        raise ValueError(
            f'is neither a value with its unit nor a channel "sensor.quantity"{_these(fitting)}'
        )

    def _suggest(self, name: str) -> str:
        return suggestion(name, self.sensors, "; there is no [[sensor]] yet")


def _these(names: Iterable[str]) -> str:
    names = list(names)
    return f"; there is {', '.join(names)}" if names else ""
