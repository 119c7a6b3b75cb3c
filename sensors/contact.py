"""Contact: a switch that is open or closed, on a GPIO line, with its edges at their own times.

Used for the compressor's run and loaded contacts, a float switch in a trap, and the push button
beside a trap that says "drained". Wiring: see `sensors/lines.py`; as it comes, the contact pulls
the line to ground and the Pi's pull-up holds it high while it is open.

An edge comes out of the kernel once the line was quiet for the debounce time, so both edges are
late by that time and a run's length is right.
"""

from __future__ import annotations

from collections.abc import Sequence

from sensors import keys, reasons
from sensors.guard import faults
from sensors.lines import Edge, Line, LineSettings
from sensors.reading import Channel, Reading, SensorFault, reading
from sensors.registry import Driver, Hardware, Key, SensorConfig, register

LINE_KEYS = (
    Key(
        "chip",
        keys.text(r"/dev/gpiochip\d+", 'write the chip\'s device, like "/dev/gpiochip0"'),
        "/dev/gpiochip0",
        "the GPIO chip; gpiochip0 on a Pi with a current kernel",
    ),
    Key("line", keys.whole(0, 511), meaning="the line's number on the chip: GPIO 17 is 17"),
    Key("pull", keys.choice("up", "down", "none"), "up", "the Pi's own resistor on the line"),
)
TRAP_KEY = Key(
    "trap",
    keys.text(r"[a-z0-9][a-z0-9-]*", "write the id of the trap's station"),
    meaning="the trap it belongs to",
)
CLOSED_KEY = Key("closed", keys.choice("low", "high"), "low", "the line's level while closed")


class LineReader:
    """Edges of one line since the last call, at times that never go back."""

    def __init__(self, sensor: str, line: Line) -> None:
        self._sensor = sensor
        self._line = line
        self._last_us: int | None = None
        self._last_seq = 0
        self._level = line.level()
        self._doubtful = False

    def advance(self, now_us: int) -> tuple[list[tuple[int, int]], int]:
        """(time_us, level) of the edges up to now, and the level now.

        SensorFault when edges were lost: the level is known again from the next call on.
        """
        edges = self._line.edges(now_us * 1000 + 999)
        whole = [self._follows(edge) for edge in edges]
        whole.append(self._agrees(bool(edges)))
        after_us, self._last_us = self._last_us, now_us
        if not all(whole):
            raise SensorFault(self._sensor, reasons.EDGES_LOST, f"{len(edges)} edges arrived")
        return _in_time(edges, after_us, now_us), self._level

    def close(self) -> None:
        self._line.close()

    def _follows(self, edge: Edge) -> bool:
        """Whether this edge is the next one: by its number, and by changing the level."""
        # the first edge may have come between asking for the line and reading its level
        changes = edge.level != self._level or edge.seq == 1
        follows = changes and edge.seq == self._last_seq + 1
        self._level, self._last_seq = edge.level, edge.seq
        return follows

    def _agrees(self, edges_came: bool) -> bool:
        """Whether the line is where its edges say: a difference may only be an edge on its way."""
        level = self._line.level()
        lost = self._doubtful and not edges_came and level != self._level
        self._doubtful = level != self._level and not lost
        if lost:
            self._level = level
        return not lost


def _in_time(edges: Sequence[Edge], after_us: int | None, now_us: int) -> list[tuple[int, int]]:
    """Times in (after, now], strictly rising: a stepped wall clock must not reorder edges."""
    timed: list[tuple[int, int]] = []
    for edge in edges:
        at_us = min(edge.time_ns // 1000, now_us)
        if after_us is not None:
            at_us = max(at_us, after_us + 1)
        if at_us > now_us:  # more edges than microseconds: the last one says how it ended
            timed[-1] = (now_us, edge.level)
            continue
        timed.append((at_us, edge.level))
        after_us = at_us
    return timed


class Contact:
    """One contact on one line."""

    def __init__(self, config: SensorConfig, hardware: Hardware) -> None:
        settings = config.settings
        self._id = config.id
        self._channels = channels(config)
        self._closed_level = int(settings["closed"] == "high")
        asked = LineSettings(settings["pull"], round(settings["debounce"] * 1e6))
        with faults(self._id):
            line = hardware.lines(settings["chip"]).request(int(settings["line"]), asked)
            self._reader = LineReader(self._id, line)

    @property
    def id(self) -> str:
        return self._id

    @property
    def channels(self) -> Sequence[Channel]:
        return self._channels

    def read(self, now_us: int) -> Sequence[Reading]:
        """The edges since the last call, then the state now (once, when an edge is at now)."""
        with faults(self._id):
            edges, level = self._reader.advance(now_us)
        if not edges or edges[-1][0] < now_us:
            edges.append((now_us, level))
        return [
            reading(self._channels[0], float(at_level == self._closed_level), at_us)
            for at_us, at_level in edges
        ]

    def close(self) -> None:
        self._reader.close()


def channels(config: SensorConfig) -> tuple[Channel, ...]:
    """0 open, 1 closed."""
    return (Channel(f"{config.id}.contact", "contact", 1.0, 0.0, 1.0, 0.0),)


def _debounce(default_s: float) -> Key:
    meaning = "how long the line must be quiet before a change counts"
    return Key("debounce", keys.duration(0.0, 5.0), default_s, meaning)


def _occupies(config: SensorConfig) -> tuple[str, ...]:
    return (f"{config.settings['chip']} line {config.settings['line']}",)


def _bus(config: SensorConfig) -> str:
    return f"gpio {config.settings['chip']}"


CONTACT = register(
    Driver(
        name="contact",
        summary="a switch, as the compressor's run or loaded contact",
        keys=(*LINE_KEYS, CLOSED_KEY, _debounce(0.02)),
        channels=channels,
        occupies=_occupies,
        bus=_bus,
        open=Contact,
    )
)
FLOAT_SWITCH = register(
    Driver(
        name="float-switch",
        summary="a float in a trap, closed at and above a level",
        keys=(
            *LINE_KEYS,
            CLOSED_KEY,
            _debounce(2.0),  # the water moves when the compressor starts
            TRAP_KEY,
            Key(
                "closes_at",
                keys.quantity("volume", 1e-6, 1.0),
                meaning='what the trap holds when it closes, like "80 ml"',
            ),
        ),
        channels=channels,
        occupies=_occupies,
        bus=_bus,
        open=Contact,
    )
)
DRAINED_BUTTON = register(
    Driver(
        name="drained-button",
        summary='a push button beside a trap: "I have drained it"',
        keys=(*LINE_KEYS, CLOSED_KEY, _debounce(0.05), TRAP_KEY),
        channels=channels,
        occupies=_occupies,
        bus=_bus,
        open=Contact,
    )
)
