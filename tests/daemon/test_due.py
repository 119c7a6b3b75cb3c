"""When a drain is due: by volume or by calendar, and the alarm that says so."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import pytest

from daemon.advance import Core
from daemon.clock import HOUR_US, format_rfc3339, parse_rfc3339
from daemon.due import NO_DATE, calendar_due_us, condition, due_words, interval_words
from daemon.journal import Acknowledge, Body, Drain, Entry
from daemon.moisture.description import Fixed, Share, Trap
from daemon.replay import replay
from daemon.site.reader import parse_site
from daemon.site.types import Site
from sensors.reading import Reading
from tests.daemon.records import exact, exact_text
from tests.daemon.shops import a_tick

WEEK = "".join(
    f'{day} = ["07:30-12:00", "12:30-17:30"]\n' for day in ("mon", "tue", "wed", "thu", "fri")
)


def shop(hours: str = WEEK, timezone: str = "UTC", trap: str = "", **said: str) -> Site:
    """Elm Row with hours, in a time zone, its trap described further."""
    text = exact_text(**{"sample_every": "60 s", **said})
    text = text.replace("[site]\n", f'[site]\ntimezone = "{timezone}"\n')
    text = text.replace(
        "[compressor]", f"[hours]\n{hours}\n[compressor]" if hours else "[compressor]"
    )
    return parse_site(text.replace("trap = {", f"trap = {{ {trap}"), "elm-row.toml")


def a_trap(every: str = "working day", every_s: float = 0.0) -> Trap:
    return Trap(
        "petcock", Fixed(15.0, 0.0), 0.6, Share(0.7, 0.0), drain_every=every, every_s=every_s
    )


def due(site: Site, since: str, drained: bool, trap: Trap | None = None) -> str:
    """The next time by the calendar, in UTC; "" when there is none."""
    found = calendar_due_us(site, trap or a_trap(), parse_rfc3339(since), drained)
    return "" if found == NO_DATE else format_rfc3339(found)


# ---- the calendar; 2026-03-02 is a Monday ----


@pytest.mark.parametrize(
    ("since", "drained", "expected"),
    [
        ("2026-03-02T06:00:00Z", False, "2026-03-02T17:30:00Z"),
        ("2026-03-02T09:00:00Z", False, "2026-03-02T17:30:00Z"),
        ("2026-03-02T18:00:00Z", False, "2026-03-03T17:30:00Z"),
        # drained on a working day before it ends: not asked again that day
        ("2026-03-02T07:30:00Z", True, "2026-03-03T17:30:00Z"),
        ("2026-03-02T12:10:00Z", True, "2026-03-03T17:30:00Z"),
        ("2026-03-02T17:29:59Z", True, "2026-03-03T17:30:00Z"),
        # drained when asked, or later that night: the next working day asks
        ("2026-03-02T17:30:00Z", True, "2026-03-03T17:30:00Z"),
        ("2026-03-02T22:00:00Z", True, "2026-03-03T17:30:00Z"),
        ("2026-03-03T05:00:00Z", True, "2026-03-03T17:30:00Z"),
        # over a weekend
        ("2026-03-06T10:00:00Z", True, "2026-03-09T17:30:00Z"),
        ("2026-03-07T10:00:00Z", True, "2026-03-09T17:30:00Z"),
        ("2026-03-07T10:00:00Z", False, "2026-03-09T17:30:00Z"),
    ],
)
def test_a_working_day_asks_at_its_shift_end_unless_it_was_drained_on_that_day(
    since: str, drained: bool, expected: str
) -> None:
    assert due(shop(), since, drained) == expected


def test_a_holiday_does_not_ask() -> None:
    site = shop(f'{WEEK}holidays = ["2026-03-03", "2026-03-04"]')
    assert due(site, "2026-03-02T10:00:00Z", True) == "2026-03-05T17:30:00Z"
    assert due(site, "2026-03-03T10:00:00Z", False) == "2026-03-05T17:30:00Z"


@pytest.mark.parametrize(
    ("timezone", "since", "expected"),
    [
        # summer time in the EU begins on 2026-03-29 and ends on 2026-10-25 (directive 2000/84/EC)
        ("Europe/Lisbon", "2026-03-26T12:00:00Z", "2026-03-27T17:30:00Z"),
        ("Europe/Lisbon", "2026-03-27T12:00:00Z", "2026-03-30T16:30:00Z"),
        ("Europe/Lisbon", "2026-10-23T12:00:00Z", "2026-10-26T17:30:00Z"),
        ("Europe/Lisbon", "2026-10-22T12:00:00Z", "2026-10-23T16:30:00Z"),
        # in the US on 2026-03-08 and 2026-11-01 (Energy Policy Act of 2005)
        ("America/Chicago", "2026-03-06T16:00:00Z", "2026-03-09T22:30:00Z"),
        ("America/Chicago", "2026-03-05T16:00:00Z", "2026-03-06T23:30:00Z"),
        ("Asia/Kolkata", "2026-03-02T06:00:00Z", "2026-03-03T12:00:00Z"),
    ],
)
def test_shift_ends_are_in_the_shop_s_own_time(timezone: str, since: str, expected: str) -> None:
    assert due(shop(timezone=timezone), since, True) == expected


def test_a_night_shift_is_one_working_day() -> None:
    site = shop(
        'mon = ["22:00-24:00"]\ntue = ["00:00-06:00", "22:00-24:00"]\nwed = ["00:00-06:00"]'
    )
    assert due(site, "2026-03-02T23:00:00Z", False) == "2026-03-03T06:00:00Z"
    assert due(site, "2026-03-02T23:00:00Z", True) == "2026-03-04T06:00:00Z"
    assert due(site, "2026-03-03T05:00:00Z", True) == "2026-03-04T06:00:00Z"


def test_a_shop_that_is_always_open_asks_at_midnight_of_its_own_time() -> None:
    site = shop("", "Europe/Lisbon")
    assert due(site, "2026-06-01T10:00:00Z", False) == "2026-06-01T23:00:00Z"
    assert due(site, "2026-06-01T10:00:00Z", True) == "2026-06-02T23:00:00Z"


def test_lengths_of_time_count_from_the_last_drain_whatever_the_hours() -> None:
    site = shop()
    half_a_day = a_trap("12 h", 12 * 3600.0)
    assert due(site, "2026-03-06T20:00:00Z", True, half_a_day) == "2026-03-07T08:00:00Z"
    assert due(site, "2026-03-06T20:00:00Z", False, half_a_day) == "2026-03-07T08:00:00Z"
    assert due(site, "2026-03-28T12:00:00Z", True, a_trap("3 days", 3 * 86400.0)) == (
        "2026-03-31T12:00:00Z"
    )


def test_without_a_calendar_there_is_no_date() -> None:
    assert due(shop(), "2026-03-02T09:00:00Z", True, a_trap("never")) == ""


# ---- the condition and the words ----


@pytest.mark.parametrize(
    ("probability", "calendar", "drained", "expected"),
    [
        (0.5, False, False, "so"),
        (0.499, False, False, "between"),
        (0.3, False, False, "between"),
        (0.299, False, False, "not so"),
        (0.0, True, False, "so"),
        (0.4, False, True, "not so"),
        (0.6, False, True, "so"),  # what stays behind is already too much
        (0.0, False, False, "not so"),
    ],
)
def test_it_is_due_by_volume_or_by_calendar_whichever_comes_first(
    probability: float, calendar: bool, drained: bool, expected: str
) -> None:
    assert condition(probability, calendar, drained) == expected


@pytest.mark.parametrize(
    ("units", "kg", "expected"),
    [
        ("metric", (0.3, 0.41, 0.56), "410 ml (300 to 560 ml)"),
        ("metric", (0.56, 0.98, 1.4), "980 ml (560 ml to 1.4 L)"),
        ("metric", (0.0, 0.0004, 0.0006), "0 ml (0 to 1 ml)"),
        ("us", (0.3, 0.41, 0.56), "13.9 oz (10.1 to 18.9 oz)"),
    ],
)
def test_an_interval_in_the_shop_s_units(
    units: str, kg: tuple[float, float, float], expected: str
) -> None:
    site = replace(shop(), units=units)  # type: ignore[arg-type]
    assert interval_words(site, *kg) == expected


def test_the_words_say_how_sure_and_what_to_do() -> None:
    held = (0.5, 0.62, 0.75)
    by_volume = due_words(shop(), "tank", a_trap(), held, "volume")
    assert by_volume.startswith("Drain tank now: about 620 ml (500 to 750 ml)")
    assert "its limit is 600 ml" in by_volume
    by_calendar = due_words(shop(), "tank", a_trap(), held, "calendar")
    assert "it is drained every working day" in by_calendar
    assert "every 12 h" in due_words(shop(), "tank", a_trap("12 h", 1.0), held, "calendar")


# ---- the alarm, through the core ----


def idle(site: Site, begun: str, hours: float) -> list[Reading]:
    """A shop in which the compressor stands still: nothing comes to the trap."""
    begun_us = parse_rfc3339(begun)
    times = range(begun_us, begun_us + round(hours * HOUR_US) + 1, site.sample_every_us)
    felt = {
        "intake-air.temperature": 293.15,
        "intake-air.relative_humidity": 0.5,
        "intake-air.pressure": 101_325.0,
        "motor.contact": 0.0,
    }
    return [each for now_us in times for each in a_tick(site, now_us, felt)]


def life(
    site: Site, begun: str, hours: float, *told: tuple[str, Body]
) -> list[tuple[str, str, str]]:
    """The drain-due alarm's changes: time, state, who."""
    entries: Sequence[Entry] = [
        Entry(n, parse_rfc3339(at), parse_rfc3339(at), body) for n, (at, body) in enumerate(told, 1)
    ]
    result = replay(Core(site), idle(site, begun, hours), entries)
    return [
        (format_rfc3339(each.at_us)[11:19], each.after, each.by)
        for each in result.transitions
        if each.alarm == "tank-drain-due"
    ]


