"""A week's log from its rows: sums, gaps, drains, alarms. All numbers are invented."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from api.week_models import WeekOut
from daemon.clock import HOUR_US, MINUTE_US, parse_rfc3339
from daemon.foresight import Score
from daemon.hour_figures import DayMembers, DrainCheck, HourFigures, Least
from daemon.journal import Blotter, Body, Confirm, Drain, Entry, Undo
from daemon.views import Interval
from daemon.weekly import files
from daemon.weekly.compute import week_log
from daemon.weekly.csv_out import csv_text
from daemon.weekly.records import WeekLog
from daemon.weekly.rows import read_rows
from daemon.weekly.sheet import sheet
from daemon.weekly.text import text_of
from daemon.weekly.weeks import Week, first_hour_us
from tests.daemon.shops import site
from tests.daemon.test_week_outputs import pdf_words
from tests.daemon.week_rows import HeldRows, a_day, an_hour, rows_of, transition

SHOP = site()  # works on Monday and Tuesday, 08:00-12:00 and 13:00-17:30
WEEK = Week(2026, 10)
FROM_US, TO_US = WEEK.bounds_us("UTC")
AFTER_US = TO_US + 3 * HOUR_US


def log_of(rows: HeldRows, now_us: int = AFTER_US, week: Week = WEEK) -> WeekLog:
    return week_log(SHOP, read_rows(rows, week, SHOP, now_us))


def at(text: str) -> int:
    """A time of that week: "02T17:30"."""
    return parse_rfc3339(f"2026-03-{text}:00Z")


def entry(seq: int, at_us: int, body: Body) -> Entry:
    return Entry(seq, at_us, at_us, body)


# ---- sums ----


def test_a_whole_week_is_known() -> None:
    log = log_of(rows_of(SHOP, FROM_US, TO_US))
    assert log.over
    assert log.watched.complete
    assert log.begun_us is None
    assert log.watched.of_s == log.watched.watched_s == 168 * 3600.0
    assert log.watched.open_s == log.watched.open_watched_s == 2 * 8.5 * 3600.0
    told = sheet(SHOP, log)
    assert told.complete
    assert told.known == ("All 168 h were watched.",)


def test_a_week_s_interval_is_that_of_the_members_sums() -> None:
    """Members differ by the same all week: the sum is as wide, relatively, as an hour."""
    log = log_of(rows_of(SHOP, FROM_US, TO_US))
    assert log.water_in_kg is not None
    low, middle, high = log.water_in_kg.values
    assert middle == pytest.approx(0.050 * 168, rel=1e-6)
    # the 5 and 95 % of 16 members spread evenly from 0.8 to 1.2
    assert low == pytest.approx(0.82 * middle, rel=1e-6)
    assert high == pytest.approx(1.18 * middle, rel=1e-6)
    (tank, *_) = log.traps
    assert tank.trap == "tank"
    assert tank.shed_kg is not None
    assert tank.shed_kg.p50 == pytest.approx(1.68, rel=1e-6)
    assert log.plant.on_s == Interval(*[168 * 1200.0] * 3)
    duty = log.plant.duty(log.watched.open_watched_s)
    assert duty is not None
    assert duty.p50 == 1.0  # 800 s in every hour of the week is more than the shop is open


def test_days_of_other_ensembles_are_added_spread_alike() -> None:
    """A changed number of members in the middle of a week loses nothing."""
    rows = rows_of(SHOP, FROM_US, TO_US)
    rows.days[3] = DayMembers(
        rows.days[3].day, {"water in": np.full(4, 7.0), "shed tank": np.full(4, 1.0)}
    )
    log = log_of(rows)
    assert log.water_in_kg is not None
    assert log.water_in_kg.p50 == pytest.approx(0.050 * 144 + 7.0)


def test_an_hour_is_the_same_after_it_was_stored() -> None:
    hour = an_hour(SHOP, FROM_US + 9 * HOUR_US)
    assert hour.outlets
    assert HourFigures.from_json(hour.hour_us, hour.to_json()) == hour


# ---- what is missing ----


def test_hours_without_the_daemon_are_said() -> None:
    rows = rows_of(SHOP, FROM_US, TO_US)
    gone = [at("03T09:00"), at("03T10:00")]
    rows.hours = [each for each in rows.hours if each.hour_us not in gone]
    rows.hours = [
        an_hour(SHOP, each.hour_us, watched_s=1800.0) if each.hour_us == at("03T11:00") else each
        for each in rows.hours
    ]
    log = log_of(rows)
    assert log.watched.gaps == ((at("03T09:00"), at("03T12:00")),)
    assert log.watched.gaps_s == (2.5 * 3600.0,)
    assert log.watched.watched_s == 165.5 * 3600.0
    (gun,) = log.outlets
    assert gun.verdict_s["not watched"] == pytest.approx(2.5 * 3600.0)
    text = text_of(sheet(SHOP, log))
    assert "Watched: 165.5 h of 168 h." in text
    assert "Not watched: Tue 3 Mar, 09:00 to 12:00 (2.5 h)." in text


def test_a_short_restart_is_no_gap() -> None:
    rows = rows_of(SHOP, FROM_US, TO_US)
    rows.hours[30] = an_hour(SHOP, rows.hours[30].hour_us, watched_s=3500.0)
    assert log_of(rows).watched.complete


def test_the_first_week_begins_where_the_record_does() -> None:
    begun_us = at("03T06:40")
    rows = rows_of(SHOP, at("03T07:00"), TO_US)
    rows.begun_us = begun_us
    first = an_hour(SHOP, at("03T06:00"), watched_s=1200.0)
    rows.hours.insert(0, replace(first, from_us=begun_us))
    log = log_of(rows)
    assert log.begun_us == begun_us
    assert log.watched.complete
    assert log.watched.of_s == (TO_US - begun_us) / 1e6
    assert log.watched.open_s == 8.5 * 3600.0  # Tuesday's alone
    assert "The record begins on Tue 3 Mar, 06:40" in text_of(sheet(SHOP, log))


@pytest.mark.parametrize("begun_us", [None, AFTER_US, FROM_US - HOUR_US])
def test_an_empty_week_says_that_nothing_is_known(begun_us: int | None) -> None:
    log = log_of(HeldRows(begun_us=begun_us))
    assert log.empty
    assert log.water_in_kg is None
    assert log.watched.watched_s == 0.0
    text = text_of(sheet(SHOP, log))
    assert "Nothing is known of this week." in text
    assert "No hour of it was watched." in text
    assert "model goes on" not in text
    assert "Duty in open hours: not known." in text


def test_a_week_that_goes_on_is_told_as_far_as_it_goes() -> None:
    now_us = at("03T10:25")
    log = log_of(rows_of(SHOP, FROM_US, at("03T10:00")), now_us)
    assert not log.over
    assert log.until_us == at("03T10:00")
    assert log.watched.complete
    assert log.watched.of_s == 34 * 3600.0
    assert log.watched.open_s == (8.5 + 2.0) * 3600.0
    assert "This week is not over: it is told as far as Tue 3 Mar, 10:00." in sheet(SHOP, log).known


def test_days_follow_the_shop_s_own_clock() -> None:
    """A week in which clocks go back has 169 hours, its Sunday 25."""
    berlin = replace(SHOP, timezone="Europe/Berlin")
    week = Week(2026, 43)
    from_us, to_us = week.bounds_us("Europe/Berlin")
    log = week_log(berlin, read_rows(rows_of(berlin, from_us, to_us), week, berlin, to_us))
    assert log.watched.of_s == log.watched.watched_s == 169 * 3600.0
    assert [day.watched_s / 3600.0 for day in log.days] == [24.0] * 6 + [25.0]
    assert [day.day for day in log.days] == [str(day) for day in week.days()]


def test_a_zone_off_by_half_an_hour_counts_from_half_past() -> None:
    """Kolkata's Monday begins at 18:30 UTC: hours that are full there are none of ours."""
    kolkata = replace(SHOP, timezone="Asia/Kolkata")
    from_us, to_us = (first_hour_us(each) for each in WEEK.bounds_us("Asia/Kolkata"))
    rows = rows_of(kolkata, from_us, to_us)
    log = week_log(kolkata, read_rows(rows, WEEK, kolkata, to_us))
    assert log.watched.of_s == log.watched.watched_s == 168 * 3600.0
    assert log.watched.open_s == 17 * 3600.0
    assert log.watched.complete
    assert [day.watched_s for day in log.days] == [24 * 3600.0] * 7
    assert "Hours are counted from 00:30" in text_of(sheet(kolkata, log))


