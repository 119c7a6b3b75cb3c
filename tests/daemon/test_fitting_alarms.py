"""Alarms of dryers, self-emptying drains, frost and tanks let down, on played records.

Shops and figures invented; the rules of the trade are common practice, no source.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import replace

import numpy as np
import pytest

from daemon.advance import Core
from daemon.alarms import Transition
from daemon.checkpoint import decode, encode
from daemon.clock import DAY_US, HOUR_US, MINUTE_US, SECOND_US
from daemon.journal import Body, Drain, Entry, Service
from daemon.moisture.ensemble import percentiles
from daemon.recovery import carried_over
from daemon.replay import replay
from daemon.site.types import Site
from daemon.state import CoreState, Inputs
from sensors.reading import Reading
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, a_tick, flat, site, working

DRYER = """
[[station]]
id = "dryer"
kind = "refrigerated"
after = "bowl"
{keys}
trap = {{ drain = "float" }}

[[station]]
id = "booth-regulator"
kind = "regulator"
after = "dryer"
"""
ROOM = """
[[sensor]]
id = "dryer-room"
driver = "ds18b20"
serial = "28-00000a1b2c3e"

[[sensor]]
id = "dryer-on"
driver = "contact"
chip = "/dev/gpiochip0"
line = 27

[[station]]
id = "intake"
"""


def with_dryer(keys: str) -> Site:
    text = SITE.replace('[[station]]\nid = "intake"\n', ROOM.lstrip(), 1)
    old = '[[station]]\nid = "booth-regulator"\nkind = "regulator"\nafter = "bowl"\n'
    assert old in text
    return site(text.replace(old, DRYER.format(keys=keys).lstrip()))


class Played:
    """A shop's record played tick by tick, with entries in between."""

    def __init__(self, shop: Site) -> None:
        self.shop, self.core = shop, Core(shop)
        self.state: CoreState | None = None
        self.told: list[Transition] = []
        self.seq = 0

    def play(
        self,
        record: Sequence[tuple[int, list[Reading]]],
        change: Callable[[Reading], Reading | None] = lambda reading: reading,
        extra: Callable[[int], list[Reading]] = lambda now_us: [],
    ) -> CoreState:
        for now_us, readings in record:
            changed = [each for reading in readings if (each := change(reading)) is not None]
            inputs = Inputs([*changed, *extra(now_us)])
            if self.state is None:
                self.state, _, told = self.core.initial(now_us, inputs)
            else:
                self.state, _, told = self.core.advance(self.state, now_us, inputs)
            self.told += told
        assert self.state is not None
        return self.state

    def enter(self, body: Body, after_us: int = SECOND_US) -> None:
        assert self.state is not None
        self.seq += 1
        at_us = self.state.time_us + after_us
        entry = Entry(self.seq, at_us, at_us, body)
        self.state, _, told = self.core.advance(self.state, at_us, Inputs((), [entry]))
        self.told += told

    def alarm(self, name: str) -> str:
        assert self.state is not None
        return self.state.alarms[name].state

    def of(self, name: str) -> list[Transition]:
        return [each for each in self.told if each.alarm == name]


def said(reading: Reading, channel: str, value: float) -> Reading:
    return Reading(channel, value, reading.time_us) if reading.channel == channel else reading


def on(shop: Site, contact: float, room_k: float = 293.15) -> Callable[[int], list[Reading]]:
    """What the dryer's own sensors say."""
    values = {"dryer-on.contact": contact, "dryer-room.temperature": room_k}
    return lambda now_us: a_tick(shop, now_us, values)


def stretch(shop: Site, ticks: int, begun_us: int = BEGUN_US) -> list[tuple[int, list[Reading]]]:
    return list(working(shop, ticks, begun_us))


# --- frost -----------------------------------------------------------------------------------


