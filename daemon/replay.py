"""`dripleg replay`: recompute everything from recorded readings and drains. No store, no hardware.

Tick by tick it gives the live daemon's bits: it calls the same `advance` with the same inputs.
"""

from __future__ import annotations

import csv
import json
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from daemon.advance import Core, Estimate
from daemon.alarms import Transition
from daemon.clock import format_rfc3339
from daemon.errors import BalanceError, ReplayError
from daemon.hours_left import hours_left
from daemon.journal import Drain, Entry
from daemon.moisture.air import REFERENCE_DRY_AIR_KG_PER_M3
from daemon.moisture.description import ML_PER_KG
from daemon.moisture.ensemble import Array, percentiles
from daemon.moisture.learning import Learned
from daemon.parameters import parameters_table
from daemon.plant_summary import forecast_summary, plant_summary
from daemon.reminders import Reminder
from daemon.site.types import Site
from daemon.state import CoreState, HourTotals, Inputs, Mark
from daemon.ticks import ticks
from daemon.unit_tables import ZERO_CELSIUS_K
from daemon.views import Interval
from sensors.reading import Reading

RESIDUAL_DIGITS = 12  # of a share of all water: it is off at 1e-9
REFERENCE_L_PER_KG = 1e3 / REFERENCE_DRY_AIR_KG_PER_M3
TRAPS_HEADER = "time,trap,p05_ml,p50_ml,p95_ml,probability_due"
OUTLETS_HEADER = (
    "time,outlet,pressure_dew_point_p05_c,pressure_dew_point_p50_c,pressure_dew_point_p95_c,"
    "line_margin_p05_k,line_margin_p50_k,line_margin_p95_k,carried_liquid_p95_g_m3,verdict"
)
FLOW_HEADER = (
    "time,duty,drawn_in_reference_l_p05,drawn_in_reference_l_p50,drawn_in_reference_l_p95,"
    "used_reference_l_p05,used_reference_l_p50,used_reference_l_p95"
)
TRANSITIONS_HEADER = "time,id,alarm,from,to,priority,text"


@dataclass(slots=True)
class Result:
    """What a replay found."""

    state: CoreState
    marks: list[Mark] = field(default_factory=list)
    transitions: list[Transition] = field(default_factory=list)
    begun_us: int = 0
    ticks: int = 0
    learned: list[Learned] = field(default_factory=list)
    reminders: list[Reminder] = field(default_factory=list)

    def add(self, advanced: tuple[CoreState, Estimate, list[Transition]]) -> None:
        """Take in what one advance gave."""
        self.state, estimate, transitions = advanced
        self.marks += estimate.marks
        self.learned += estimate.learned
        if estimate.problems:
            raise BalanceError(estimate.problems[0])
        self.transitions += transitions
        self.reminders += estimate.reminders

    def finish(self, core: Core) -> None:
        """The traps at the end, unless that was a full hour; not the ones just emptied."""
        end_us = self.state.time_us
        here = [mark for mark in self.marks if mark.at_us == end_us]
        if not any(mark.kind == "hour" for mark in here):
            emptied = {trap for mark in here for trap in mark.traps}
            self.marks.append(core.final_mark(self.state, emptied))


def replay(
    core: Core,
    readings: Sequence[Reading],
    entries: Sequence[Entry],
    progress: Callable[[int], None] = lambda reached_us: None,
) -> Result:
    """Run the record through the core, tick by tick; both sequences in order of time.

    The first tick is the first reading's time, the last one the first at or after everything.
    `progress` is told of the time that was reached.
    """
    if not readings:
        raise ReplayError("no readings: nothing to replay")
    begun_us = readings[0].time_us
    first = [each for each in readings if each.time_us == begun_us]
    state, estimate, transitions = core.initial(begun_us, Inputs(first))
    result = Result(state, list(estimate.marks), list(transitions), begun_us, ticks=1)
    at_once = [entry for entry in entries if entry.at_us == begun_us]
    result.add(core.take(state, at_once))
    end_us = max(readings[-1].time_us, entries[-1].at_us if entries else begun_us)
    for tick in ticks(
        begun_us,
        core.model.period_us,
        begun_us,
        begun_us,
        readings[len(first) :],
        entries[len(at_once) :],
        end_us,
    ):
        result.add(core.advance(result.state, tick.now_us, tick.inputs))
        result.ticks += 1
        progress(tick.now_us)
    result.finish(core)
    return result