# ---- outlets ----


def test_hours_by_verdict_and_class_and_the_least_margin() -> None:
    rows = rows_of(SHOP, FROM_US, TO_US)
    low = an_hour(SHOP, at("03T14:00"), margin_k=1.5)
    rows.hours = [low if each.hour_us == low.hour_us else each for each in rows.hours]
    log = log_of(rows)
    (gun,) = log.outlets
    assert gun.verdict_s["wait"] == pytest.approx(0.6 * 17 * 3600.0)
    assert gun.verdict_s["not watched"] == pytest.approx(0.0, abs=1e-6)
    assert gun.class_s == {"7": pytest.approx(17 * 3600.0)}
    assert gun.line == Least(at("03T15:00"), 1.5, 3.5, 5.5, "the hose")
    assert gun.surface is None
    assert len(log.margins["spray-gun"]) == 18  # the hours that touch opening times
    text = text_of(sheet(SHOP, log))
    assert "Least line margin: 3.5 K (1.5 to 5.5 K) on Tue 3 Mar, 15:00, at the hose." in text
    assert "Least surface margin: not known." in text
    assert "in the range of each class" in " ".join(text.split())


# ---- drains ----


def test_drains_are_on_time_or_late_against_the_alarm() -> None:
    rows = rows_of(SHOP, FROM_US, TO_US)
    due = "tank-drain-due", "drain-due"
    rows.changes = [
        transition(at("02T10:00"), *due, "normal", "unacknowledged"),
        transition(at("02T10:05"), *due, "unacknowledged", "acknowledged"),
        transition(at("02T12:00"), *due, "acknowledged", "normal"),
        transition(at("03T10:00"), *due, "normal", "unacknowledged"),
        transition(at("03T10:20"), *due, "unacknowledged", "normal"),
        transition(at("07T10:00"), *due, "normal", "unacknowledged"),
        transition(at("02T09:00"), "riser-flooded", "trap-flooded", "normal", "unacknowledged"),
    ]
    rows.changes.sort(key=lambda each: each.at_us)
    rows.journal = [
        entry(1, at("02T12:00"), Drain("tank", "emptied", 0.5, "AM", "clear")),
        entry(2, at("03T10:20"), Drain("tank")),
        entry(3, at("04T10:00"), Drain("tank", "empty")),
        entry(4, at("04T10:30"), Drain("tank", "partly", 0.1)),
        entry(5, at("04T10:40"), Drain("riser", "emptied", 0.2)),
        entry(6, at("04T10:41"), Undo("riser", 5)),
        entry(7, at("04T10:42"), Drain("gone", "emptied", 0.2)),
        entry(8, at("05T10:00"), Blotter("spray-gun", "water", "JK")),
    ]
    rows.checks = [
        DrainCheck(1, at("02T12:00"), "tank", 0.5, Interval(0.3, 0.4, 0.6), True),
        DrainCheck(3, at("04T10:00"), "tank", 0.0, Interval(0.1, 0.2, 0.3), False),
    ]
    log = log_of(rows)
    tank, riser, _ = log.traps
    assert (tank.drains, tank.on_time, tank.late) == (4, 2, 1)
    assert tank.longest_late_s == 2 * 3600.0
    assert tank.measured == 3
    assert tank.measured_kg == pytest.approx(0.6)
    assert tank.due_since_us == at("07T10:00")
    assert (riser.drains, riser.measured) == (0, 0)
    assert [line.late_s for line in log.drains] == [7200.0, None, None, None]
    assert log.drains[0].expected_kg == Interval(0.3, 0.4, 0.6)
    assert (log.intervals.hit, log.intervals.of) == (1, 2)
    assert [line.believed for line in log.drains] == [True, True, False, True]
    text = " ".join(text_of(sheet(SHOP, log)).split())
    assert "4 drains, 1 of them late; still due: tank" in text
    assert (
        "- Mon 2 Mar, 12:00: trap tank; came out 500 ml; the cup should have shown 400 ml (300 to "
        "600 ml); late 2 h; look, by clear, AM"
    ) in text
    assert "Blotter tests: Thu 5 Mar, 10:00 water (JK)." in text
    assert "was empty" in text
    assert "200 ml (100 to 300 ml); kept, not learned from" in text


