"""Real lines: what they ask of gpiod 2, and how its events become edges on the wall clock."""

from __future__ import annotations

import datetime
from types import SimpleNamespace
from typing import Any

import pytest

from sensors.lines import Edge, GpiodLines, LineSettings

gpiod = pytest.importorskip("gpiod")
RISING = gpiod.EdgeEvent.Type.RISING_EDGE.value
FALLING = gpiod.EdgeEvent.Type.FALLING_EDGE.value
S_NS = 1_000_000_000


class Request:
    """The part of gpiod's LineRequest that we use, fed by hand."""

    def __init__(self) -> None:
        self.events: list[Any] = []
        self.value = gpiod.line.Value.ACTIVE
        self.released = 0

    def wait_edge_events(self, timeout: float) -> bool:
        assert timeout == 0  # never waits: the tick's time is not ours
        return bool(self.events)

    def read_edge_events(self) -> list[Any]:
        events, self.events = self.events[:2], self.events[2:]
        return events

    def get_value(self, number: int) -> Any:
        assert number == 17
        return self.value

    def release(self) -> None:
        self.released += 1

    def add(self, kind: int, time_ns: int, seq: int) -> None:
        self.events.append(gpiod.EdgeEvent(kind, time_ns, 17, seq, seq))


class Rig:
    """gpiod with its own types and a chip of ours; clocks by hand."""

    def __init__(self) -> None:
        self.request = Request()
        self.asked: dict[str, Any] = {}
        self.wall_ns = 1_000 * S_NS
        self.monotonic_ns = 50 * S_NS

    def request_lines(self, path: str, **asked: Any) -> Request:
        self.asked = {"path": path, **asked}
        return self.request

    def lines(self) -> GpiodLines:
        module = SimpleNamespace(
            line=gpiod.line,
            LineSettings=gpiod.LineSettings,
            EdgeEvent=gpiod.EdgeEvent,
            request_lines=self.request_lines,
        )
        return GpiodLines(
            "/dev/gpiochip0", lambda: self.wall_ns, lambda: self.monotonic_ns, gpiod=module
        )


def test_the_kernel_is_asked_to_debounce_and_to_stamp() -> None:
    rig = Rig()
    rig.lines().request(17, LineSettings("down", 20_000))
    settings = rig.asked["config"][17]
    assert rig.asked["path"] == "/dev/gpiochip0"
    assert rig.asked["event_buffer_size"] == 1024
    assert settings.direction == gpiod.line.Direction.INPUT
    assert settings.edge_detection == gpiod.line.Edge.BOTH
    assert settings.bias == gpiod.line.Bias.PULL_DOWN
    assert settings.debounce_period == datetime.timedelta(milliseconds=20)
    assert settings.event_clock == gpiod.line.Clock.MONOTONIC


def test_events_become_edges_on_the_wall_clock() -> None:
    rig = Rig()
    line = rig.lines().request(17, LineSettings())
    rig.request.add(FALLING, 48 * S_NS, 1)
    rig.request.add(RISING, 49 * S_NS, 2)
    rig.request.add(FALLING, 50 * S_NS, 3)
    assert line.edges(999 * S_NS) == [Edge(998 * S_NS, 0, 1), Edge(999 * S_NS, 1, 2)]
    assert line.edges(1_000 * S_NS) == [Edge(1_000 * S_NS, 0, 3)]
    assert line.edges(2_000 * S_NS) == []


def test_a_step_of_the_wall_clock_moves_with_the_edges() -> None:
    rig = Rig()
    line = rig.lines().request(17, LineSettings())
    rig.wall_ns += 3_600 * S_NS  # a time server sets the clock an hour ahead
    rig.request.add(FALLING, 50 * S_NS - 5, 1)
    assert line.edges(rig.wall_ns) == [Edge(rig.wall_ns - 5, 0, 1)]


def test_the_level_is_electrical() -> None:
    rig = Rig()
    line = rig.lines().request(17, LineSettings())
    assert line.level() == 1
    rig.request.value = gpiod.line.Value.INACTIVE
    assert line.level() == 0


def test_a_line_is_given_back_once_and_then_says_so() -> None:
    rig = Rig()
    line = rig.lines().request(17, LineSettings())
    line.close()
    line.close()
    assert rig.request.released == 1
    with pytest.raises(OSError, match="given back"):
        line.edges(0)


def test_a_chip_that_is_not_there_is_an_os_error() -> None:
    lines = GpiodLines("/dev/gpiochip97", lambda: 0, lambda: 0)
    with pytest.raises(OSError, match="No such file"):
        lines.request(17, LineSettings())
