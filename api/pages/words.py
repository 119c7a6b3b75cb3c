"""Figures and times as a page says them: in the shop's units, on the shop's wall clock."""

from __future__ import annotations

from dataclasses import dataclass, field
from zoneinfo import ZoneInfo

from daemon import due, expected
from daemon.clock import DAY_US, HOUR_US, MINUTE_US, SECOND_US, to_datetime
from daemon.site.types import Site
from daemon.units import (
    show_barometer,
    show_difference,
    show_percent,
    show_pressure,
    show_temperature,
)
from daemon.views import Interval

_TIED = str.maketrans({" ": "\N{NO-BREAK SPACE}"})


def tied(text: str) -> str:
    """With its spaces made unbreakable: a figure and its unit stay on one line."""
    return text.translate(_TIED)


@dataclass(frozen=True, slots=True)
class Words:
    """The words of one site. Every method is a filter of the page templates, by its own name."""

    site: Site
    _zone: ZoneInfo = field(init=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "_zone", ZoneInfo(self.site.timezone))

    # ---- figures; arguments are SI ----

    def volume(self, kg: float) -> str:
        """A mass of water as "410 ml" or "13.9 oz"."""
        return tied(due.volume_words(self.site, kg))

    def between(self, p05_kg: float, p95_kg: float) -> str:
        """The ends of an interval of water: "300 to 560 ml"; one figure where both read alike."""
        low, high = (due.volume_words(self.site, each) for each in (p05_kg, p95_kg))
        return tied(low) if low == high else self._ends(low, high)

    def temperature(self, kelvin: float) -> str:
        """ "20 degC" or "68 degF"."""
        return tied(show_temperature(kelvin, self.site.units))

    def difference(self, kelvin: float) -> str:
        """ "3 K" or "5.4 degF"."""
        return tied(show_difference(kelvin, self.site.units))

    def differences(self, interval: Interval) -> str:
        """The ends of an interval of differences: "3.6 to 6 K"."""
        return self._ends(self.difference(interval.p05), self.difference(interval.p95))

    def percent(self, fraction: float) -> str:
        """ "55 %"."""
        return tied(show_percent(round(fraction, 2)))

    def gauge_pressure(self, absolute_pa: float, atmosphere_pa: float) -> str:
        """A pressure as a gauge shows it: "8 bar" or "116 psi"."""
        return tied(show_pressure(absolute_pa - atmosphere_pa, self.site.units, gauge=True))

    def temperatures(self, interval: Interval) -> str:
        """The ends of an interval of temperatures: "17.2 to 23.4 degC"."""
        return self._ends(self.temperature(interval.p05), self.temperature(interval.p95))

    def percents(self, interval: Interval) -> str:
        """The ends of an interval of fractions: "45 to 58 %"."""
        return self._ends(self.percent(interval.p05), self.percent(interval.p95))

    def gauge_pressures(self, interval: Interval, atmosphere_pa: float) -> str:
        """The ends of an interval of pressures as a gauge shows them: "7.4 to 7.7 bar"."""
        low, high = (self.gauge_pressure(each, atmosphere_pa) for each in interval.values[::2])
        return self._ends(low, high)

    def barometer(self, absolute_pa: float) -> str:
        """The atmosphere's pressure: "1013 hPa" or "29.92 inHg"."""
        return tied(show_barometer(absolute_pa, self.site.units))

    def barometers(self, interval: Interval) -> str:
        """The ends of an interval of the atmosphere's pressure: "1012 to 1014 hPa"."""
        return self._ends(self.barometer(interval.p05), self.barometer(interval.p95))

    @staticmethod
    def _ends(low: str, high: str) -> str:
        low, high = low.replace("\N{NO-BREAK SPACE}", " "), high.replace("\N{NO-BREAK SPACE}", " ")
        number, unit = low.split(" ", 1)
        return tied(f"{number if high.endswith(f' {unit}') else low} to {high}")

    # ---- times; arguments are microseconds since 1970 UTC ----

    def day_and_time(self, time_us: int) -> str:
        """ "Tue 1 Dec, 09:00"."""
        local = to_datetime(time_us).astimezone(self._zone)
        return tied(f"{local:%a} {local.day} {local:%b}, {local:%H:%M}")

    def time(self, time_us: int) -> str:
        """The time of day: "09:00"."""
        return f"{to_datetime(time_us).astimezone(self._zone):%H:%M}"

    def coming(self, time_us: int, now_us: int) -> str:
        """A time ahead as people say it: "14:30", "tomorrow 10:00", "Thu 10:00", "Thu 12 Mar"."""
        return tied(expected.when(self.site, time_us, now_us))

    def past(self, time_us: int, now_us: int) -> str:
        """A time behind: "just now", "8 s ago", "5 min ago", "today 09:00", "Mon 30 Nov, 17:00"."""
        gone_us = now_us - time_us
        if gone_us < 2 * SECOND_US:
            return "just now"
        if gone_us < MINUTE_US:
            return tied(f"{gone_us // SECOND_US} s ago")
        if gone_us < HOUR_US:
            return tied(f"{gone_us // MINUTE_US} min ago")
        same_day = self._day(time_us) == self._day(now_us)
        if gone_us < DAY_US and same_day:
            return tied(f"today {self.time(time_us)}")
        return self.day_and_time(time_us)

    def _day(self, time_us: int) -> int:
        return to_datetime(time_us).astimezone(self._zone).toordinal()