# ---- surprises that somebody confirmed ----


def surprised(*journal: Entry) -> HeldRows:
    """A drain of Thursday that was not learned from at once, and what was told besides."""
    rows = rows_of(SHOP, FROM_US, TO_US)
    rows.journal = [entry(3, at("05T10:00"), Drain("tank", "emptied", 0.9)), *journal]
    expected = Interval(0.1, 0.2, 0.3)
    rows.checks = [DrainCheck(3, at("05T10:00"), "tank", 0.9, expected, False)]
    return rows


@pytest.mark.parametrize("when", ["05T10:20", "09T10:00", "30T10:00"])
def test_a_surprise_counts_as_learned_from_once_it_is_confirmed(when: str) -> None:
    rows = surprised(entry(4, at(when), Confirm("tank", "AM")))
    log = log_of(rows, now_us=at("31T00:00"))
    assert [line.believed for line in log.drains] == [True]
    shown = text_of(sheet(SHOP, log))
    assert "200 ml (100 to 300 ml)" in " ".join(shown.split())
    assert "not learned from" not in shown
    assert "not learned from" not in pdf_words(files.pdf_bytes(SHOP, log))
    assert "traps,tank,drains not learned from,,0,,1" in csv_text(SHOP, log)
    assert WeekOut.of(SHOP, log).drains[0].learned_from


