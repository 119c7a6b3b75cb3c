"""Figures of hours against what the raw readings say by other ways.

Moist air by CoolProp's `HAPropsSI` (Herrmann, Kretzschmar, Gatley, HVAC&R Research 15, 2009), run
time by adding up a contact's edges, faults by counting readings. The shops are invented.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from CoolProp.HumidAirProp import HAPropsSI

from daemon.advance import Core
from daemon.checkpoint import decode, encode
from daemon.clock import HOUR_US, MINUTE_US, SECOND_US
from daemon.foresight import Score
from daemon.hour_figures import DRAWN, ON, ON_OPEN, WATER_IN, HourFigures, Noted, joined
from daemon.hourly import noted_ahead
from daemon.journal import Acknowledge, Drain, Undo
from daemon.recovery import carried_over
from daemon.site import hours as opening
from daemon.site.types import Site
from daemon.state import CoreState, Inputs
from daemon.store.store import Store
from daemon.weekly.weeks import week_at
from sensors.reading import Reading, reading
from tests.daemon.outlet_shops import a_shop, still
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, site, working
from tests.daemon.test_shell import SHOP, Rig

Record = Sequence[tuple[int, list[Reading]]]
TEN_MINUTES = 10 * MINUTE_US


def run(shop: Site, record: Record) -> tuple[CoreState, Noted]:
    """A core over a record: what it leaves for the log."""
    core = Core(shop)
    first_us, readings = record[0]
    state, estimate, _ = core.initial(first_us, Inputs(readings))
    noted = [estimate.noted]
    for now_us, each in record[1:]:
        state, estimate, _ = core.advance(state, now_us, Inputs(each))
        noted.append(estimate.noted)
    return state, joined(noted)


def by_tick(readings: Iterator[Reading]) -> Record:
    """Readings by the tick that they stand at."""
    ticks: dict[int, list[Reading]] = {}
    for each in readings:
        ticks.setdefault(each.time_us, []).append(each)
    return sorted(ticks.items())


# ---- the compressor and the air ----


def with_edges(record: Record, edges: Sequence[int]) -> Record:
    """A record in which the contact changes at these times, in order, from on."""
    found = []
    level, left = 1.0, list(edges)
    for now_us, readings in record:
        told = [each for each in readings if each.channel != "motor.contact"]
        while left and left[0] <= now_us:
            level = 1.0 - level
            told.append(reading(SHOP.channels["motor.contact"], level, left.pop(0)))
        told.append(reading(SHOP.channels["motor.contact"], level, now_us))
        found.append((now_us, told))
    return found


def on_between(edges: Sequence[int], from_us: int, to_us: int) -> float:
    """Seconds that the contact was closed between two times, by its edges."""
    total, level, at_us = 0, 1, from_us
    for edge_us in (*edges, to_us):
        if edge_us <= from_us:
            level = 1 - level
            continue
        until_us = min(edge_us, to_us)
        total += level * (until_us - at_us)
        at_us, level = until_us, 1 - level
        if edge_us >= to_us:
            break
    return total / 1e6


def test_run_time_is_what_the_contact_s_edges_say() -> None:
    edges = [BEGUN_US + round(s * 1e6) for s in (123.4, 1777.7, 3599.0, 3611.1, 5400.25, 7000.5)]
    _, noted = run(SHOP, with_edges(list(working(SHOP, 721)), edges))
    first, second = noted.hours
    assert [hour.hour_us for hour in noted.hours] == [BEGUN_US, BEGUN_US + HOUR_US]
    for hour in noted.hours:
        expected = on_between(edges, hour.hour_us, hour.hour_us + HOUR_US)
        assert hour.totals[ON] == pytest.approx((expected,) * 3, abs=1e-6)
    # the shop opens at 08:00, as the second hour begins
    assert first.totals[ON_OPEN] == (0.0, 0.0, 0.0)
    assert second.totals[ON_OPEN] == second.totals[ON]
    assert (first.open_s, second.open_s) == (0.0, 3600.0)
    assert first.watched_s == second.watched_s == 3600.0


def test_water_and_air_drawn_in_are_what_the_raw_readings_say() -> None:
    """Readings times delivered air: 150 L/min of free air, by CoolProp, tick by tick."""
    record = list(working(SHOP, 361))
    (hour,) = run(SHOP, record)[1].hours
    water = air = 0.0
    for now_us, readings in record[1:]:
        said = {each.channel: each.value for each in readings}
        state = (
            "T",
            said["intake-air.temperature"],
            "P",
            said["intake-air.pressure"],
            "R",
            said["intake-air.relative_humidity"],
        )
        on_before = dict(record)[now_us - PERIOD_US]
        on = next(each.value for each in on_before if each.channel == "motor.contact")
        dry = 0.150 / 60.0 * 10.0 * on / HAPropsSI("Vda", *state)
        air += dry
        water += dry * HAPropsSI("W", *state)
    assert hour.totals[DRAWN][1] == pytest.approx(air, rel=0.01)  # half a member's step off
    assert hour.totals[WATER_IN][1] == pytest.approx(water, rel=0.02)
    low, _, high = hour.totals[WATER_IN]
    # 10 % of delivered air and 3 % RH of 60, k = 2: 5 to 95 % is 1.645 standard deviations
    half = 1.645 * np.hypot(0.05, 0.015 / 0.6)
    assert (high - low) / 2 / water == pytest.approx(half, rel=0.2)


def test_what_traps_shed_is_what_they_gained() -> None:
    """With nothing drained and no pool to give back, a trap holds what it was given."""
    state, noted = run(SHOP, list(working(SHOP, 721, humidity=0.9)))
    core = Core(SHOP)
    contents = np.median(core.model.contents(state.model), axis=1)
    for trap in ("riser", "bowl"):
        gained = contents[core.model.plan.index[trap]]
        (day,) = (day for day in noted.days)
        assert gained > 1e-4
        assert np.median(day.sums[f"shed {trap}"]) == pytest.approx(gained, rel=1e-9)


# ---- sensors and gaps ----


def broken(record: Record, channel: str, from_us: int, to_us: int) -> Record:
    """A record in which a channel's readings are bad for a while."""
    return [
        (
            now_us,
            [
                replace(each, fault="no answer")
                if each.channel == channel and from_us <= now_us < to_us
                else each
                for each in readings
            ],
        )
        for now_us, readings in record
    ]


