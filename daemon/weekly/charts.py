"""The log's charts as plain shapes, drawn alike by the page (SVG) and in the PDF. Pure.

Units are points of a canvas; y goes down. A shape's `kind` is how it is filled: every kind has a
pattern of its own, so that nothing hangs on colour, and every chart says in words what it shows.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date

from daemon.clock import HOUR_US
from daemon.moisture.description import WATER_KG_PER_M3
from daemon.units import from_si
from daemon.weekly.records import NOT_WATCHED, VERDICTS, OutletWeek, WeekLog
from daemon.weekly.words import VERDICT_WORDS, Words, hours
from daemon.work import WAIT_BELOW_K

WIDTH = 420.0  # so narrow that its letters can be read on a phone
_LEFT, _RIGHT, _TOP = 48.0, 8.0, 14.0
_WORDS = 78.0  # for what stands at the end of a bar, at the least
_LETTER = 8.2  # the width of a letter, with room to spare
_BAR = 22.0  # a day's row
_LINE = 18.0
# How a kind is filled: its shade (0 black, 1 white) and the slant of its hatching, "" none.
FILLS: dict[str, tuple[float, str]] = {
    "t0": (0.35, ""),
    "t1": (0.85, "/"),
    "t2": (0.95, "-"),
    "t3": (0.65, "x"),
    "t4": (0.90, "\\"),
    "t5": (0.75, "|"),
    "v0": (0.25, ""),
    "v1": (0.95, "x"),
    "v2": (0.80, "/"),
    "v3": (0.97, ""),
    "v4": (1.00, "|"),
}
PATTERNS = 6  # kinds of filling for traps
VERDICT_KINDS = {name: f"v{number}" for number, name in enumerate((*VERDICTS, NOT_WATCHED))}


@dataclass(frozen=True, slots=True)
class Bar:
    """A filled rectangle."""

    x: float
    y: float
    width: float
    height: float
    kind: str


@dataclass(frozen=True, slots=True)
class Stroke:
    """A line through points; `kind` is "axis", "grid", "limit" or "curve"."""

    points: tuple[tuple[float, float], ...]
    kind: str


@dataclass(frozen=True, slots=True)
class Label:
    """Words at a place; `anchor` is "start", "middle" or "end"."""

    x: float
    y: float
    text: str
    anchor: str = "start"


@dataclass(frozen=True, slots=True)
class Chart:
    """A drawing with what it shows in words."""

    name: str  # an id that is unique on a page
    title: str
    words: str  # the same in words, for whoever cannot see it
    height: float
    bars: tuple[Bar, ...]
    strokes: tuple[Stroke, ...]
    labels: tuple[Label, ...]
    width: float = WIDTH


@dataclass(slots=True)
class _Drawing:
    """A chart in the making."""

    bars: list[Bar]
    strokes: list[Stroke]
    labels: list[Label]

    def done(self, name: str, title: str, words: str, height: float) -> Chart:
        return Chart(
            name, title, words, height, tuple(self.bars), tuple(self.strokes), tuple(self.labels)
        )


def _new() -> _Drawing:
    return _Drawing([], [], [])


def _day_name(day: str) -> str:
    return f"{date.fromisoformat(day):%a}"


# ---- rows of days ----


def _rows_of_days(
    name: str,
    title: str,
    days: Sequence[tuple[str, Sequence[tuple[str, float]], str]],
    most: float,
    axis: tuple[float, str],
    legend: Sequence[tuple[str, str]],
    words: str,
) -> Chart:
    """One bar a day, in parts (kind, value), with words at its end; `axis` is a step and a unit."""
    drawing = _new()
    scale = _scale(most, [(sum(value for _, value in parts), said) for _, parts, said in days])
    y = _TOP
    for day, parts, said in days:
        x = _LEFT
        drawing.labels.append(Label(_LEFT - 8.0, y + 15.0, _day_name(day), "end"))
        for kind, value in parts:
            if value <= 0.0:
                continue
            drawing.bars.append(Bar(x, y + 3.0, value * scale, _BAR - 6.0, kind))
            x += value * scale
        drawing.labels.append(Label(x + 6.0, y + 15.0, said))
        y += _BAR
    step, unit = axis
    drawing.strokes.append(Stroke(((_LEFT, _TOP), (_LEFT, y)), "axis"))
    mark = 0.0
    while mark <= most * 1.0001:
        x = _LEFT + mark * scale
        drawing.strokes.append(Stroke(((x, y), (x, y + 5.0)), "axis"))
        drawing.labels.append(Label(x, y + 19.0, f"{mark:g}", "middle"))
        mark += step
    drawing.labels.append(Label(WIDTH - _RIGHT, y + 19.0, unit, "end"))
    y += 44.0
    y = _legend(drawing, legend, y)
    return drawing.done(name, title, words, y)


def _scale(most: float, bars: Sequence[tuple[float, str]]) -> float:
    """Points for a unit of the value, so that the words at each bar's end have room."""
    room = WIDTH - _LEFT - _RIGHT
    least = [(room - 6.0 - _LETTER * len(said)) / value for value, said in bars if value > 0.0]
    return min([(room - _WORDS) / most, *least])


