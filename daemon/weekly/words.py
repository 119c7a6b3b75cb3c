"""Figures and times of a weekly log as people read them: the site's units, its own wall clock."""

from __future__ import annotations

from collections.abc import Callable
from datetime import datetime
from zoneinfo import ZoneInfo

from daemon.clock import to_datetime
from daemon.due import FINEST_KG, FINEST_US_KG, volume_words
from daemon.moisture.air import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.moisture.description import WATER_KG_PER_M3
from daemon.site.types import Site
from daemon.units import from_si, show_difference, show_flow, show_percent
from daemon.views import Interval
from daemon.weekly.records import NOT_WATCHED

NOT_KNOWN = "not known"
VERDICT_WORDS = {
    "wait": "wait",
    "care": "care",
    "dry enough": "dry enough",
    "unknown": "could not tell",
    NOT_WATCHED: "not watched",
}


class Words:
    """The words of one site."""

    def __init__(self, site: Site) -> None:
        self.site = site
        self._zone = ZoneInfo(site.timezone)

    # ---- times ----

    def local(self, at_us: int) -> datetime:
        """A time on the shop's wall."""
        return to_datetime(at_us).astimezone(self._zone)

    def when(self, at_us: int) -> str:
        """ "Tue 1 Dec, 09:00"."""
        local = self.local(at_us)
        return f"{local:%a} {local.day} {local:%b}, {local:%H:%M}"

    def span(self, from_us: int, to_us: int) -> str:
        """ "Tue 1 Dec, 09:00 to 14:00"."""
        first, last = self.local(from_us), self.local(to_us)
        same = first.date() == last.date()
        return f"{self.when(from_us)} to {f'{last:%H:%M}' if same else self.when(to_us)}"

    # ---- figures ----

    def water(self, kg: float) -> str:
        """A mass of water as a volume."""
        return volume_words(self.site, kg)

    def waters(self, interval: Interval | None) -> str:
        """ "410 ml (300 to 560 ml)", all in the unit of the largest."""
        if interval is None:
            return NOT_KNOWN
        unit = self.water(interval.p95).rpartition(" ")[2]
        return _interval(interval, lambda kg: f"{_three(self._volume(kg, unit))} {unit}")

    def _volume(self, kg: float, unit: str) -> float:
        """In that unit, no finer than anybody can measure."""
        step_kg = FINEST_US_KG if self.site.units == "us" else FINEST_KG
        return from_si(round(kg / step_kg) * step_kg / WATER_KG_PER_M3, unit, "volume")

    def difference(self, kelvin: float) -> str:
        """ "3 K" or "5.4 degF"."""
        return show_difference(kelvin, self.site.units)

    def differences(self, p05_k: float, p50_k: float, p95_k: float) -> str:
        """ "6 K (4.2 to 8.9 K)"."""
        return _interval(Interval(p05_k, p50_k, p95_k), self.difference)

    def air(self, kg: float) -> str:
        """Dry air as a volume of reference air."""
        m3 = kg / REFERENCE_DRY_AIR_KG_PER_M3
        unit = "ft3" if self.site.units == "us" else "m3"
        return f"{_three(from_si(m3, unit, 'volume'))} {unit}"

    def airs(self, interval: Interval | None) -> str:
        """The same with its interval."""
        return NOT_KNOWN if interval is None else _interval(interval, self.air)

    def flows(self, values_m3_per_s: tuple[float, float, float]) -> str:
        """ "12 L/min (9 to 15 L/min)"."""
        return _interval(Interval(*values_m3_per_s), lambda f: show_flow(f, self.site.units))

    def money(self, values: tuple[float, float, float]) -> str:
        """ "1.90 EUR (1.20 to 2.80 EUR)"."""
        currency = self.site.costs.currency
        return _interval(Interval(*values), lambda each: f"{each:.2f} {currency}".strip())


def hours(seconds: float) -> str:
    """ "12.5 h"; short times in minutes and seconds."""
    if seconds <= 0.0:
        return "0 h"
    if seconds < 59.5:
        return f"{seconds:.0f} s"
    if seconds < 3570.0:
        return f"{seconds / 60.0:.0f} min"
    text = f"{seconds / 3600.0:.1f}"
    return f"{text.removesuffix('.0')} h"


def hours_between(interval: Interval | None) -> str:
    """ "12.5 h (11 to 14 h)"; one figure where all agree."""
    if interval is None:
        return NOT_KNOWN
    if hours(interval.p05) == hours(interval.p95):
        return hours(interval.p50)
    return _interval(interval, hours)


def percents(interval: Interval | None) -> str:
    """ "42 % (38 to 47 %)"; one figure where all agree."""
    if interval is None:
        return NOT_KNOWN
    shown = [show_percent(round(each, 2)) for each in interval.values]
    if shown[0] == shown[2]:
        return shown[1]
    return f"{shown[1]} ({shown[0].split(' ')[0]} to {shown[2]})"


def counted(number: int, one: str, many: str = "") -> str:
    """ "1 drain", "3 drains"."""
    return f"{number} {one if number == 1 else many or one + 's'}"


def _interval(interval: Interval, show: Callable[[float], str]) -> str:
    low, middle, high = (show(each) for each in interval.values)
    if low == high:
        return middle
    number, _, unit = low.partition(" ")
    return f"{middle} ({number if high.endswith(f' {unit}') else low} to {high})"


def _three(value: float) -> str:
    return f"{float(f'{value:.3g}'):,.10g}".replace(",", " ") if value >= 1e4 else f"{value:.3g}"