def test_fault_time_is_that_of_the_bad_readings() -> None:
    from_us, to_us = BEGUN_US + 50 * MINUTE_US, BEGUN_US + 67 * MINUTE_US
    record = broken(list(working(SHOP, 721)), "pipe-end.temperature", from_us, to_us)
    first, second = run(SHOP, record)[1].hours
    bad = [
        sum(
            10.0
            for now_us, readings in record
            for each in readings
            if each.channel == "pipe-end.temperature"
            and not each.good
            and hour_us < now_us <= hour_us + HOUR_US
        )
        for hour_us in (BEGUN_US, BEGUN_US + HOUR_US)
    ]
    assert first.faults_s == {"pipe-end.temperature": bad[0]}
    assert second.faults_s == {"pipe-end.temperature": bad[1]}
    assert sum(bad) == 17 * 60.0


def test_a_channel_that_falls_silent_is_faulty_after_three_periods() -> None:
    record = [
        (
            now_us,
            [
                each
                for each in readings
                if each.channel != "pipe-end.temperature" or now_us <= BEGUN_US + 10 * MINUTE_US
            ],
        )
        for now_us, readings in working(SHOP, 361)
    ]
    (hour,) = run(SHOP, record)[1].hours
    assert hour.faults_s == {"pipe-end.temperature": 50 * 60.0 - 30.0}


def test_an_hour_without_the_daemon_is_not_watched() -> None:
    record = list(working(SHOP, 1081))
    gone = [each for each in record if not BEGUN_US + HOUR_US < each[0] <= BEGUN_US + 2 * HOUR_US]
    first, second, third = run(SHOP, gone)[1].hours
    assert (first.watched_s, second.watched_s) == (3600.0, 0.0)
    assert third.watched_s == 3600.0
    assert second.faults_s == {}
    low, _, high = second.totals[ON]
    assert high > low  # nobody knows how long it ran


# ---- outlets ----