def test_water_where_it_freezes_is_told_after_ten_minutes_and_returns_when_it_is_warm() -> None:
    shop = site()
    played = Played(shop)
    record = stretch(shop, 1500)
    played.play(record[:600])
    assert played.alarm("riser-freeze-risk") == "normal"
    cold = played.state
    assert cold is not None
    played.play(record[600:800], lambda each: said(each, "pipe-end.temperature", 268.15))
    (raised,) = played.of("riser-freeze-risk")
    assert raised.kind == "freeze-risk"
    assert "There is water in riser and it is freezing there" in raised.text
    assert 10 * MINUTE_US <= raised.at_us - record[600][0] <= 11 * MINUTE_US
    played.play(record[800:1000])
    assert played.alarm("riser-freeze-risk") == "unacknowledged"  # an hour of warmth is asked for
    played.play(record[1000:1300])
    assert played.alarm("riser-freeze-risk") == "returned unacknowledged"


def test_frost_at_a_dry_place_is_nothing_to_tell() -> None:
    shop = site()
    played = Played(shop)
    dry = stretch(shop, 300)
    played.play(
        dry,
        lambda each: said(
            said(each, "pipe-end.temperature", 268.15), "intake-air.relative_humidity", 0.02
        ),
    )
    assert played.of("riser-freeze-risk") == []


def test_a_dryer_that_runs_in_a_cold_room_may_freeze_and_one_that_is_off_may_not() -> None:
    """Below 5 degC around: common practice, no source."""
    keys = (
        'rated_flow = "300 L/min"\npowered = "dryer-on.contact"\naround = "dryer-room.temperature"'
    )
    shop = with_dryer(keys)
    played = Played(shop)
    record = stretch(shop, 300)
    played.play(record[:150], extra=on(shop, 0.0, 275.15))
    assert played.of("dryer-freeze-risk") == []
    played.play(record[150:], extra=on(shop, 1.0, 275.15))
    (raised,) = played.of("dryer-freeze-risk")
    assert "below 5 degC around dryer: its coil may freeze" in raised.text


# --- dryers ----------------------------------------------------------------------------------


def test_an_overloaded_dryer_says_so_and_how_moist_its_air_leaves() -> None:
    shop = with_dryer('rated_flow = "40 L/min"')
    played = Played(shop)
    played.play(stretch(shop, 400))
    (raised,) = played.of("dryer-dryer-overloaded")
    assert raised.kind == "dryer-overloaded"
    assert raised.text.startswith("dryer is overloaded: 7")
    assert "rated for 4" in raised.text
    assert "pressure dew point of about" in raised.text
    assert raised.at_us - BEGUN_US >= 15 * MINUTE_US
    enough = Played(with_dryer('rated_flow = "400 L/min"'))
    enough.play(stretch(shop, 400))
    assert enough.of("dryer-dryer-overloaded") == []


def test_a_dryer_that_is_switched_off_is_suppressed_by_design_until_it_is_on() -> None:
    shop = with_dryer('rated_flow = "40 L/min"\npowered = "dryer-on.contact"')
    played = Played(shop)
    record = stretch(shop, 700)
    played.play(record[:200], extra=on(shop, 1.0))
    assert played.alarm("dryer-dryer-overloaded") == "unacknowledged"
    played.play(record[200:300], extra=on(shop, 0.0))
    assert played.alarm("dryer-dryer-overloaded") == "suppressed by design"
    assert "dryer is switched off: it dries nothing" in played.of("dryer-dryer-overloaded")[-1].text
    played.play(record[300:310], extra=on(shop, 1.0))
    assert played.alarm("dryer-dryer-overloaded") == "normal"
    played.play(record[310:], extra=on(shop, 1.0))
    assert played.alarm("dryer-dryer-overloaded") == "unacknowledged"


def test_a_dryer_out_of_service_raises_nothing() -> None:
    shop = with_dryer('rated_flow = "4 L/min"\nin_service = false')
    played = Played(shop)
    played.play(stretch(shop, 300))
    assert played.alarm("dryer-dryer-overloaded") == "out of service"
    assert [each.after for each in played.of("dryer-dryer-overloaded")] == ["out of service"]


