"""Emulated GPIO lines: a list of (ns, level) per line, with the kernel's debounce and numbering.

Source of the debounce: Linux, drivers/gpio/gpiolib-cdev.c: every raw edge restarts the wait; when
the line was quiet for the whole time an edge is reported, stamped with the end of the wait, if the
level is another than before.
"""

from __future__ import annotations

import bisect
import errno
import threading
from collections.abc import Sequence

from sensors.lines import Edge, LineSettings

_KEPT = 256


class EmulatedLine:
    """One line, with its electrical level over time; high (open, pulled up) before the first."""

    def __init__(self, level: int = 1) -> None:
        self.history: list[tuple[int, int]] = []  # (wall ns, level), in order of time
        self.now_ns = 0  # up to here somebody has looked; a request begins here
        self.missing = False  # no such chip, or another program has the line
        self.lose = 0  # so many of the next edges are lost, as when the kernel's buffer is full
        self._first_level = level
        self._lock = threading.RLock()  # the shop writes, a bus thread reads

    def set(self, time_ns: int, level: int) -> None:
        """The level from that time on. Times must not go back."""
        with self._lock:
            if self.history and time_ns < self.history[-1][0]:
                raise ValueError(f"{time_ns} ns is before the line's last change")
            if level != self.level_at(time_ns):
                self.history.append((time_ns, level))

    def bounce(self, time_ns: int, level: int, times: int = 5, every_ns: int = 400_000) -> None:
        """Go to a level as a real contact does: there and back a few times first."""
        for number in range(times):
            self.set(time_ns + 2 * number * every_ns, level)
            self.set(time_ns + (2 * number + 1) * every_ns, 1 - level)
        self.set(time_ns + 2 * times * every_ns, level)

    def level_at(self, time_ns: int) -> int:
        with self._lock:
            before = bisect.bisect_right(self.history, time_ns, key=lambda change: change[0])
            return self.history[before - 1][1] if before else self._first_level

    def changes(self) -> list[tuple[int, int]]:
        """A copy of the history."""
        with self._lock:
            return list(self.history)

    def forget_before(self, time_ns: int) -> None:
        """Drop old history, keeping the level it led to."""
        with self._lock:
            self._first_level = self.level_at(time_ns)
            self.history = [change for change in self.history if change[0] > time_ns]


class EmulatedRequest:
    """A line as a program holds it."""

    def __init__(self, line: EmulatedLine, settings: LineSettings) -> None:
        self._line = line
        self._debounce_ns = settings.debounce_us * 1000
        self._seen_ns = line.now_ns
        self._level = line.level_at(line.now_ns)
        self._seq = 0
        self._closed = False

    def level(self) -> int:
        self._look()
        return self._level

    def edges(self, until_ns: int) -> Sequence[Edge]:
        self._look()
        found = []
        for at_ns, level in self._quiet(until_ns):
            self._level = level
            self._seq += 1
            if self._line.lose > 0:
                self._line.lose -= 1
            else:
                found.append(Edge(at_ns, level, self._seq))
        self._seen_ns = max(self._seen_ns, until_ns)
        self._line.now_ns = max(self._line.now_ns, until_ns)
        if len(self._line.history) > _KEPT:
            self._line.forget_before(self._seen_ns - self._debounce_ns)
        return found

    def close(self) -> None:
        self._closed = True

    def _look(self) -> None:
        if self._closed:
            raise OSError(errno.EBADF, "the line was given back")
        if self._line.missing:
            raise OSError(errno.ENODEV, "No such device")

    def _quiet(self, until_ns: int) -> list[tuple[int, int]]:
        """Changes that a debounce reports in (seen, until]."""
        history = self._line.changes()
        reported, level = [], self._level
        for number, (at_ns, at_level) in enumerate(history):
            due_ns = at_ns + self._debounce_ns
            next_ns = history[number + 1][0] if number + 1 < len(history) else None
            if due_ns <= self._seen_ns or (next_ns is not None and next_ns < due_ns):
                continue
            if due_ns > until_ns:
                break
            if at_level != level:
                reported.append((due_ns, at_level))
                level = at_level
        return reported


class EmulatedOutput:
    """A line that a program switches: its level, and every level it was set to."""

    def __init__(self, active_high: bool) -> None:
        self._active_high = active_high
        self.levels = [int(not active_high)]  # off
        self.missing = False  # another program takes the line meanwhile
        self.closed = False

    @property
    def level(self) -> int:
        return self.levels[-1]

    def set(self, on: bool) -> None:
        if self.closed:
            raise OSError(errno.EBADF, "the line was given back")
        if self.missing:
            raise OSError(errno.ENODEV, "No such device")
        self.levels.append(int(on == self._active_high))

    def close(self) -> None:
        if not self.closed:
            self.levels.append(int(not self._active_high))
            self.closed = True


class EmulatedLines:
    """The lines of one chip, made when they are first named."""

    def __init__(self) -> None:
        self.lines: dict[int, EmulatedLine] = {}
        self.outputs: dict[int, EmulatedOutput] = {}  # the last request of each
        self.refuse: set[int] = set()  # outputs that another program has

    def line(self, number: int) -> EmulatedLine:
        return self.lines.setdefault(number, EmulatedLine())

    def request(self, number: int, settings: LineSettings) -> EmulatedRequest:
        line = self.line(number)
        if line.missing:
            raise OSError(errno.ENODEV, "No such device")
        return EmulatedRequest(line, settings)

    def output(self, number: int, active_high: bool) -> EmulatedOutput:
        if number in self.refuse:
            raise OSError(errno.EBUSY, "Device or resource busy")
        self.outputs[number] = EmulatedOutput(active_high)
        return self.outputs[number]