def _shortened(text: str) -> str:
    """A name that has room in one line of a legend; how it begins and ends tells it apart."""
    most = int((WIDTH - _LEFT - _RIGHT - 28.0) / _LETTER)
    return text if len(text) <= most else f"{text[: most // 2 - 2]} .. {text[2 - most // 2 :]}"


def _legend(drawing: _Drawing, legend: Sequence[tuple[str, str]], y: float) -> float:
    x = _LEFT
    for kind, name in legend:
        text = _shortened(name)
        width = 28.0 + _LETTER * len(text)
        if x + width > WIDTH - _RIGHT and x > _LEFT:
            x, y = _LEFT, y + _LINE
        drawing.bars.append(Bar(x, y - 11.0, 16.0, 12.0, kind))
        drawing.labels.append(Label(x + 21.0, y, text))
        x += width + 8.0
    return y + 10.0


def _step(most: float, parts: int = 5) -> float:
    """A round step that cuts a span in at most that many parts."""
    rough = most / parts
    power = 10.0 ** (len(f"{int(rough)}") - 1) if rough >= 1.0 else 0.1
    while power > rough:
        power /= 10.0
    return next(power * each for each in (1.0, 2.0, 5.0, 10.0, 20.0) if power * each >= rough)


# ---- the charts ----


def water_chart(words: Words, log: WeekLog) -> Iterator[Chart]:
    """What dropped out in the traps, day by day."""
    totals = [sum(day.shed_kg.values()) for day in log.days]
    if max(totals, default=0.0) <= 0.0:
        return
    unit = "oz" if words.site.units == "us" else "ml"
    per_kg = from_si(1.0 / WATER_KG_PER_M3, unit, "volume")
    kinds = _trap_kinds(log, words.site.traps)
    days = [
        (
            day.day,
            [
                (kind, sum(day.shed_kg.get(trap, 0.0) for trap in traps) * per_kg)
                for kind, (_, traps) in kinds.items()
            ],
            words.water(total) if day.shed_kg else "not known",
        )
        for day, total in zip(log.days, totals, strict=True)
    ]
    most = max(totals) * per_kg
    step = _step(most)
    said = "; ".join(f"{_day_name(day)} {text}" for day, _, text in days)
    yield _rows_of_days(
        "water",
        "Water that dropped out, by day and trap (estimates)",
        days,
        most,
        (step, unit),
        [(kind, name) for kind, (name, _) in kinds.items()],
        f"{said}.",
    )


def _trap_kinds(log: WeekLog, traps: Sequence[str]) -> dict[str, tuple[str, Sequence[str]]]:
    """What each filling stands for: a trap; of many, the last for all that had least."""
    if len(traps) <= PATTERNS:
        return {f"t{n}": (trap, (trap,)) for n, trap in enumerate(traps)}
    shed = {trap: sum(day.shed_kg.get(trap, 0.0) for day in log.days) for trap in traps}
    most = sorted(traps, key=lambda trap: -shed[trap])[: PATTERNS - 1]
    alone = [trap for trap in traps if trap in most]
    rest = [trap for trap in traps if trap not in most]
    named = {f"t{n}": (trap, (trap,)) for n, trap in enumerate(alone)}
    return {**named, f"t{PATTERNS - 1}": (f"the other {len(rest)}", rest)}


