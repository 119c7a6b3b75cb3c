"""Time: the only module that may ask the machine what time it is.

Wall-clock times are integers, microseconds since 1970-01-01 UTC (`..._us`). Waiting and
pacing use a monotonic clock in seconds, which no time server can turn back.
"""

from __future__ import annotations

import math
import re
import threading
import time
from datetime import UTC, datetime
from typing import Protocol

SECOND_US = 1_000_000
MINUTE_US = 60 * SECOND_US
HOUR_US = 60 * MINUTE_US
DAY_US = 24 * HOUR_US

_RFC3339 = re.compile(
    r"(\d{4})-(\d{2})-(\d{2})[Tt ](\d{2}):(\d{2}):(\d{2})(\.\d{1,9})?([Zz]|[+-]\d{2}:\d{2})\Z",
    re.ASCII,
)
_EARLIEST_US = int(datetime.min.replace(tzinfo=UTC).timestamp()) * SECOND_US
_LATEST_US = int(datetime.max.replace(tzinfo=UTC, microsecond=0).timestamp()) * SECOND_US


class Clock(Protocol):
    """What the daemon asks of a clock; tests and the demo bring their own."""

    def now_us(self) -> int:
        """Wall-clock time, microseconds since 1970 UTC."""
        ...

    def monotonic(self) -> float:
        """Seconds on a clock that only goes forward."""
        ...

    def wait(self, seconds: float, stop: threading.Event) -> bool:
        """Wait that long on this clock, or until `stop` is set; says whether it was set."""
        ...


class SystemClock:
    """The machine's own clocks."""

    def now_us(self) -> int:
        return time.time_ns() // 1000

    def monotonic(self) -> float:
        return time.monotonic()

    def wait(self, seconds: float, stop: threading.Event) -> bool:
        return stop.wait(max(0.0, seconds))


class ScaledClock:
    """A clock that runs `factor` times as fast as the machine's, from `start_us`: the demo's.

    It stands still rather than run more than `patience_s` of its own seconds ahead of whoever
    waits on it: on a machine that is too slow for the factor nothing is left out, it only takes
    longer. One thread waits; any may ask.
    """

    def __init__(self, factor: float, start_us: int, patience_s: float = math.inf) -> None:
        self.factor = factor
        self._start_us = start_us
        self._patience_s = patience_s
        self._lock = threading.Lock()
        self._origin = time.monotonic()
        self._most_s = patience_s

    def monotonic(self) -> float:
        with self._lock:
            return self._now_s()

    def _now_s(self) -> float:
        return min((time.monotonic() - self._origin) * self.factor, self._most_s)

    def now_us(self) -> int:
        return self._start_us + round(self.monotonic() * SECOND_US)

    def wait(self, seconds: float, stop: threading.Event) -> bool:
        seconds = max(0.0, seconds)
        with self._lock:
            now_s = self._now_s()
            self._origin = time.monotonic() - now_s / self.factor
            self._most_s = now_s + seconds + self._patience_s
        return stop.wait(seconds / self.factor)


def parse_rfc3339(text: str) -> int:
    """Microseconds since 1970 UTC from an RFC 3339 time with an offset, else ValueError."""
    match = _RFC3339.match(text.strip())
    if match is None:
        raise ValueError(
            f'"{text}" is not an RFC 3339 time with an offset; write it like 2026-03-02T07:10:00Z'
        )
    year, month, day, hour, minute, second = (int(part) for part in match.groups()[:6])
    fraction = round(float(match[7] or 0) * SECOND_US)
    offset_us = 0
    if match[8] not in "Zz":
        if not (int(match[8][1:3]) < 24 and int(match[8][4:6]) < 60):
            raise ValueError(f'"{text}" has an offset that does not exist; write it like +01:00')
        sign = -1 if match[8][0] == "-" else 1
        offset_us = sign * (int(match[8][1:3]) * HOUR_US + int(match[8][4:6]) * MINUTE_US)
    try:
        whole = datetime(year, month, day, hour, minute, second, tzinfo=UTC)
    except ValueError as error:
        raise ValueError(f'"{text}" is not a time that exists ({error})') from None
    time_us = int(whole.timestamp()) * SECOND_US + fraction - offset_us
    if not _EARLIEST_US <= time_us <= _LATEST_US:  # the offset took it out of the calendar
        raise ValueError(f'"{text}" is not a time that exists (year out of range)')
    return time_us


def format_rfc3339(time_us: int) -> str:
    """RFC 3339 in UTC, ending in Z; whole seconds without a fraction, else six decimals."""
    seconds, fraction = divmod(time_us, SECOND_US)
    text = datetime.fromtimestamp(seconds, UTC).replace(tzinfo=None).isoformat()
    return f"{text}.{fraction:06d}Z" if fraction else f"{text}Z"


def to_datetime(time_us: int) -> datetime:
    """An aware UTC datetime (whole microseconds are kept)."""
    seconds, fraction = divmod(time_us, SECOND_US)
    return datetime.fromtimestamp(seconds, UTC).replace(microsecond=fraction)
