"""A weekly log as CSV, tidy: one figure a row, in the site's units.

Columns: section, item, quantity, low, median, high, unit. `low` and `high` are the ends of the
5 to 95 % interval; a figure without one has only `median`. Times are RFC 3339 in UTC, as text in
`median` with the unit `time`; what is not known is left out.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator

from daemon.clock import format_rfc3339
from daemon.hour_figures import Least
from daemon.moisture.air import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.moisture.description import WATER_KG_PER_M3
from daemon.site.types import Site
from daemon.units import Kind, from_si
from daemon.views import Interval
from daemon.weekly.records import OutletWeek, PlantWeek, TrapWeek, WeekLog

HEADER = ("section", "item", "quantity", "low", "median", "high", "unit")
Row = tuple[str, str, str, str, str, str, str]
HOUR_S = 3600.0


def csv_text(site: Site, log: WeekLog) -> str:
    """The whole file."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(HEADER)
    writer.writerows(rows(site, log))
    return out.getvalue()


def rows(site: Site, log: WeekLog) -> Iterator[Row]:
    """Every figure of the log."""
    figures = _Figures(site)
    yield from _week(figures, log)
    if log.water_in_kg is not None:
        yield figures.water("water", "", "water in", log.water_in_kg)
    for trap in log.traps:
        yield from _trap(figures, trap)
    for outlet in log.outlets:
        yield from _outlet(figures, outlet)
    for test in log.blotters:
        yield figures.text("blotter", test.outlet, test.result, format_rfc3339(test.at_us), "time")
    for alarm in log.alarms:
        yield figures.count("alarms", alarm.kind, "raised", alarm.raised)
        yield figures.count("alarms", alarm.kind, "acknowledged", alarm.seen)
        if alarm.median_s is not None and alarm.longest_s is not None:
            told = ("time to acknowledge", "longest time to acknowledge")
            for quantity, seconds in zip(told, (alarm.median_s, alarm.longest_s), strict=True):
                yield figures.one("alarms", alarm.kind, quantity, seconds / 60.0, "min")
    yield from _plant(figures, log.plant, log.watched.open_watched_s)
    for channel, seconds in sorted(log.faults_s.items()):
        yield figures.hours("sensor faults", channel, "faulty or silent", seconds)
    for name, hits in (("forecasts", log.forecasts), ("intervals", log.intervals)):
        yield figures.count("honesty", name, "held", hits.hit)
        yield figures.count("honesty", name, "scored", hits.of)


def _week(figures: _Figures, log: WeekLog) -> Iterator[Row]:
    watched = log.watched
    yield figures.text("week", log.week, "begins", format_rfc3339(log.from_us), "time")
    yield figures.text("week", log.week, "ends", format_rfc3339(log.to_us), "time")
    yield figures.text("week", log.week, "told until", format_rfc3339(log.until_us), "time")
    yield figures.hours("week", log.week, "recorded", watched.of_s)
    yield figures.hours("week", log.week, "watched", watched.watched_s)
    yield figures.hours("week", log.week, "open", watched.open_s)
    yield figures.hours("week", log.week, "open and watched", watched.open_watched_s)
    for (from_us, _), lacks_s in zip(watched.gaps, watched.gaps_s, strict=True):
        yield figures.hours("not watched", format_rfc3339(from_us), "missing from here", lacks_s)


def _trap(figures: _Figures, trap: TrapWeek) -> Iterator[Row]:
    if trap.shed_kg is not None:
        yield figures.water("traps", trap.trap, "shed", trap.shed_kg)
    for quantity, count in (
        ("drains", trap.drains),
        ("drains measured", trap.measured),
        ("drains not learned from", trap.unlearned),
        ("drains on time", trap.on_time),
        ("drains late", trap.late),
    ):
        yield figures.count("traps", trap.trap, quantity, count)
    if trap.measured:
        yield figures.water("traps", trap.trap, "measured", trap.measured_kg)
    if trap.late:
        yield figures.hours("traps", trap.trap, "longest late", trap.longest_late_s)
    if trap.due_since_us is not None:
        at = format_rfc3339(trap.due_since_us)
        yield figures.text("traps", trap.trap, "still due since", at, "time")