def verdict_chart(log: WeekLog, outlet: OutletWeek) -> Iterator[Chart]:
    """The open hours of every day by verdict."""
    days = []
    for day in log.days:
        found = day.verdict_s.get(outlet.outlet, {})
        parts = [(VERDICT_KINDS[v], found.get(v, 0.0) / 3600.0) for v in VERDICTS]
        days.append((day.day, parts, f"wait {hours(found.get('wait', 0.0))}" if found else "-"))
    most = max((sum(value for _, value in parts) for _, parts, _ in days), default=0.0)
    if most <= 0.0:
        return
    said = "; ".join(
        f"{_day_name(day.day)} "
        + (
            ", ".join(
                f"{VERDICT_WORDS[v]} {hours(s)}"
                for v in VERDICTS
                if (s := day.verdict_s.get(outlet.outlet, {}).get(v, 0.0)) > 0.0
            )
            or "no open hour watched"
        )
        for day in log.days
    )
    yield _rows_of_days(
        f"verdict-{outlet.outlet}",
        "Open hours by verdict",
        days,
        most,
        (_step(most), "h"),
        [(VERDICT_KINDS[v], VERDICT_WORDS[v]) for v in VERDICTS],
        f"{said}.",
    )


def running_chart(log: WeekLog) -> Iterator[Chart]:
    """How long the compressor ran, by day."""
    days = [
        (day.day, [("t0", day.on_s / 3600.0)], hours(day.on_s) if day.watched_s else "-")
        for day in log.days
    ]
    most = max((day.on_s / 3600.0 for day in log.days), default=0.0)
    if most <= 0.0:
        return
    said = "; ".join(f"{_day_name(day)} {text}" for day, _, text in days)
    yield _rows_of_days(
        "running", "Running time of the compressor", days, most, (_step(most), "h"), [], f"{said}."
    )


def margin_chart(words: Words, log: WeekLog, outlet: OutletWeek) -> Iterator[Chart]:
    """The least line margin of every open hour, its 5 % end, against the limit."""
    found = log.margins.get(outlet.outlet, ())
    if len(found) < 2:
        return
    unit = "degF" if words.site.units == "us" else "K"

    def shown(kelvin: float) -> float:
        return from_si(kelvin, unit, "temperature difference")

    values = [shown(each.p05_k) for each in found]
    limit = shown(WAIT_BELOW_K)
    low, high = min(0.0, *values), max(limit * 1.5, *values)
    height = 150.0
    scale_y = height / (high - low)
    scale_x = (WIDTH - _LEFT - _RIGHT) / (log.to_us - log.from_us)

    def place(at_us: int, value: float) -> tuple[float, float]:
        return _LEFT + (at_us - log.from_us) * scale_x, _TOP + (high - value) * scale_y

    drawing = _new()
    bottom = _TOP + height
    step = _step(high - low)
    mark = -(-low // step) * step
    while mark <= high:
        y = place(log.from_us, mark)[1]
        drawing.strokes.append(Stroke(((_LEFT, y), (WIDTH - _RIGHT, y)), "grid"))
        drawing.labels.append(Label(_LEFT - 8.0, y + 5.0, f"{mark:g}", "end"))
        mark += step
    drawing.labels.append(Label(_LEFT - 8.0, bottom + 20.0, unit, "end"))
    y = place(log.from_us, limit)[1]
    drawing.strokes.append(Stroke(((_LEFT, y), (WIDTH - _RIGHT, y)), "limit"))
    drawing.labels.append(Label(WIDTH - _RIGHT, y - 4.0, f"below {limit:.3g} {unit}: wait", "end"))
    day_width = (WIDTH - _LEFT - _RIGHT) / len(log.days)
    for number, day in enumerate(log.days):
        x = _LEFT + number * day_width
        drawing.strokes.append(Stroke(((x, _TOP), (x, bottom + 4.0)), "grid"))
        drawing.labels.append(
            Label(x + day_width / 2.0, bottom + 20.0, _day_name(day.day), "middle")
        )
    run: list[tuple[float, float]] = []
    last_us = -1
    for each, value in zip(found, values, strict=True):
        if run and each.at_us - last_us > 2 * HOUR_US:
            drawing.strokes.append(Stroke(tuple(run), "curve"))
            run = []
        run.append(place(each.at_us, value))
        last_us = each.at_us
    drawing.strokes.append(Stroke(tuple(run), "curve"))
    below = sum(value < limit for value in values)
    yield drawing.done(
        f"margin-{outlet.outlet}",
        "Line margin through the week: its 5 % end, the least of each open hour",
        f"Between {min(values):.1f} and {max(values):.1f} {unit}; in {below} of {len(values)} "
        f"hours it went below {limit:.3g} {unit}.",
        bottom + 30.0,
    )
