"""GPIO lines: inputs with the kernel's debounce and time stamps, and the small surface drivers use.

Wiring: 3.3 V logic only; a contact between the line and ground with the Pi's own pull-up (about
50 kohm) serves short wires; long wires near a motor want an optocoupler and an external 4.7 kohm.
The motor's contact must be an isolated auxiliary contact, fitted by an electrician.

Source of debounce and events: Linux, Documentation/userspace-api/gpio and gpiod 2 (Python).
"""

from __future__ import annotations

import datetime
import errno
from collections import deque
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, Protocol

EVENT_BUFFER = 1024  # the kernel's own limit for one request is 16 a line unless asked for more


@dataclass(frozen=True, slots=True)
class LineSettings:
    """How a line is asked for."""

    pull: str = "up"  # "up", "down" or "none"
    debounce_us: int = 0


@dataclass(frozen=True, slots=True)
class Edge:
    """A debounced change of a line's electrical level."""

    time_ns: int  # wall clock, since 1970 UTC
    level: int  # after the edge: 0 low, 1 high
    seq: int  # 1, 2, 3 ... on this line; a gap means that edges were lost


class Line(Protocol):
    """One input line that was asked for."""

    def level(self) -> int:
        """The electrical level now, debounced: 0 low, 1 high."""
        ...

    def edges(self, until_ns: int) -> Sequence[Edge]:
        """Edges not handed out before and not later than that; later ones stay queued."""
        ...

    def close(self) -> None:
        """Give the line back. May be called twice."""
        ...


class OutputLine(Protocol):
    """One output line that was asked for; off until it is set."""

    def set(self, on: bool) -> None:
        """Switch it. OSError when it cannot be switched."""
        ...

    def close(self) -> None:
        """Switch it off and give it back. May be called twice."""
        ...


class Lines(Protocol):
    """The lines of one chip."""

    def request(self, number: int, settings: LineSettings) -> Line:
        """Ask for a line. OSError when there is no such line or another program has it."""
        ...

    def output(self, number: int, active_high: bool) -> OutputLine:
        """Ask for a line to switch, off. OSError as for `request`."""
        ...


class GpiodLines:
    """The lines of a `/dev/gpiochipN` through gpiod 2.

    `wall_ns` and `monotonic_ns` are read together to put the kernel's monotonic stamps on the wall
    clock, so that a step of the wall clock moves no edge that came after it.
    """

    def __init__(
        self,
        chip: str,
        wall_ns: Callable[[], int],
        monotonic_ns: Callable[[], int],
        gpiod: Any = None,
    ) -> None:
        self._chip = chip
        self._clocks = (wall_ns, monotonic_ns)
        self._gpiod = gpiod

    def request(self, number: int, settings: LineSettings) -> Line:
        gpiod = self._gpiod
        if gpiod is None:
            import gpiod  # noqa: PLC0415  # a Pi has it; nothing else needs it
        line = gpiod.line
        bias = {"up": line.Bias.PULL_UP, "down": line.Bias.PULL_DOWN, "none": line.Bias.DISABLED}
        wanted = gpiod.LineSettings(
            direction=line.Direction.INPUT,
            edge_detection=line.Edge.BOTH,
            bias=bias[settings.pull],
            debounce_period=datetime.timedelta(microseconds=settings.debounce_us),
            event_clock=line.Clock.MONOTONIC,
        )
        request = gpiod.request_lines(
            self._chip,
            consumer="dripleg",
            config={number: wanted},
            event_buffer_size=EVENT_BUFFER,
        )
        return _GpiodLine(request, number, self._clocks, gpiod)

    def output(self, number: int, active_high: bool) -> OutputLine:
        gpiod = self._gpiod
        if gpiod is None:
            import gpiod  # noqa: PLC0415  # a Pi has it; nothing else needs it
        line = gpiod.line
        wanted = gpiod.LineSettings(
            direction=line.Direction.OUTPUT,
            active_low=not active_high,
            output_value=line.Value.INACTIVE,
        )
        request = gpiod.request_lines(self._chip, consumer="dripleg", config={number: wanted})
        return _GpiodOutput(request, number, gpiod)


class _GpiodOutput:
    def __init__(self, request: Any, number: int, gpiod: Any) -> None:
        self._request, self._number = request, number
        self._values = (gpiod.line.Value.INACTIVE, gpiod.line.Value.ACTIVE)

    def set(self, on: bool) -> None:
        if self._request is None:
            raise OSError(errno.EBADF, "the line was given back")
        self._request.set_value(self._number, self._values[on])

    def close(self) -> None:
        request, self._request = self._request, None
        if request is None:
            return
        try:
            request.set_value(self._number, self._values[False])
        finally:
            request.release()


class _GpiodLine:
    def __init__(
        self,
        request: Any,
        number: int,
        clocks: tuple[Callable[[], int], Callable[[], int]],
        gpiod: Any,
    ) -> None:
        self._request = request
        self._number = number
        self._wall_ns, self._monotonic_ns = clocks
        self._active = gpiod.line.Value.ACTIVE
        self._rising = gpiod.EdgeEvent.Type.RISING_EDGE
        self._queue: deque[Edge] = deque()

    def level(self) -> int:
        return int(self._open().get_value(self._number) == self._active)

    def edges(self, until_ns: int) -> Sequence[Edge]:
        request = self._open()
        while request.wait_edge_events(0):
            to_wall_ns = self._wall_ns() - self._monotonic_ns()
            for event in request.read_edge_events():
                level = int(event.event_type == self._rising)
                when_ns = event.timestamp_ns + to_wall_ns
                self._queue.append(Edge(when_ns, level, event.line_seqno))
        ready = []
        while self._queue and self._queue[0].time_ns <= until_ns:
            ready.append(self._queue.popleft())
        return ready

    def close(self) -> None:
        if self._request is not None:
            self._request.release()
            self._request = None

    def _open(self) -> Any:
        if self._request is None:
            raise OSError(errno.EBADF, "the line was given back")
        return self._request