def test_a_spent_cartridge_is_told_and_a_new_one_ends_it() -> None:
    text = SITE.replace(
        'kind = "coalescer"\nafter = "riser"\ntrap = { capacity = "120 ml", drain_at = "60 ml" }',
        'kind = "desiccant"\nafter = "riser"\nmass = "50 g"',
    )
    shop = site(text)
    played = Played(shop)
    record = stretch(shop, 1200)
    played.play(record)
    raised = played.of("bowl-desiccant-spent")
    assert [each.after for each in raised] == ["unacknowledged"]
    assert "The desiccant in bowl is spent" in raised[0].text
    assert "record the change" in raised[0].text
    played.enter(Service("element changed", "bowl"))
    assert played.alarm("bowl-desiccant-spent") == "unacknowledged"  # until the next tick
    state = played.play(stretch(shop, 3, record[-1][0] + PERIOD_US))
    assert played.alarm("bowl-desiccant-spent") == "returned unacknowledged"
    assert state.model.fittings.charge.max() < 1e-3


# --- drains that do not pass -----------------------------------------------------------------

FLOATED = SITE.replace(
    'trap = { capacity = "300 ml", drain_at = "150 ml" }',
    'trap = { drain = "float", capacity = "300 ml", drain_at = "150 ml", opens_at = "20 ml" }',
)
SWITCH = """
[[sensor]]
id = "riser-float"
driver = "float-switch"
line = 22
trap = "riser"
closes_at = "60 ml"

[[station]]
id = "intake"
"""


def test_a_float_drain_holds_its_trap_and_its_drain_is_never_due() -> None:
    shop = site(FLOATED)
    played = Played(shop)
    state = played.play(stretch(shop, 3000))
    held = percentiles(state.model.water.trap[2])
    assert held[1] <= 0.0205
    assert float(np.median(state.model.ledger.passed[2])) > 0.002
    assert played.of("riser-drain-due") == []
    assert played.of("riser-drain-not-passing") == []


def test_water_that_stands_at_a_float_switch_says_that_the_drain_does_not_pass() -> None:
    shop = site(FLOATED.replace('[[station]]\nid = "intake"\n', SWITCH.lstrip(), 1))
    played = Played(shop)
    record = stretch(shop, 400)

    def switch(value: float) -> Callable[[int], list[Reading]]:
        return lambda now_us: a_tick(shop, now_us, {"riser-float.contact": value})

    played.play(record[:100], extra=switch(0.0))
    played.play(record[100:155], extra=switch(1.0))
    assert played.of("riser-drain-not-passing") == []
    played.play(record[155:200], extra=switch(1.0))
    (raised,) = played.of("riser-drain-not-passing")
    assert raised.kind == "drain-not-passing"
    assert "stood at its float switch for 10 min and more" in raised.text
    seen_us = played.state.drains.drains["riser"].seen_us if played.state else 0
    played.play(record[200:], extra=switch(0.0))
    assert played.alarm("riser-drain-not-passing") == "returned unacknowledged"
    assert played.state is not None
    # it opened again although nobody drained: the drain has worked
    assert played.state.drains.drains["riser"].seen_us > seen_us


def test_more_than_a_working_drain_leaves_says_that_it_does_not_pass() -> None:
    shop = site(FLOATED)
    played = Played(shop)
    record = stretch(shop, 500)
    played.play(record[:400])
    played.enter(Drain("riser", volume_kg=0.25))
    (raised,) = played.of("riser-drain-not-passing")
    assert "250 ml stood in it, more than a working drain leaves" in raised.text
    played.play(record[401:])
    assert played.alarm("riser-drain-not-passing") == "unacknowledged"
    played.enter(Service("drain seen working", "riser"))
    played.play(stretch(shop, 2, record[-1][0] + 2 * PERIOD_US))
    assert played.alarm("riser-drain-not-passing") == "returned unacknowledged"


def test_what_a_working_drain_leaves_says_nothing_against_it() -> None:
    shop = site(FLOATED)
    played = Played(shop)
    played.play(stretch(shop, 400))
    played.enter(Drain("riser", volume_kg=0.012))
    assert played.of("riser-drain-not-passing") == []


def test_more_water_than_a_drain_can_pass_is_told() -> None:
    slow = FLOATED.replace('opens_at = "20 ml" }', 'opens_at = "1 ml", passes = "0.0001 L/min" }')
    shop = site(slow)
    played = Played(shop)
    played.play(stretch(shop, 1500))
    (raised,) = played.of("riser-drain-not-passing")
    assert "More water comes to riser than its drain can pass" in raised.text