FULL = {"holds_at_start": "650 ml", "drain_at": "600 ml"}


def test_a_full_trap_is_due_after_two_minutes_and_normal_when_drained() -> None:
    site = exact(sample_every="60 s", **FULL)
    found = life(
        site, "2026-03-02T09:00:00Z", 0.5, ("2026-03-02T09:20:00Z", Drain("tank", by="AM"))
    )
    assert found == [
        ("09:02:00", "unacknowledged", ""),
        ("09:20:00", "acknowledged", "AM"),
        ("09:20:00", "normal", ""),
    ]


def test_seen_and_drained_later() -> None:
    site = exact(sample_every="60 s", **FULL)
    found = life(
        site,
        "2026-03-02T09:00:00Z",
        0.5,
        ("2026-03-02T09:10:00Z", Acknowledge("tank-drain-due", "BK")),
        ("2026-03-02T09:20:00Z", Drain("tank", by="AM")),
    )
    assert found == [
        ("09:02:00", "unacknowledged", ""),
        ("09:10:00", "acknowledged", "BK"),
        ("09:20:00", "normal", ""),
    ]


def test_a_trap_that_is_drained_before_the_delay_is_over_is_not_due() -> None:
    site = exact(sample_every="60 s", **FULL)
    assert life(site, "2026-03-02T09:00:00Z", 0.5, ("2026-03-02T09:01:30Z", Drain("tank"))) == []


