"""A weekly log in words: lines, tables and charts that every output shows alike. Pure."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from daemon.hour_figures import CANNOT_TELL, Least
from daemon.site.types import Site
from daemon.weekly import charts
from daemon.weekly.charts import Chart
from daemon.weekly.people import ON_TIME_US
from daemon.weekly.records import VERDICTS, DrainLine, OutletWeek, WeekLog
from daemon.weekly.words import (
    NOT_KNOWN,
    VERDICT_WORDS,
    Words,
    counted,
    hours,
    hours_between,
    percents,
)

CAUTIONS = (
    "These are estimates. They advise; they never replace opening the drain, a pressure vessel's "
    "inspection, or the paint maker's sheet.",
    "Water only: dripleg sees no oil, no dust, and nothing of ventilation or anyone's lungs. This "
    "is no breathing-air test; breathing air has its own (EN 12021; Grade D).",
    "A class of ISO 8573-1 is assigned only by a test after ISO 8573-3. What stands here is in "
    "whose range the estimate of humidity lay.",
    "Condensate is oily: it goes to a separator or a waste carrier, never to the drain.",
)
_MOST_GAPS = 8


@dataclass(frozen=True, slots=True)
class Table:
    """A table: its caption for whoever cannot see it, its head, its rows."""

    caption: str
    head: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]


@dataclass(frozen=True, slots=True)
class Section:
    """One part of the log."""

    title: str
    lines: tuple[str, ...] = ()
    tables: tuple[Table, ...] = ()
    charts: tuple[Chart, ...] = ()


@dataclass(frozen=True, slots=True)
class Sheet:
    """The whole of it."""

    title: str
    site: str
    lead: str
    known: tuple[str, ...]  # how much of the week is known
    complete: bool
    sections: tuple[Section, ...]
    cautions: tuple[str, ...] = CAUTIONS


def sheet(site: Site, log: WeekLog) -> Sheet:
    """A log in words."""
    words = Words(site)
    return Sheet(
        title=_title(words, log),
        site=site.name,
        lead=_lead(words, log),
        known=tuple(_known(words, log)),
        complete=log.watched.complete and log.over and log.begun_us is None and not log.empty,
        sections=tuple(
            section
            for section in (
                _water(words, log),
                _drains(words, log),
                *(_outlet(words, log, outlet) for outlet in log.outlets),
                _alarms(words, log),
                _plant(words, log),
                _sensors(log),
                _honest(log),
            )
        ),
    )


def _title(words: Words, log: WeekLog) -> str:
    year, number = log.week.split("-W")
    first, last = words.local(log.from_us), words.local(log.to_us - 1)
    return (
        f"Week {int(number)} of {year}: {first:%a} {first.day} {first:%b} to "
        f"{last:%a} {last.day} {last:%b}"
    )


def _lead(words: Words, log: WeekLog) -> str:
    if log.empty:
        return "Nothing is known of this week."
    late = sum(trap.late for trap in log.traps)
    drains = counted(len(log.drains), "drain")
    came = "How much water came in is not known"
    if log.water_in_kg is not None:
        came = f"{words.waters(log.water_in_kg)} of water came in with the air"
    parts = [came]
    parts.append(f"{drains}, {late} of them late" if late else f"{drains}, none late")
    due = [trap.trap for trap in log.traps if trap.due_since_us is not None]
    if due:
        parts.append(f"still due: {', '.join(due)}")
    if log.outlets and log.watched.open_watched_s <= 0.0:
        parts.append("no open hour was watched")
    elif log.outlets:
        unfit = max(outlet.unfit_s for outlet in log.outlets)
        worst = next(outlet.outlet for outlet in log.outlets if outlet.unfit_s == unfit)
        where = f" ({worst})" if len(log.outlets) > 1 and unfit > 0.0 else ""
        parts.append(f"{hours(unfit)} unfit to spray{where}")
    return "; ".join(parts) + "."


def _known(words: Words, log: WeekLog) -> Iterator[str]:
    watched = log.watched
    if not log.over and log.begun_us is not None and log.until_us <= log.begun_us:
        yield "This week is not over, nor is the first full hour of the record."
    elif not log.over:
        yield f"This week is not over: it is told as far as {words.when(log.until_us)}."
    if log.begun_us is not None:
        begun = words.when(log.begun_us)
        yield f"The record begins on {begun}; nothing is known of what was before."
    if watched.watched_s <= 0.0:
        yield "No hour of it was watched."
        return
    if watched.complete:
        yield f"All {hours(watched.of_s)} were watched."
    else:
        yield f"Watched: {hours(watched.watched_s)} of {hours(watched.of_s)}."
        spans = list(zip(watched.gaps, watched.gaps_s, strict=True))
        told = [f"{words.span(*gap)} ({hours(lacks)})" for gap, lacks in spans[:_MOST_GAPS]]
        more = len(spans) - len(told)
        rest = f"; and {counted(more, 'more time')}" if more > 0 else ""
        yield (
            f"Not watched: {'; '.join(told)}{rest}. For that time the model goes on without "
            "sensors, so the intervals are wide; an hour that is missing altogether counts nothing."
        )
    if log.from_us % 3_600_000_000:
        at = words.local(-(-log.from_us // 3_600_000_000) * 3_600_000_000)
        yield f"Hours are counted from {at:%H:%M}: the clock here is not whole hours off UTC."


# ---- water and drains ----


def _water(words: Words, log: WeekLog) -> Section:
    rows = []
    for trap in log.traps:
        measured = words.water(trap.measured_kg) if trap.measured else "-"
        of = f" in {counted(trap.measured, 'drain')}" if trap.measured else ""
        rows.append((trap.trap, words.waters(trap.shed_kg), f"{measured}{of}"))
    table = Table(
        "Water by trap", ("Trap", "Dropped out there (estimate)", "Measured"), tuple(rows)
    )
    lines = [f"Water in with the air: {words.waters(log.water_in_kg)}."]
    return Section("Water", tuple(lines), (table,), tuple(charts.water_chart(words, log)))


def _drains(words: Words, log: WeekLog) -> Section:
    rows = []
    for trap in log.traps:
        late = str(trap.late)
        if trap.late:
            late += f" (longest {hours(trap.longest_late_s)})"
        due = words.when(trap.due_since_us) if trap.due_since_us is not None else "no"
        rows.append((trap.trap, str(trap.drains), str(trap.on_time), late, due))
    table = Table(
        "Drains by trap", ("Trap", "Drains", "On time", "Late", "Still due, since"), tuple(rows)
    )
    grace = hours(ON_TIME_US / 1e6)
    lines = [f"On time: within {grace} of falling due. Drains that left some are not judged."]
    tables = [table]
    if log.drains:
        listed = tuple(
            (
                words.when(line.at_us),
                line.trap,
                _came_out(words, line.outcome, line.measured_kg),
                _expected(words, line),
                hours(line.late_s) if line.late_s is not None else "-",
                ", ".join(each for each in (line.look, line.by) if each) or "-",
            )
            for line in log.drains
        )
        head = ("When", "Trap", "Came out", "The cup should have shown", "Late", "Look, by")
        tables.append(Table("Every drain", head, listed))
    return Section("Drains", tuple(lines), tuple(tables))


def _came_out(words: Words, outcome: str, measured_kg: float | None) -> str:
    if outcome == "empty":
        return "was empty"
    amount = "not measured" if measured_kg is None else words.water(measured_kg)
    return f"{amount}, some was left" if outcome == "partly" else amount


def _expected(words: Words, line: DrainLine) -> str:
    if line.expected_kg is None:
        return "-"
    shown = words.waters(line.expected_kg)
    return shown if line.believed else f"{shown}; kept, not learned from"


# ---- outlets ----


def _outlet(words: Words, log: WeekLog, outlet: OutletWeek) -> Section:
    told = [*VERDICTS, "not watched"]
    verdicts = Table(
        f"{outlet.outlet} in open hours",
        tuple(VERDICT_WORDS[each].capitalize() for each in told),
        (tuple(hours(outlet.verdict_s.get(each, 0.0)) for each in told),),
    )
    known = {name: s for name, s in outlet.class_s.items() if s > 0.0}
    ranks = sorted(known, key=lambda name: (name == CANNOT_TELL, name))
    classes = Table(
        f"{outlet.outlet}: open hours in the range of each class of ISO 8573-1 "
        "(estimate, humidity only)",
        tuple(CANNOT_TELL if name == CANNOT_TELL else f"class {name}" for name in ranks),
        (tuple(hours(known[name]) for name in ranks),),
    )
    unfit = f"{hours(outlet.unfit_s)} of {hours(log.watched.open_s)} open"
    if log.watched.open_watched_s <= 0.0:
        unfit = f"{NOT_KNOWN}: no open hour was watched"
    lines = [f"Unfit to spray (wait): {unfit}."]
    lines += _least("Least line margin", words, outlet.line)
    lines += _least("Least surface margin", words, outlet.surface)
    tests = [each for each in log.blotters if each.outlet == outlet.outlet]
    shown = "; ".join(
        f"{words.when(each.at_us)} {each.result}{f' ({each.by})' if each.by else ''}"
        for each in tests
    )
    lines.append(f"Blotter tests: {shown or 'none'}.")
    tables = (verdicts, classes) if ranks else (verdicts,)
    work = f", {outlet.work}" if outlet.work else ""
    drawn = (*charts.verdict_chart(log, outlet), *charts.margin_chart(words, log, outlet))
    return Section(f"Dry enough at {outlet.outlet}{work}", tuple(lines), tables, drawn)


def _least(what: str, words: Words, least: Least | None) -> list[str]:
    if least is None:
        return [f"{what}: {NOT_KNOWN}."]
    shown = words.differences(least.p05_k, least.p50_k, least.p95_k)
    place = f", at {least.place}" if least.place else ""
    return [f"{what}: {shown} on {words.when(least.at_us)}{place}."]


# ---- the rest ----


def _alarms(words: Words, log: WeekLog) -> Section:
    if not log.alarms:
        return Section("Alarms", ("None was raised.",))
    rows = tuple(
        (
            each.kind.replace("-", " "),
            str(each.raised),
            str(each.seen),
            "-" if each.median_s is None else hours(each.median_s),
            "-" if each.longest_s is None else hours(each.longest_s),
        )
        for each in log.alarms
    )
    head = ("Alarm", "Raised", "Seen by somebody", "Half of them within", "Longest")
    return Section("Alarms, and how soon they were seen", (), (Table("Alarms", head, rows),))


def _plant(words: Words, log: WeekLog) -> Section:
    plant, open_s = log.plant, log.watched.open_watched_s
    lines = [
        f"Running: {hours_between(plant.on_s)}.",
        f"Duty in open hours: {percents(plant.duty(open_s))}.",
        f"Air drawn in: {words.airs(plant.drawn_kg)}"
        f"{'' if plant.drawn_kg is None else ' of reference air'}.",
    ]
    leak = plant.leak
    if leak is None:
        lines.append("Leakage: not measured yet (closed hours tell it, two hours after a stop).")
    else:
        cost = "" if leak.cost_per_week is None else f", {words.money(leak.cost_per_week)} a week"
        low, middle, high = leak.kwh_per_week
        lines.append(
            f"Leakage: {words.flows(leak.m3_per_s)}, measured {words.when(leak.at_us)}: "
            f"{middle:.0f} kWh ({low:.0f} to {high:.0f}) a week{cost}."
        )
    return Section("Compressor and leakage", tuple(lines), (), tuple(charts.running_chart(log)))


def _sensors(log: WeekLog) -> Section:
    found = {name: s for name, s in sorted(log.faults_s.items()) if s > 0.0}
    if not found:
        return Section("Sensor faults", ("None while the daemon watched.",))
    rows = tuple((name, hours(seconds)) for name, seconds in found.items())
    return Section(
        "Sensor faults", (), (Table("Sensor faults", ("Channel", "Faulty or silent"), rows),)
    )


def _honest(log: WeekLog) -> Section:
    forecasts, intervals = log.forecasts, log.intervals
    reached = "No level was reached that had been foreseen a day ahead"
    if forecasts.of:
        reached = (
            f"Forecasts: {forecasts.hit} of {counted(forecasts.of, 'level')} reached lay within "
            "what had been foreseen a day ahead (nine in ten are meant to)"
        )
    held = "No drain was measured, so nothing tells how good the estimates were"
    if intervals.of:
        held = (
            f"Measured drains: {intervals.hit} of {intervals.of} lay in their 5 to 95 % interval, "
            "the cup's own error with it (nine in ten are meant to)"
        )
    return Section("How good the estimates were", (f"{reached}.", f"{held}."))
