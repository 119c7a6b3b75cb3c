"""A daemon that did not run blames no sensor for its own silence."""

from __future__ import annotations

from collections.abc import Sequence

from daemon.advance import Core
from daemon.alarms import Transition
from daemon.clock import MINUTE_US
from daemon.replay import replay
from sensors.reading import Reading
from tests.daemon.shops import BEGUN_US, flat, site, working

SHOP = site()
STOPPED_US, STARTED_US = BEGUN_US + 30 * MINUTE_US, BEGUN_US + 50 * MINUTE_US
WHOLE = flat(list(working(SHOP, 7 * 60)))


def faults(readings: Sequence[Reading]) -> list[Transition]:
    """What is told of sensors."""
    found = replay(Core(SHOP), readings, []).transitions
    return [each for each in found if each.kind == "sensor-fault"]


def test_twenty_minutes_without_power_are_no_fault_of_any_sensor() -> None:
    assert not faults([each for each in WHOLE if not STOPPED_US < each.time_us < STARTED_US])


def test_one_that_stays_silent_when_the_others_speak_again_is_at_fault() -> None:
    away = [each for each in WHOLE if not STOPPED_US < each.time_us < STARTED_US]
    (fault,) = faults(
        [e for e in away if e.time_us <= STOPPED_US or e.channel != "pipe-end.temperature"]
    )
    assert (fault.source, fault.after) == ("pipe-end", "unacknowledged")
    assert 0 <= fault.at_us - STARTED_US <= MINUTE_US


def test_one_that_was_at_fault_before_stays_so_while_nobody_speaks() -> None:
    def told(each: Reading) -> bool:
        if each.channel == "pipe-end.temperature":
            return each.time_us < BEGUN_US + 20 * MINUTE_US or each.time_us >= STARTED_US
        return not STOPPED_US < each.time_us < STARTED_US

    raised, returned = faults([each for each in WHOLE if told(each)])
    assert raised.at_us < STOPPED_US
    assert returned.at_us >= STARTED_US