@pytest.mark.parametrize(
    "journal",
    [
        [],
        [entry(4, at("05T11:00"), Confirm("riser"))],  # another trap
        [entry(2, at("05T09:00"), Confirm("tank"))],  # spoke of an earlier one
        # the last measurement was another by then
        [entry(4, at("06T09:00"), Drain("tank", "emptied", 0.2)),
         entry(5, at("06T09:01"), Confirm("tank"))],
        [entry(4, at("06T09:00"), Drain("tank", "empty")),
         entry(5, at("09T09:01"), Confirm("tank"))],
    ],
)  # fmt: skip
def test_a_surprise_that_nobody_confirmed_is_not_learned_from(journal: list[Entry]) -> None:
    log = log_of(surprised(*journal), now_us=at("31T00:00"))
    assert not next(line for line in log.drains if line.measured_kg == 0.9).believed
    assert "kept, not learned from" in text_of(sheet(SHOP, log))
    assert "kept, not learned from" in pdf_words(files.pdf_bytes(SHOP, log))
    assert "traps,tank,drains not learned from,,1,,1" in csv_text(SHOP, log)
    assert not all(drain.learned_from for drain in WeekOut.of(SHOP, log).drains)


@pytest.mark.parametrize(
    "between", [Drain("tank"), Drain("tank", "partly", 0.1), Drain("riser", "emptied", 0.1)]
)
def test_a_drain_that_was_not_measured_leaves_the_surprise_to_be_confirmed(between: Drain) -> None:
    journal = entry(4, at("06T09:00"), between), entry(5, at("06T09:01"), Confirm("tank"))
    log = log_of(surprised(*journal))
    assert log.drains[0].believed