def write(core: Core, result: Result, entries: Sequence[Entry], folder: Path) -> None:
    """Write the result's files into `folder`, which is made if missing."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
        _write_csv(folder / "traps.csv", TRAPS_HEADER, _trap_rows(result))
        _write_csv(folder / "outlets.csv", OUTLETS_HEADER, _outlet_rows(result))
        _write_csv(folder / "flow.csv", FLOW_HEADER, _flow_rows(result))
        _write_csv(folder / "transitions.csv", TRANSITIONS_HEADER, _transition_rows(result))
        summary = summarise(core, result, entries)
        text = json.dumps(summary, indent=2) + "\n"
        (folder / "summary.json").write_text(text, encoding="utf-8")
    except OSError as error:
        raise ReplayError(
            f"{error.filename or folder}: cannot be written ({error.strerror}); "
            "name another folder with --out"
        ) from None


def _write_csv(path: Path, header: str, rows: Iterator[list[str]]) -> None:
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(header.split(","))
        writer.writerows(rows)


def _whole(time_us: int) -> str:
    """RFC 3339 without a fraction."""
    return format_rfc3339(time_us - time_us % 1_000_000)


def _trap_rows(result: Result) -> Iterator[list[str]]:
    for mark in result.marks:
        for number, trap in enumerate(mark.traps):
            ml = mark.kg[:, number] * ML_PER_KG
            yield [
                _whole(mark.at_us),
                trap,
                *(f"{value:.3f}" for value in ml),
                f"{mark.probability_due[number]:.4f}",
            ]


def _outlet_rows(result: Result) -> Iterator[list[str]]:
    """What cannot be known is an empty cell."""
    for mark in result.marks:
        for each in mark.outlets:
            dew_point, margin = each.pressure_dew_point_k, each.line_margin_k
            carried = each.carried_p95_kg_per_m3
            yield [
                _whole(mark.at_us),
                each.outlet,
                *_cells(dew_point, -ZERO_CELSIUS_K),
                *_cells(margin, 0.0),
                "" if carried is None else f"{carried * 1e3:.4f}",
                each.verdict,
            ]


def _cells(interval: Interval | None, plus: float) -> list[str]:
    if interval is None:
        return ["", "", ""]
    return [f"{value + plus:.3f}" for value in interval.values]


def _flow_rows(result: Result) -> Iterator[list[str]]:
    for mark in result.marks:
        hour = mark.hour
        if hour is None or mark.at_us <= hour.from_us:
            continue
        length_s = (mark.at_us - hour.from_us) / 1e6
        yield [
            _whole(hour.from_us),
            f"{float(percentiles(hour.on_s)[1]) / length_s:.5f}",
            *(f"{value:.3f}" for value in percentiles(hour.drawn_kg) * REFERENCE_L_PER_KG),
            *(f"{value:.3f}" for value in percentiles(hour.used_kg) * REFERENCE_L_PER_KG),
        ]


def _transition_rows(result: Result) -> Iterator[list[str]]:
    for each in result.transitions:
        yield [
            _whole(each.at_us),
            each.id,
            each.alarm,
            each.before,
            each.after,
            each.priority,
            each.text,
        ]


def _interval(values: Array, digits: int = 3) -> dict[str, float]:
    low, middle, high = (round(float(value), digits) for value in percentiles(values))
    return {"p05": low, "p50": middle, "p95": high}


def summarise(core: Core, result: Result, entries: Sequence[Entry]) -> dict[str, Any]:
    """Totals of the record with their intervals, as `summary.json` has them."""
    state, plan = result.state.model, core.model.plan
    hours = [mark.hour for mark in result.marks if mark.hour is not None]
    ledger = state.ledger
    held = core.model.contents(state)
    names = {plan.stations[row].id: row for row in plan.traps}
    return {
        "from": _whole(result.begun_us),
        "to": _whole(result.state.time_us),
        "ticks": result.ticks,
        "members": core.site.line.members,
        "seed": core.site.line.seed,
        "water_in_ml": _interval(ledger.water_in * ML_PER_KG),
        "shed_ml": {name: _interval(ledger.shed[row] * ML_PER_KG) for name, row in names.items()},
        "held_ml": {name: _interval(held[row] * ML_PER_KG) for name, row in names.items()},
        "drained_ml": _interval(ledger.drained * ML_PER_KG),
        "passed_by_drains_ml": _interval(ledger.passed.sum(0) * ML_PER_KG),
        "taken_by_desiccants_ml": _interval(ledger.beds * ML_PER_KG),
        "lasts_h": hours_left(core.model, state),
        "vapor_out_ml": _interval(ledger.vapor_out * ML_PER_KG),
        "liquid_out_ml": _interval(ledger.liquid_out * ML_PER_KG),
        "measured_drains": _measured_drains(core.site, entries),
        "drawn_in_reference_l": _interval(state.air.drawn * REFERENCE_L_PER_KG),
        "used_reference_l": _interval(state.air.used * REFERENCE_L_PER_KG),
        "duty": _duty(hours, result),
        **plant_summary(core.site, result.state),
        "forecasts": forecast_summary(result.state),
        "reminders": len(result.reminders),
        "corrected_by_learning_ml": _interval(ledger.corrected * ML_PER_KG),
        "flagged_drains": [
            {
                "time": format_rfc3339(each.at_us),
                "trap": each.trap,
                "measured_ml": round(each.measured_kg * ML_PER_KG, 3),
                "expected_ml": [round(kg * ML_PER_KG, 3) for kg in each.expected_kg],
                "sigmas": round(each.sigmas, 2),
            }
            for each in result.learned
            if each.flagged
        ],
        "parameters": parameters_table(core, result.state),
        # below this it is the rounding of sums, another one in each order of adding
        "balance_residual": round(float(ledger.residual(state.water).max()), RESIDUAL_DIGITS),
    }


def _duty(hours: Sequence[HourTotals], result: Result) -> dict[str, float] | None:
    length_s = (result.state.time_us - result.begun_us) / 1e6
    if length_s <= 0.0 or not hours:
        return None
    on_s: Array = sum((hour.on_s for hour in hours[1:]), hours[0].on_s)
    return _interval(on_s / length_s, 5)


def _measured_drains(site: Site, entries: Sequence[Entry]) -> dict[str, dict[str, Any]]:
    """What people said of each trap: how often it was drained, and how much they measured."""
    found: dict[str, dict[str, Any]] = {
        trap: {"drains": 0, "measured": 0, "volume_ml": 0.0} for trap in site.traps
    }
    for entry in entries:
        if not isinstance(entry.body, Drain):
            continue
        told = found[entry.body.trap]
        told["drains"] += 1
        if entry.body.volume_kg is not None:
            told["measured"] += 1
            told["volume_ml"] = round(told["volume_ml"] + entry.body.volume_kg * ML_PER_KG, 3)
    return found