def test_a_drain_that_nobody_saw_for_a_year_should_be_looked_at() -> None:
    """10 % a year (practice); asked for at a tenth, and not before."""
    shop = site(FLOATED)
    played = Played(shop)
    state = played.play(stretch(shop, 1))
    assert played.core.drains.chance_stuck(state.drains, "riser", state.time_us) == 0.0
    rules = played.core.rules.fittings
    year = played.core.drains.chance_stuck(state.drains, "riser", BEGUN_US + 366 * DAY_US)
    assert year == pytest.approx(0.1, abs=0.001)
    for days, so in ((364, "not so"), (366, "so")):
        later = replace(state, model=replace(state.model, time_us=BEGUN_US + days * DAY_US))
        found = rules.watched(later, played.core.definitions)
        watched = {each.id: (condition, text, each) for each, condition, text in found}
        condition, text, definition = watched["riser-drain-not-passing"]
        assert condition == so
    assert "last seen working on 2026-03-02: the chance that it is stuck is 10 %" in text
    assert definition.priority == "low"


# --- a drain that blows ----------------------------------------------------------------------


def from_evening_on(
    shop: Site, begun_us: int, leak_l_min: float
) -> Iterator[tuple[int, list[Reading]]]:
    """17:00 to 08:30: half an hour of work, then a tank of 100 L that only leaks, by pressure."""
    absolute_pa = 9.0e5
    for number in range(15 * 60 + 30):
        now_us = begun_us + number * MINUTE_US
        works = number < 30 or number > 15 * 60
        values = {
            "intake-air.temperature": 291.15,
            "intake-air.relative_humidity": 0.5,
            "intake-air.pressure": 101_300.0,
            "tank-gauge.pressure": absolute_pa - 1.013e5,
            "pipe-end.temperature": 291.15,
            "motor.contact": float(works),
        }
        yield now_us, a_tick(shop, now_us, values)
        loss_pa = leak_l_min / 100.0 * 1e5 * (absolute_pa / 8.0e5)
        absolute_pa = 9.0e5 if works else max(absolute_pa - loss_pa, 1.04e5)


def test_a_leak_that_was_not_there_before_may_be_a_drain_that_blows() -> None:
    slow = FLOATED.replace('name = "Birch Works"', 'name = "Birch Works"\nsample_every = "60 s"')
    week = "".join(f'{day} = ["08:00-12:00", "13:00-17:30"]\n' for day in ("wed", "thu", "fri"))
    shop = site(slow.replace("[compressor]", week + "[compressor]"))
    played = Played(shop)
    for nights, leak_l_min in enumerate((0.5, 0.5, 40.0, 40.0)):
        evening_us = BEGUN_US + nights * DAY_US + 10 * HOUR_US
        played.play(list(from_evening_on(shop, evening_us, leak_l_min)))
        raised = played.of("riser-drain-blowing")
        assert len(raised) == (nights >= 2), (nights, raised)
    assert raised[0].kind == "drain-blowing"
    assert "the drain of riser may stand open and blow" in raised[0].text
    assert "it was 0." in raised[0].text
    played.enter(Service("drain seen working", "riser"))
    assert played.state is not None
    played.play(list(from_evening_on(shop, played.state.time_us + MINUTE_US, 0.5))[:3])
    assert played.alarm("riser-drain-blowing") == "returned unacknowledged"


# --- a pressure that fell --------------------------------------------------------------------


