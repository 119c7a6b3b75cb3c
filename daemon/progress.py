"""How far a long command is, on a terminal and nowhere else."""

from __future__ import annotations

from typing import TextIO

from daemon.clock import Clock

FIRST_AFTER_S = 1.0  # what is done sooner needs no word
AGAIN_AFTER_S = 0.25


class Progress:
    """One line that is written over; nothing unless the stream is a terminal."""

    def __init__(self, stream: TextIO, clock: Clock, what: str) -> None:
        self._stream, self._clock, self._what = stream, clock, what
        self._next_s = clock.monotonic() + FIRST_AFTER_S
        self._shown = False
        self._on = stream.isatty()

    def at(self, share: float | None = None) -> None:
        """So much is done, 0 to 1; None: nobody can say how much."""
        if not self._on:
            return
        now_s = self._clock.monotonic()
        if now_s >= self._next_s:
            self._next_s = now_s + AGAIN_AFTER_S
            self._shown = True
            done = " ..." if share is None else f": {min(max(share, 0.0), 1.0):4.0%}"
            self._stream.write(f"\r{self._what}{done}")
            self._stream.flush()

    def end(self) -> None:
        """Take the line away again."""
        if self._shown:
            self._stream.write("\r" + " " * (len(self._what) + 6) + "\r")
            self._stream.flush()
            self._shown = False