def test_hours_by_verdict_are_those_of_the_page_every_ten_minutes() -> None:
    """Verdicts of `/spray` at each ten minutes of open time, each for the ten before it.

    The surface grows so cold that it must wait, and so warm again; the hours ahead do not count
    here, and neither do they for a shop that says no work.
    """
    shop = a_shop(work="")
    cold = {"panel_temperature": 284.15}
    record = by_tick(
        each
        for part in (
            still(shop, 1.5),
            still(shop, 0.7, BEGUN_US + 3 * HOUR_US // 2 + PERIOD_US, **cold),
            still(shop, 0.9, BEGUN_US + 22 * HOUR_US // 10 + 3 * PERIOD_US),
        )
        for each in part
    )
    core = Core(shop)
    state, estimate, _ = core.initial(record[0][0], Inputs(record[0][1]))
    noted: list[Noted] = []
    expected: dict[int, dict[str, float]] = {}
    for now_us, readings in record[1:]:
        state, estimate, _ = core.advance(state, now_us, Inputs(readings))
        noted.append(estimate.noted)
        before_us = now_us - TEN_MINUTES
        if now_us % TEN_MINUTES == 0 and opening.is_open(shop.hours, shop.timezone, before_us + 1):
            (view,) = estimate.outlets
            hour_us = (now_us - 1) // HOUR_US * HOUR_US
            found = expected.setdefault(hour_us, {})
            found[view.verdict] = found.get(view.verdict, 0.0) + 600.0
    hours = {hour.hour_us: hour.outlets for hour in joined(noted).hours}
    assert len(hours) == 3
    assert hours[BEGUN_US] == {}  # before the shop opens
    verdicts = {hour_us: each["spray-gun"].verdict_s for hour_us, each in hours.items() if each}
    assert verdicts == expected
    assert verdicts[BEGUN_US + HOUR_US].keys() == {"wait", "dry enough"}
    after = hours[BEGUN_US + 2 * HOUR_US]["spray-gun"]
    assert after.surface is not None
    assert after.surface.at_us == BEGUN_US + 2 * HOUR_US + TEN_MINUTES
    assert sum(after.class_s.values()) == 3600.0


# ---- the store: kills, late entries ----


def rows(store: Store) -> tuple[object, ...]:
    """All that the log is made of, to the bit."""
    days = [
        (day.day, {name: values.tobytes() for name, values in day.sums.items()})
        for day in store.day_members("0", "9")
    ]
    checks = [replace(each, seq=0) for each in store.drain_checks(0, 2**62)]
    return list(store.hour_figures(0, 2**62)), days, checks, store.forecasts(0, 2**62)


def lived(path: Path, kills: Sequence[int] = (), late: int = 0) -> tuple[object, ...]:
    """Two hours and a half with a measured drain at 08:20, known as many ticks later."""
    rig = Rig(path, list(working(SHOP, 900)))
    drained = 480
    for tick in range(900):
        now_us = BEGUN_US + tick * PERIOD_US
        rig.tick(now_us)
        if tick == drained + late:
            rig.shell.record(
                Drain("riser", "emptied", 0.02, "AM"), BEGUN_US + drained * PERIOD_US + SECOND_US
            )
        if tick in kills:
            rig.kill()
    found = rows(rig.store)
    rig.store.close()
    return found


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory: pytest.TempPathFactory) -> tuple[object, ...]:
    return lived(tmp_path_factory.mktemp("undisturbed") / "a.db")


def test_the_rows_of_a_few_hours(undisturbed: tuple[object, ...]) -> None:
    hours, days, checks, forecasts = undisturbed
    assert isinstance(hours, list)
    assert [hour.hour_us for hour in hours] == [BEGUN_US, BEGUN_US + HOUR_US]
    assert isinstance(days, list)
    assert [name for name, _ in days] == ["2026-03-02"]
    assert isinstance(checks, list)
    (check,) = checks
    assert (check.trap, check.measured_kg) == ("riser", 0.02)
    assert check.expected_kg.p05 < check.expected_kg.p50 < check.expected_kg.p95
    assert forecasts == []  # one is made every six hours


@pytest.mark.parametrize("kills", [(100, 359, 360), (361, 480, 481, 719, 720, 721)])
def test_kills_lose_and_double_nothing(
    tmp_path: Path, undisturbed: tuple[object, ...], kills: Sequence[int]
) -> None:
    assert lived(tmp_path / "a.db", kills) == undisturbed


@pytest.mark.parametrize("late", [30, 240, 400])
def test_a_late_drain_rewrites_the_hours_that_it_changes(
    tmp_path: Path, undisturbed: tuple[object, ...], late: int
) -> None:
    """As if it had been known in time; 240 ticks later its own hour is already written."""
    assert lived(tmp_path / "a.db", late=late) == undisturbed


def test_a_late_drain_and_kills_come_to_the_same(
    tmp_path: Path, undisturbed: tuple[object, ...]
) -> None:
    assert lived(tmp_path / "a.db", kills=(300, 719, 721, 722), late=240) == undisturbed


def test_a_drain_that_is_taken_back_leaves_no_check(tmp_path: Path) -> None:
    """Nor anything else: the rows are those of a morning without it."""
    found = []
    for name, drains in (("with", True), ("without", False)):
        rig = Rig(tmp_path / f"{name}.db", list(working(SHOP, 760)))
        for tick in range(760):
            rig.tick(BEGUN_US + tick * PERIOD_US)
            if tick == 690 and drains:
                rig.shell.record(Drain("riser", "emptied", 0.02, "AM"))
            if tick == 730 and drains:
                assert len(rig.store.drain_checks(0, 2**62)) == 1
                (drain,) = (e for e in rig.store.entries() if isinstance(e.body, Drain))
                rig.shell.record(Undo("riser", drain.seq, "AM"))
        found.append(rows(rig.store))
        rig.store.close()
    assert found[0] == found[1]


# ---- forecasts and their scores ----


def test_forecasts_are_noted_as_they_are_kept() -> None:
    state, noted = run(SHOP, list(working(SHOP, 1801)))
    (kept,) = state.followed.foresight.kept  # at noon
    assert [(each.trap, each.made_us) for each in noted.forecasts] == [
        (trap, kept.at_us) for trap in SHOP.traps
    ]
    told = [(each.p05_us, each.p50_us, each.p95_us) for each in noted.forecasts]
    assert told == list(kept.due_us)


def test_every_score_is_noted_once() -> None:
    """Also where more were made than one, and where the state's own list is full."""
    state, _ = run(SHOP, list(working(SHOP, 2)))
    old = Score("tank", 0, 1, 2, 3, 2)
    full = replace(state.followed.foresight, scores=(old,) * 100, scored=250)
    one, two = replace(old, happened_us=5), replace(old, happened_us=6)
    after = replace(full, scores=(*full.scores, one, two)[-100:], scored=252)
    (noted,) = noted_ahead(SHOP.traps, full, after)
    assert noted.scores == (one, two)
    assert list(noted_ahead(SHOP.traps, after, after)) == []


# ---- changes of the site file, old checkpoints ----


def test_an_hour_that_a_changed_site_file_cuts_in_two_is_whole() -> None:
    record = list(working(SHOP, 361))
    whole = run(SHOP, record)[1].hours[0]
    before, _ = run(SHOP, record[:181])
    changed = site(SITE.replace('capacity = "300 ml"', 'capacity = "350 ml"'))
    core = Core(changed)
    fresh, _, _ = core.initial(record[180][0], Inputs(record[180][1]))
    state = carried_over(core, fresh, before)
    found: list[HourFigures] = []
    for now_us, readings in record[181:]:
        state, estimate, _ = core.advance(state, now_us, Inputs(readings))
        found += estimate.noted.hours
    (hour,) = found
    assert hour.from_us == BEGUN_US
    assert hour.watched_s == 3600.0
    assert hour.totals[ON] == pytest.approx(whole.totals[ON])
    assert hour.totals[WATER_IN] == pytest.approx(whole.totals[WATER_IN], rel=0.02)


def test_a_checkpoint_from_before_the_log_goes_on() -> None:
    """States that were kept by a version without it are read, and gather from then on."""
    record = list(working(SHOP, 541))
    state, _ = run(SHOP, record[:181])
    state, _ = decode(encode(replace(state, hourly=None), ""))
    core = Core(SHOP)
    hours: list[HourFigures] = []
    for now_us, readings in record[181:]:
        state, estimate, _ = core.advance(state, now_us, Inputs(readings))
        hours += estimate.noted.hours
    (hour,) = hours
    assert hour.watched_s == 1800.0


def test_a_core_can_gather_nothing() -> None:
    record = list(working(SHOP, 361))
    core = Core(SHOP, hourly=False)
    state, _, _ = core.initial(record[0][0], Inputs(record[0][1]))
    for now_us, readings in record[1:]:
        state, estimate, _ = core.advance(state, now_us, Inputs(readings))
        assert not estimate.noted
    gathered, _ = run(SHOP, record)
    assert encode(replace(gathered, hourly=None), "") == encode(state, "")


# ---- the whole way ----


def test_the_log_of_a_lived_morning(tmp_path: Path) -> None:
    """Drains and acknowledgements as the journal has them."""
    rig = Rig(tmp_path / "a.db", list(working(SHOP, 900)))
    for tick in range(900):
        rig.tick(BEGUN_US + tick * PERIOD_US)
        if tick == 400:
            rig.shell.record(Drain("tank", "emptied", 0.05, "AM"))
        if tick == 600:
            rig.shell.record(Drain("tank", "empty"))
            for alarm in rig.shell.alarms():
                if alarm.state == "unacknowledged":
                    rig.shell.record(Acknowledge(alarm.id, "JK"))
    changes = rig.store.transitions(0, 2**62)
    raised = [each for each in changes if each.after == "unacknowledged"]
    seen = [each for each in changes if each.after == "acknowledged"]
    log = rig.shell.week(week_at("UTC", BEGUN_US))
    assert sum(each.raised for each in log.alarms) == len(raised)
    assert sum(each.seen for each in log.alarms) == len(seen)
    drains = [e for e in rig.store.entries() if isinstance(e.body, Drain)]
    assert [line.at_us for line in log.drains] == [each.at_us for each in drains]
    tank = log.traps[0]
    assert (tank.drains, tank.measured) == (2, 2)
    assert tank.measured_kg == 0.05
    assert log.intervals.of == 2
    assert log.watched.of_s == 2 * 3600.0
    assert log.watched.complete
    rig.store.close()