def test_water_let_out_without_a_look_at_the_alarm_returns_it_unacknowledged() -> None:
    """A part is let out: below the limit it is over, but nobody has seen it yet."""
    site = exact(sample_every="60 s", **FULL)
    found = life(
        site,
        "2026-03-02T09:00:00Z",
        0.5,
        ("2026-03-02T09:10:00Z", Drain("tank", "partly", 0.4)),
        ("2026-03-02T09:20:00Z", Acknowledge("tank-drain-due", "BK")),
    )
    assert found == [
        ("09:02:00", "unacknowledged", ""),
        ("09:10:00", "returned unacknowledged", ""),
        ("09:20:00", "normal", "BK"),
    ]


def test_between_the_limits_a_raised_alarm_stays() -> None:
    """Most of the members are below the drain-at level, but more than a third are not."""
    text = exact_text(sample_every="60 s", **FULL).replace("members = 16", "members = 128")
    core = Core(parse_site(text, "elm-row.toml"))
    readings = idle(core.site, "2026-03-02T09:00:00Z", 0.1)
    state = replay(core, readings, []).state
    row = core.model.plan.index["tank"]
    for members, expected in ((64, True), (60, True), (39, True), (38, False)):
        water = state.model.water.trap.copy()
        water[row] = 0.5
        water[row, :members] = 0.65
        model = replace(
            state.model, water=replace(state.model.water, trap=water), round_start=water.copy()
        )
        state = replace(state, model=model)
        alarms, _ = core.rules.watch(state)
        state = replace(state, alarms=alarms)
        assert alarms["tank-drain-due"].raised is expected, members


