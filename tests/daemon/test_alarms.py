"""One alarm's life: delays, deadband, acknowledgement; states after ISA-18.2 / IEC 62682."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from daemon.alarms import (
    AlarmDefinition,
    AlarmRecord,
    AlarmState,
    Condition,
    Transition,
    acknowledge,
    correction,
    longest_shelved_us,
    shelve,
    shown,
    unshelve,
    watch,
)
from daemon.clock import DAY_US, HOUR_US, MINUTE_US, SECOND_US, parse_rfc3339

BEGUN_US = parse_rfc3339("2026-03-02T07:00:00Z")
SLOW = AlarmDefinition("tank-drain-due", "drain-due", "tank", "medium", 2 * MINUTE_US, MINUTE_US)
QUICK = AlarmDefinition("tank-flooded", "trap-flooded", "tank", "high")


class Life:
    """An alarm advanced every 10 seconds."""

    def __init__(self, definition: AlarmDefinition) -> None:
        self.definition = definition
        self.record = AlarmRecord()
        self.now_us = BEGUN_US
        self.told: list[Transition] = []

    def see(self, condition: Condition, times: int = 1) -> AlarmState:
        for _ in range(times):
            self._take(
                watch(self.definition, self.record, self.now_us, condition, f"it is {condition}")
            )
            self.now_us += 10 * SECOND_US
        return self.record.state

    def acknowledge(self, by: str = "AM") -> AlarmState:
        self._take(acknowledge(self.definition, self.record, self.now_us, by))
        return self.record.state

    def shelve(self, minutes: int, by: str = "AM") -> AlarmState:
        until_us = self.now_us + minutes * MINUTE_US
        self._take(shelve(self.definition, self.record, self.now_us, until_us, by, "Put off."))
        return self.record.state

    def unshelve(self, by: str = "AM") -> AlarmState:
        self._take(unshelve(self.definition, self.record, self.now_us, by))
        return self.record.state

    def _take(self, found: tuple[AlarmRecord, Transition | None]) -> None:
        before, (self.record, transition) = self.record, found
        if transition is not None:
            assert (transition.before, transition.after) == (before.state, self.record.state)
            assert transition.at_us == self.record.since_us == self.now_us
            self.told.append(transition)
        else:
            assert self.record.state == before.state


def test_it_is_raised_when_its_condition_has_held_for_the_delay() -> None:
    life = Life(SLOW)
    assert life.see("so", 12) == "normal"  # 0 to 110 s
    assert life.see("so") == "unacknowledged"  # 120 s
    assert life.record.since_us == BEGUN_US + 2 * MINUTE_US


def test_without_a_delay_it_is_raised_at_once() -> None:
    life = Life(QUICK)
    assert life.see("so") == "unacknowledged"
    assert life.see("not so") == "returned unacknowledged"


@pytest.mark.parametrize("break_", ["not so", "between"])
def test_a_break_begins_the_delay_anew(break_: Condition) -> None:
    life = Life(SLOW)
    life.see("so", 12)
    life.see(break_)
    assert life.see("so", 12) == "normal"
    assert life.see("so") == "unacknowledged"


def test_in_the_deadband_a_raised_alarm_stays_and_its_return_begins_anew() -> None:
    life = Life(SLOW)
    life.see("so", 13)
    assert life.see("between", 500) == "unacknowledged"
    life.see("not so", 6)
    life.see("between")
    assert life.see("not so", 6) == "unacknowledged"
    assert life.see("not so") == "returned unacknowledged"


def test_seen_first_and_over_later_it_is_normal_again() -> None:
    life = Life(QUICK)
    life.see("so")
    assert life.acknowledge() == "acknowledged"
    assert life.see("so", 5) == "acknowledged"
    assert life.see("not so") == "normal"
    assert [(each.before, each.after, each.by) for each in life.told] == [
        ("normal", "unacknowledged", ""),
        ("unacknowledged", "acknowledged", "AM"),
        ("acknowledged", "normal", ""),
    ]


def test_over_first_and_seen_later_it_is_normal_again() -> None:
    life = Life(QUICK)
    life.see("so")
    life.see("not so")
    assert life.see("not so", 50) == "returned unacknowledged"
    assert life.acknowledge() == "normal"


def test_what_has_returned_unseen_is_raised_again() -> None:
    life = Life(QUICK)
    life.see("so")
    life.see("not so")
    assert life.see("so") == "unacknowledged"
    assert life.acknowledge() == "acknowledged"
    life.see("not so")
    assert life.see("so") == "unacknowledged"  # a new time, to be seen anew


@pytest.mark.parametrize("condition", ["not so", "between"])
def test_there_is_nothing_to_acknowledge_while_it_is_normal(condition: Condition) -> None:
    life = Life(QUICK)
    life.see(condition)
    assert life.acknowledge() == "normal"
    assert life.told == []


def test_to_acknowledge_twice_is_to_acknowledge_once() -> None:
    life = Life(QUICK)
    life.see("so")
    life.acknowledge("AM")
    life.acknowledge("BK")
    assert [each.by for each in life.told] == ["", "AM"]


def test_what_nobody_needs_to_know_is_kept_quiet_at_once_and_begins_anew() -> None:
    life = Life(SLOW)
    life.see("so", 13)
    assert life.see("by design") == "suppressed by design"
    assert life.acknowledge() == "suppressed by design"
    assert life.see("by design", 20) == "suppressed by design"
    assert life.see("out of service") == "out of service"
    assert life.see("so") == "normal"
    assert life.see("so", 12) == "normal"
    assert life.see("so") == "unacknowledged"


def test_ids_are_readable_stable_and_never_twice_the_same() -> None:
    lives = [Life(QUICK), Life(QUICK)]
    for life in lives:
        for _ in range(3):
            life.see("so", 2)
            life.acknowledge()
            life.see("not so", 2)
    first, second = ([each.id for each in life.told] for life in lives)
    assert first == second
    assert len(set(first)) == len(first) == 9
    assert first[0] == "tank-flooded/2026-03-02T07:00:00Z/unacknowledged"
    assert " " not in "".join(first)


def test_the_text_is_of_when_it_was_raised_or_as_it_is_now() -> None:
    record, _ = watch(QUICK, AlarmRecord(), BEGUN_US, "so", "600 ml")
    record, _ = watch(QUICK, record, BEGUN_US + 1, "so", "700 ml")
    assert shown(QUICK, record).text == "700 ml"
    record, _ = watch(QUICK, record, BEGUN_US + 2, "between", "500 ml")
    assert shown(QUICK, record).text == "700 ml"
    record, told = watch(QUICK, record, BEGUN_US + 3, "not so", "over")
    assert told is not None
    assert told.text == shown(QUICK, record).text == "over"


def test_a_correction_says_what_it_was_and_what_it_is() -> None:
    was = AlarmRecord("unacknowledged", BEGUN_US, -1, "drain it")
    told = correction(SLOW, was, AlarmRecord("normal", BEGUN_US, -1, "no longer due"), BEGUN_US + 7)
    assert (told.before, told.after, told.at_us) == ("unacknowledged", "normal", BEGUN_US + 7)
    assert told.text == "Corrected after a late entry. no longer due"
    assert told.id.endswith("/corrected")


CONDITIONS = st.sampled_from(["so", "not so", "between"])


@given(st.lists(st.one_of(CONDITIONS, st.just("acknowledge")), max_size=120))
def test_whatever_happens_it_is_raised_only_after_its_delay_and_never_skips_a_state(
    events: list[str],
) -> None:
    allowed = {
        ("normal", "unacknowledged"),
        ("unacknowledged", "acknowledged"),
        ("unacknowledged", "returned unacknowledged"),
        ("returned unacknowledged", "unacknowledged"),
        ("returned unacknowledged", "normal"),
        ("acknowledged", "normal"),
    }
    life = Life(SLOW)
    seen: list[Condition] = []
    for event in events:
        if event == "acknowledge":
            life.acknowledge()
            continue
        condition: Condition = event  # type: ignore[assignment]
        seen.append(condition)
        raised_before = life.record.raised
        life.see(condition)
        if life.record.raised and not raised_before:
            assert seen[-13:] == ["so"] * 13
        if raised_before and not life.record.raised:
            assert seen[-7:] == ["not so"] * 7
    assert {(each.before, each.after) for each in life.told} <= allowed
    for earlier, later in zip(life.told, life.told[1:], strict=False):
        assert earlier.after == later.before


# ---- shelved: silent for a while, then what it is ----


@pytest.mark.parametrize("seen", [True, False])
def test_a_shelved_alarm_is_silent_and_unacknowledged_again_when_its_time_is_over(
    seen: bool,
) -> None:
    life = Life(QUICK)
    life.see("so")
    if seen:
        life.acknowledge()
    assert life.shelve(5) == "shelved"
    assert shown(QUICK, life.record).shelved_until_us == life.now_us + 5 * MINUTE_US
    told = len(life.told)
    assert life.see("so", 30) == "shelved"  # 0 to 290 s
    assert len(life.told) == told
    assert life.see("so") == "unacknowledged"  # 300 s
    assert life.told[-1].text == "it is so"
    assert shown(QUICK, life.record).shelved_until_us is None


def test_what_came_and_went_meanwhile_is_over() -> None:
    life = Life(QUICK)
    life.see("so")
    life.shelve(5)
    life.see("not so", 3)
    life.see("so", 3)
    assert life.see("not so", 25) == "normal"
    assert [each.after for each in life.told] == ["unacknowledged", "shelved", "normal"]


def test_what_begins_while_a_normal_alarm_is_shelved_is_told_at_the_end() -> None:
    life = Life(SLOW)
    assert life.shelve(5) == "shelved"
    raised = [life.record.raised]
    life.see("so", 13)  # its delay of two minutes is over
    raised.append(life.record.raised)
    assert raised == [False, True]
    assert life.see("so", 18) == "unacknowledged"


def test_a_delay_that_began_before_goes_on_while_it_is_shelved() -> None:
    life = Life(SLOW)
    life.see("so", 6)  # of 13
    life.shelve(5)
    life.see("so", 6)
    assert not life.record.raised
    life.see("so")
    assert life.record.raised


def test_it_can_be_ended_early_and_only_once() -> None:
    life = Life(QUICK)
    life.see("so")
    life.shelve(60)
    assert life.acknowledge() == "shelved"  # there is nothing to be seen
    assert life.unshelve() == "unacknowledged"
    assert life.told[-1].by == "AM"
    assert life.unshelve() == "unacknowledged"
    assert len(life.told) == 3


def test_shelving_again_counts_from_then() -> None:
    life = Life(QUICK)
    life.see("so")
    life.shelve(5)
    life.see("so", 20)
    life.shelve(5)
    assert life.see("so", 30) == "shelved"
    assert life.see("so") == "unacknowledged"


def test_what_is_suppressed_or_out_of_service_cannot_be_shelved_and_wins_beneath() -> None:
    life = Life(QUICK)
    life.see("by design")
    assert life.shelve(5) == "suppressed by design"
    life.see("so")
    life.shelve(5)
    life.see("by design", 30)
    assert life.see("by design") == "suppressed by design"


def test_urgent_alarms_are_put_off_for_an_hour_at_most_others_for_a_day() -> None:
    assert longest_shelved_us(QUICK) == HOUR_US
    assert longest_shelved_us(SLOW) == DAY_US