def _outlet(figures: _Figures, outlet: OutletWeek) -> Iterator[Row]:
    for verdict, seconds in outlet.verdict_s.items():
        yield figures.hours("verdicts", outlet.outlet, verdict, seconds)
    for name, seconds in sorted(outlet.class_s.items()):
        yield figures.hours("iso 8573-1 humidity, in the range of", outlet.outlet, name, seconds)
    for quantity, least in (("line", outlet.line), ("surface", outlet.surface)):
        if least is not None:
            yield figures.margin(outlet.outlet, f"least {quantity} margin", least)
            at = format_rfc3339(least.at_us)
            yield figures.text("margins", outlet.outlet, f"least {quantity} margin at", at, "time")


def _plant(figures: _Figures, plant: PlantWeek, open_s: float) -> Iterator[Row]:
    if plant.on_s is not None:
        hours = Interval(*(each / HOUR_S for each in plant.on_s.values))
        yield figures.three("compressor", "", "running", hours, "h")
    if (duty := plant.duty(open_s)) is not None:
        share = Interval(*(each * 100.0 for each in duty.values))
        yield figures.three("compressor", "", "duty in open hours", share, "%")
    if plant.drawn_kg is not None:
        yield figures.air("compressor", "", "drawn in", plant.drawn_kg)
    if (leak := plant.leak) is None:
        return
    flow = Interval(*leak.m3_per_s)
    yield figures.three("leakage", "", "flow", figures.converted(flow, figures.flow, "flow"),
                        figures.flow)  # fmt: skip
    yield figures.three("leakage", "", "energy a week", Interval(*leak.kwh_per_week), "kWh")
    if leak.cost_per_week is not None:
        cost = Interval(*leak.cost_per_week)
        yield figures.three("leakage", "", "cost a week", cost, figures.currency)
    yield figures.text("leakage", "", "measured at", format_rfc3339(leak.at_us), "time")


class _Figures:
    """Makes rows in one site's units."""

    def __init__(self, site: Site) -> None:
        us = site.units == "us"
        self.volume, self.flow = ("oz", "cfm") if us else ("ml", "L/min")
        self.reference, self.difference = ("ft3", "degF") if us else ("m3", "K")
        self.currency = site.costs.currency

    def converted(self, interval: Interval, unit: str, kind: Kind) -> Interval:
        """An interval in SI in another unit."""
        return Interval(*(from_si(each, unit, kind) for each in interval.values))

    def three(self, section: str, item: str, quantity: str, found: Interval, unit: str) -> Row:
        """A figure with its interval."""
        low, middle, high = (_number(each) for each in found.values)
        return section, item, quantity, low, middle, high, unit

    def one(self, section: str, item: str, quantity: str, value: float, unit: str) -> Row:
        """A figure without an interval."""
        return section, item, quantity, "", _number(value), "", unit

    def count(self, section: str, item: str, quantity: str, value: int) -> Row:
        """How many."""
        return section, item, quantity, "", str(value), "", "1"

    def hours(self, section: str, item: str, quantity: str, seconds: float) -> Row:
        """A length of time."""
        return self.one(section, item, quantity, seconds / HOUR_S, "h")

    def text(self, section: str, item: str, quantity: str, text: str, unit: str) -> Row:
        """A time."""
        return section, item, quantity, "", text, "", unit

    def water(self, section: str, item: str, quantity: str, kg: Interval | float) -> Row:
        """A mass of water as a volume."""
        if isinstance(kg, float):
            volume = from_si(kg / WATER_KG_PER_M3, self.volume, "volume")
            return self.one(section, item, quantity, volume, self.volume)
        m3 = Interval(*(each / WATER_KG_PER_M3 for each in kg.values))
        found = self.converted(m3, self.volume, "volume")
        return self.three(section, item, quantity, found, self.volume)

    def air(self, section: str, item: str, quantity: str, kg: Interval) -> Row:
        """Dry air as a volume of reference air."""
        m3 = Interval(*(each / REFERENCE_DRY_AIR_KG_PER_M3 for each in kg.values))
        found = self.converted(m3, self.reference, "volume")
        return self.three(section, item, quantity, found, self.reference)

    def margin(self, item: str, quantity: str, least: Least) -> Row:
        """A least margin."""
        found = Interval(least.p05_k, least.p50_k, least.p95_k)
        found = self.converted(found, self.difference, "temperature difference")
        return self.three("margins", item, quantity, found, self.difference)


def _number(value: float) -> str:
    """Six figures, without an exponent where people would not write one."""
    return f"{float(f'{value:.6g}'):.10g}"