DAILY = 'drain_every = "working day", '


def test_the_calendar_raises_it_at_the_shift_end_to_the_minute() -> None:
    """Little water, drained daily against rust all the same: no delay, and it says why."""
    site = shop(trap=DAILY)
    assert life(site, "2026-03-02T16:00:00Z", 2.0) == [("17:30:00", "unacknowledged", "")]
    result = replay(Core(site), idle(site, "2026-03-02T16:00:00Z", 2.0), [])
    (text,) = (each.text for each in result.transitions if each.alarm == "tank-drain-due")
    assert "every working day" in text
    view = Core(site).views(result.state)[0]
    assert (view.because, view.due) == ("calendar", True)


@pytest.mark.parametrize("outcome", ["emptied", "empty"])
def test_a_trap_that_was_drained_that_day_is_not_asked_for_at_its_end(outcome: str) -> None:
    site = shop(trap=DAILY)
    drain = Drain("tank", outcome)  # type: ignore[arg-type]
    assert life(site, "2026-03-02T16:00:00Z", 25.0, ("2026-03-02T16:30:00Z", drain)) == []
    assert life(site, "2026-03-02T16:00:00Z", 26.0, ("2026-03-02T16:30:00Z", drain)) == [
        ("17:30:00", "unacknowledged", "")  # on Tuesday
    ]


def test_a_part_let_out_is_no_drain_for_the_calendar() -> None:
    site = shop(trap=DAILY, holds_at_start="100 ml")
    drain = ("2026-03-02T16:30:00Z", Drain("tank", "partly", 0.05))
    assert life(site, "2026-03-02T16:00:00Z", 2.0, drain) == [("17:30:00", "unacknowledged", "")]


def test_a_drain_that_was_asked_for_ends_it_until_the_next_shift_end() -> None:
    site = shop(trap=DAILY)
    found = life(
        site, "2026-03-02T16:00:00Z", 26.0, ("2026-03-02T17:40:00Z", Drain("tank", by="AM"))
    )
    assert found == [
        ("17:30:00", "unacknowledged", ""),
        ("17:40:00", "acknowledged", "AM"),
        ("17:40:00", "normal", ""),
        ("17:30:00", "unacknowledged", ""),
    ]


def test_an_overdue_drain_stays_due_over_night_and_over_the_next_shift_end() -> None:
    assert life(shop(trap=DAILY), "2026-03-02T16:00:00Z", 30.0) == [
        ("17:30:00", "unacknowledged", "")
    ]


def test_hours_of_its_own() -> None:
    site = shop(trap='drain_every = "2 h", ')
    found = life(site, "2026-03-02T09:00:00Z", 4.0, ("2026-03-02T10:00:00Z", Drain("tank")))
    assert found == [("12:00:00", "unacknowledged", "")]