def test_a_drain_that_was_due_before_the_week_is_late() -> None:
    rows = rows_of(SHOP, FROM_US, TO_US)
    due_us = FROM_US - 30 * HOUR_US
    rows.changes = [transition(due_us, "bowl-drain-due", "drain-due", "normal", "unacknowledged")]
    rows.journal = [entry(1, at("02T08:00"), Drain("bowl"))]
    log = log_of(rows)
    assert log.drains[0].late_s == 38 * 3600.0
    assert log.alarms == ()  # it was not raised in this week


def test_an_outcome_on_the_edge_of_the_interval_counts_as_held() -> None:
    rows = rows_of(SHOP, FROM_US, TO_US)
    measured = [0.3, 0.6, 0.29, 0.61]
    rows.checks = [
        DrainCheck(n, at("03T10:00"), "tank", kg, Interval(0.3, 0.4, 0.6), True)
        for n, kg in enumerate(measured)
    ]
    hour = 3600 * 1_000_000
    foreseen = Score("tank", FROM_US, FROM_US + hour, FROM_US + 2 * hour, FROM_US + 3 * hour, 0)
    rows.scores = [
        replace(foreseen, happened_us=FROM_US + 2 * hour),
        replace(foreseen, happened_us=FROM_US + 4 * hour),
        replace(foreseen, happened_us=TO_US),  # another week's
    ]
    log = log_of(rows)
    assert (log.intervals.hit, log.intervals.of) == (2, 4)
    assert (log.forecasts.hit, log.forecasts.of) == (1, 2)


# ---- alarms ----


def test_alarms_are_counted_with_how_soon_they_were_seen() -> None:
    rows = rows_of(SHOP, FROM_US, TO_US)
    low = "gun-line-margin-low", "line-margin-low"
    fault = "motor-sensor-fault", "sensor-fault"
    hour, minute = HOUR_US, MINUTE_US
    began = at("02T09:00")
    rows.changes = [
        transition(began, *low, "normal", "unacknowledged"),
        transition(began + 10 * minute, *low, "unacknowledged", "acknowledged"),
        transition(began + hour, *low, "acknowledged", "normal"),
        transition(began + 2 * hour, *low, "normal", "unacknowledged"),
        transition(began + 3 * hour, *low, "unacknowledged", "returned unacknowledged"),
        transition(began + 4 * hour, *low, "returned unacknowledged", "normal"),
        transition(began + 5 * hour, *fault, "normal", "unacknowledged"),
        transition(began + 6 * hour, *fault, "unacknowledged", "returned unacknowledged"),
        transition(began + 7 * hour, *fault, "returned unacknowledged", "unacknowledged"),
    ]
    rows.changes.append(
        replace(transition(began + 8 * hour, *fault, "unacknowledged", "normal"), id="x/corrected")
    )
    margin, sensor = log_of(rows).alarms
    assert (margin.kind, margin.raised, margin.seen) == ("line-margin-low", 2, 2)
    assert margin.median_s == 65 * 60.0
    assert margin.longest_s == 120 * 60.0
    assert (sensor.kind, sensor.raised, sensor.seen) == ("sensor-fault", 2, 0)
    assert sensor.median_s is sensor.longest_s is None


def test_a_day_s_sums_stay_apart() -> None:
    rows = rows_of(SHOP, FROM_US, TO_US)
    rows.days[0] = a_day(SHOP, "2026-03-02", 5.0)
    log = log_of(rows)
    assert log.days[0].shed_kg["tank"] == pytest.approx(0.05)
    assert log.days[1].shed_kg["tank"] == pytest.approx(0.24)
