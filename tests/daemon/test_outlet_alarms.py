"""The margin alarms: raised in working hours, with a deadband, looked at now and then."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import pytest

from daemon.advance import Core
from daemon.clock import HOUR_US, MINUTE_US, parse_rfc3339
from daemon.journal import Acknowledge, Entry
from daemon.outlet_alarms import LOOK_EVERY_US
from daemon.replay import Result, replay
from daemon.state import CoreState, Inputs
from sensors.reading import Reading, reading
from tests.daemon.outlet_shops import AT_GUN, a_shop, still
from tests.daemon.shops import PERIOD_US

OPENS_US = parse_rfc3339("2026-03-02T08:00:00Z")  # a Monday
SHOP = a_shop()
CORE = Core(SHOP)
LINE, SURFACE = "spray-gun-line-margin-low", "spray-gun-surface-margin-low"


def changing(channel: str, values: Sequence[tuple[float, float]], hours: float) -> list[Reading]:
    """A still record from opening time on, but for one channel: (from that hour on, value)."""
    record = []
    for each in still(SHOP, hours, OPENS_US):
        now_h = (each.time_us - OPENS_US) / HOUR_US
        if each.channel == channel:
            value = [value for from_h, value in values if from_h <= now_h][-1]
            record.append(reading(SHOP.channels[channel], value, each.time_us))
        else:
            record.append(each)
    return record


def told(result: Result, alarm: str) -> list[tuple[str, float]]:
    """Its transitions: the new state, and the hours since opening."""
    return [
        (each.after, (each.at_us - OPENS_US) / HOUR_US)
        for each in result.transitions
        if each.alarm == alarm
    ]


@pytest.mark.parametrize(
    ("alarm", "channel", "warm", "cold"),
    [
        (LINE, "floor.temperature", 291.15, 276.15),
        (SURFACE, "panel.temperature", 293.15, 284.15),
    ],
)
def test_a_low_margin_is_raised_after_two_looks_and_returns_after_two(
    alarm: str, channel: str, warm: float, cold: float
) -> None:
    record = changing(channel, [(0.0, warm), (0.51, cold), (1.51, warm)], 2.5)
    found = told(replay(CORE, record, []), alarm)
    assert [state for state, _ in found] == ["unacknowledged", "returned unacknowledged"]
    assert [at_h * 60 for _, at_h in found] == pytest.approx([50, 110])


@pytest.mark.parametrize(
    ("alarm", "words"),
    [(LINE, "at the slab under the hose the air in the line is"), (SURFACE, "the surface is")],
)
def test_an_alarm_says_what_is_so_how_sure_and_what_to_do(alarm: str, words: str) -> None:
    channel = "floor.temperature" if alarm == LINE else "panel.temperature"
    record = changing(channel, [(0.0, 276.15)], 0.6)
    result = replay(CORE, record, [])
    (raised,) = (each for each in result.transitions if each.alarm == alarm)
    assert raised.kind == alarm.removeprefix("spray-gun-")
    assert (raised.source, raised.priority) == ("spray-gun", "medium")
    assert raised.text.startswith(f"spray-gun: {words}")
    assert " to " in raised.text
    assert "3 K" in raised.text
    assert "warm" in raised.text


def test_in_the_deadband_nothing_changes() -> None:
    """Raised, the line margin must come a kelvin above the limit to return."""
    core_margin = CORE.outlet_views.all(replay(CORE, list(still(SHOP, 0.2, OPENS_US)), []).state)
    margin = core_margin[0].air.line_margin_k
    assert margin is not None
    near_k = 291.15 - margin.p05 + 3.4  # a floor for a 5 % bound of about 3.4 K
    record = changing("floor.temperature", [(0.0, 276.15), (0.6, near_k)], 2.0)
    assert [state for state, _ in told(replay(CORE, record, []), LINE)] == ["unacknowledged"]
    record = changing("floor.temperature", [(0.0, 276.15), (0.6, near_k + 1.5)], 2.0)
    assert len(told(replay(CORE, record, []), LINE)) == 2


def test_nothing_is_raised_while_the_shop_is_closed() -> None:
    closed = OPENS_US - 2 * HOUR_US
    record = list(still(SHOP, 1.9, closed, floor_temperature=276.15))
    assert not told(replay(CORE, record, []), LINE)


def test_what_was_raised_returns_at_lunch_too() -> None:
    record = changing("floor.temperature", [(0.0, 276.15), (4.05, 291.15)], 4.6)
    assert [state for state, _ in told(replay(CORE, record, []), LINE)] == [
        "unacknowledged",
        "returned unacknowledged",
    ]


def test_an_input_that_fails_changes_nothing() -> None:
    record = changing("floor.temperature", [(0.0, 276.15), (0.6, 291.15)], 2.0)
    silent = [
        each
        for each in record
        if each.channel != "floor.temperature" or each.time_us < OPENS_US + 37 * MINUTE_US
    ]  # warm for a minute, then silent: that is no reason to return
    assert [state for state, _ in told(replay(CORE, silent, []), LINE)] == ["unacknowledged"]


def test_an_acknowledged_one_returns_to_normal() -> None:
    record = changing("floor.temperature", [(0.0, 276.15), (1.0, 291.15)], 2.0)
    seen = Entry(1, OPENS_US + 30 * MINUTE_US, OPENS_US, Acknowledge(LINE, "AM"))
    found = told(replay(CORE, record, [seen]), LINE)
    assert [state for state, _ in found] == ["unacknowledged", "acknowledged", "normal"]


def test_margins_are_looked_at_every_ten_minutes_and_not_per_tick() -> None:
    looks: list[int] = []
    look = CORE.rules.margins._line

    class Counting:
        def __call__(self, state: CoreState, *rest: object) -> object:
            looks.append(state.time_us)
            return look(state, *rest)  # type: ignore[arg-type]  # handed on as it came

    core = Core(SHOP)
    core.rules.margins._line = Counting()  # type: ignore[method-assign, assignment]  # counts calls
    replay(core, list(still(SHOP, 1.0, OPENS_US)), [])
    assert LOOK_EVERY_US == 10 * MINUTE_US
    assert [(at_us - OPENS_US) / MINUTE_US for at_us in looks] == [0, 10, 20, 30, 40, 50, 60]


def test_without_a_surface_sensor_there_is_no_alarm_of_the_surface() -> None:
    core = Core(a_shop(AT_GUN.replace('surface = "panel.temperature"\n', "")))
    assert LINE in core.definitions
    assert SURFACE not in core.definitions


def test_powder_has_no_alarm_of_the_surface() -> None:
    assert SURFACE not in Core(a_shop(work="powder")).definitions


def test_a_margin_that_is_nothing_for_good_is_an_alarm_only_for_who_asked() -> None:
    def shop(work: str) -> Core:
        found = a_shop(work=work)
        line = found.line
        last = tuple(replace(each, after="bowl") for each in line.outlets)
        return Core(replace(found, line=replace(line, outlets=last)))

    assert LINE not in shop("").definitions
    assert shop("blasting").definitions[LINE].priority == "low"


def test_a_look_between_two_ticks_costs_nothing_of_the_state() -> None:
    record = list(still(SHOP, 0.1, OPENS_US))
    state = replay(CORE, record, []).state
    assert CORE.rules.margins.look(state) is state
    after, _, _ = CORE.advance(state, state.time_us + PERIOD_US, Inputs())
    assert after.outlets == state.outlets
