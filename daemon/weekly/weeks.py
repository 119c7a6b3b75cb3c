"""ISO weeks in a shop's own time zone: Monday 00:00 to Monday 00:00, however long that is. Pure."""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta
from zoneinfo import ZoneInfo

from daemon.clock import HOUR_US, SECOND_US
from daemon.errors import WeekError
from daemon.site import hours as opening

_WRITTEN = re.compile(r"(\d{4})-?[Ww](\d{2})", re.ASCII)
_DAYS = 7
_YEARS = (1970, 9998)  # that every time zone can count


@dataclass(frozen=True, slots=True, order=True)
class Week:
    """A week of ISO 8601: it belongs to the year that its Thursday lies in."""

    year: int
    number: int

    @classmethod
    def read(cls, text: str) -> Week:
        """The week of "2026-W49"; WeekError when it is not one."""
        match = _WRITTEN.fullmatch(text.strip())
        if match is None:
            raise WeekError(f'"{text[:40]}" is not a week: write it like 2026-W49')
        week = cls(int(match[1]), int(match[2]))
        if not _YEARS[0] <= week.year <= _YEARS[1]:
            raise WeekError(
                f'"{text[:40]}": no log can be of {week.year}; years go from {_YEARS[0]} to '
                f"{_YEARS[1]}"
            )
        try:
            week.days()
        except ValueError:
            raise WeekError(
                f'"{text[:40]}": there is no week {week.number} in {week.year}; '
                "weeks go from W01 to W52 or W53"
            ) from None
        return week

    @classmethod
    def of(cls, day: date) -> Week:
        """The week that holds a day."""
        year, number, _ = day.isocalendar()
        return cls(year, number)

    def __str__(self) -> str:
        return f"{self.year:04d}-W{self.number:02d}"

    def days(self) -> list[date]:
        """Monday to Sunday."""
        monday = date.fromisocalendar(self.year, self.number, 1)
        return [monday + timedelta(number) for number in range(_DAYS)]

    def bounds_us(self, timezone: str) -> tuple[int, int]:
        """Its first moment in a zone, and the first one after it."""
        monday = self.days()[0]
        return midnight_us(timezone, monday), midnight_us(timezone, monday + timedelta(_DAYS))

    def before(self) -> Week:
        """The week before."""
        return Week.of(self.days()[0] - timedelta(1))

    def after(self) -> Week:
        """The week after."""
        return Week.of(self.days()[-1] + timedelta(1))


def midnight_us(timezone: str, day: date) -> int:
    """The first moment of a local day."""
    local = datetime(day.year, day.month, day.day, tzinfo=ZoneInfo(timezone))
    return int(local.astimezone(UTC).timestamp()) * SECOND_US


def week_at(timezone: str, at_us: int) -> Week:
    """The week that holds a time."""
    return Week.of(opening.local_day(timezone, at_us))


def last_full(timezone: str, now_us: int) -> Week:
    """The last week that is over."""
    return week_at(timezone, now_us).before()


def first_hour_us(at_us: int) -> int:
    """The first full hour, UTC, at or after a time.

    In a zone that is not whole hours off UTC, a local day's hours begin at half past, say.
    """
    return -(-at_us // HOUR_US) * HOUR_US