def falling(
    shop: Site, begun_us: int, drop_pa: float, running: bool = False, ticks: int = 30
) -> list[tuple[int, list[Reading]]]:
    """A tank at rest that loses this much between two readings."""
    found = []
    for number in range(ticks):
        now_us = begun_us + number * PERIOD_US
        gauge = 8e5 - (drop_pa if number >= ticks // 2 else 0.0) + 200.0 * (number % 3)
        values = {
            "intake-air.temperature": 293.15,
            "intake-air.relative_humidity": 0.5,
            "intake-air.pressure": 101_300.0,
            "tank-gauge.pressure": gauge,
            "pipe-end.temperature": 291.15,
            "motor.contact": float(running),
        }
        found.append((now_us, a_tick(shop, now_us, values)))
    return found


def test_a_pressure_that_falls_like_from_an_open_drain_is_asked_about() -> None:
    """1.5 bar in 10 s out of 100 L: a 4 mm valve at 8 bar, some 15 L/s (practice)."""
    shop = site()
    played = Played(shop)
    played.play(falling(shop, BEGUN_US, 1.5e5))
    (raised,) = played.of("tank-pressure-fell")
    assert raised.kind == "pressure-fell"
    assert "fell fast at 07:02 (1.5 bar in 10 s" in raised.text
    assert "was it drained? If so, record the drain" in raised.text
    played.enter(Drain("tank"))
    played.play(stretch(shop, 2, BEGUN_US + HOUR_US))
    assert played.alarm("tank-pressure-fell") == "returned unacknowledged"


def test_a_fall_around_a_recorded_drain_is_not_asked_about() -> None:
    shop = site()
    played = Played(shop)
    record = falling(shop, BEGUN_US, 1.5e5)
    played.play(record[:15])
    played.enter(Drain("tank"))
    played.play(record[15:])
    assert played.of("tank-pressure-fell") == []


@pytest.mark.parametrize(("drop_pa", "running"), [(0.2e5, False), (0.6e5, False), (1.5e5, True)])
def test_use_or_a_running_compressor_is_not_taken_for_a_drain(
    drop_pa: float, running: bool
) -> None:
    """0.6 bar in 10 s out of 100 L is 360 L/min: a blow gun on a full tank."""
    shop = site()
    played = Played(shop)
    played.play(falling(shop, BEGUN_US, drop_pa, running))
    assert played.of("tank-pressure-fell") == []


# --- the state -------------------------------------------------------------------------------

EVERYTHING = (
    'rated_flow = "60 L/min"\npowered = "dryer-on.contact"\naround = "dryer-room.temperature"'
)


def test_a_checkpoint_keeps_dryers_and_drains_to_the_bit() -> None:
    shop = with_dryer(EVERYTHING)
    played = Played(shop)
    record = stretch(shop, 120)
    half = played.play(record[:60], extra=on(shop, 1.0))
    again = Played(shop)
    again.state, _ = decode(encode(half, "x"))
    on_end = played.play(record[60:], extra=on(shop, 1.0))
    back_end = again.play(record[60:], extra=on(shop, 1.0))
    assert encode(on_end, "x") == encode(back_end, "x")


def test_a_replay_with_a_dryer_gives_the_live_bits() -> None:
    shop = with_dryer(EVERYTHING)
    played = Played(shop)
    record = stretch(shop, 200)
    extra = on(shop, 1.0)
    live = played.play(record, extra=extra)
    readings = flat([(now_us, [*said_, *extra(now_us)]) for now_us, said_ in record])
    assert encode(replay(Core(shop), readings, []).state, "") == encode(live, "")


def test_a_changed_site_file_keeps_what_a_cartridge_holds_and_when_drains_were_seen() -> None:
    text = FLOATED.replace(
        'kind = "coalescer"\nafter = "riser"\ntrap = { capacity = "120 ml", drain_at = "60 ml" }',
        'kind = "desiccant"\nafter = "riser"\nmass = "2 kg"',
    )
    shop = site(text)
    played = Played(shop)
    old = played.play(stretch(shop, 400))
    changed = Core(site(text.replace("members = 32", "members = 48").replace("3 bar", "4 bar")))
    now_us = old.time_us + HOUR_US
    fresh, _, _ = changed.initial(now_us, Inputs(a_tick(shop, now_us, {"motor.contact": 0.0})))
    state = carried_over(changed, fresh, old)
    was, now = old.model.fittings.charge[0], state.model.fittings.charge[0]
    assert now.size == 48
    assert percentiles(now) == pytest.approx(percentiles(was), rel=0.05)
    assert state.drains.drains["riser"].seen_us == BEGUN_US
    state.model.ledger.check(state.model.water)
