"""Dryers, ratings, baths and self-emptying drains in the site file. Shops invented."""

from __future__ import annotations

import pytest

from daemon.check import explain
from daemon.errors import Problem, SiteError
from daemon.moisture.description import Desiccant, Fixed, Like, Measured, Refrigerated, Station
from daemon.site.reader import parse_site
from daemon.site.types import Site

GOOD = """
[compressor]
free_air_delivery = "150 L/min"
running = "motor.contact"

[[sensor]]
id = "inlet-air"
driver = "bme280"

[[sensor]]
id = "motor"
driver = "contact"
line = 17

[[sensor]]
id = "dryer-on"
driver = "contact"
line = 18

[[sensor]]
id = "cold-water"
driver = "ds18b20"
serial = "28-0123456789ab"

[[station]]
id = "intake"
kind = "intake"
temperature = "inlet-air.temperature"
relative_humidity = "inlet-air.relative_humidity"
pressure = "inlet-air.pressure"

[[station]]
id = "aftercooler"
kind = "cooler"
after = "intake"
coolant = "cold-water.temperature"
approach = "6 K"
rated_flow = "20 m3/h"
separator = true
trap = { drain = "timer", blows_every = "20 min", blows_for = "4 s", passes = "3 L/min" }

[[station]]
id = "tank"
kind = "receiver"
after = "aftercooler"
volume = "100 L"
trap = { drain = "level", opens_at = "400 ml", closes_at = "50 ml" }

[[station]]
id = "dryer"
kind = "refrigerated"
after = "tank"
rated_flow = "25 m3/h"
dew_point = "5 degC"
powered = "dryer-on.contact"
around = "28 degC"
off_when_closed = true
trap = { drain = "float", capacity = "100 ml", opens_at = "20 ml" }

[[station]]
id = "coil"
kind = "cooler"
after = "dryer"
ice = "5 kg"

[[station]]
id = "bowl"
kind = "coalescer"
after = "coil"
rated_flow = "12 cfm"
trap = { drain = "pressure-off" }

[[station]]
id = "beads"
kind = "desiccant"
after = "bowl"
mass = "1.5 kg"
used_at_start = "20 %"
"""


def site(text: str = GOOD) -> Site:
    return parse_site(text, "site.toml")


def station(name: str, text: str = GOOD) -> Station:
    return next(each for each in site(text).line.stations if each.id == name)


def pair(source: object) -> tuple[float, float]:
    """A stated value and its width."""
    assert isinstance(source, Fixed)
    return source.value, source.give_or_take


def problems(text: str) -> tuple[Problem, ...]:
    try:
        site(text)
    except SiteError as error:
        return error.problems
    return ()


def test_a_refrigerated_dryer_is_read_with_all_its_keys() -> None:
    found = station("dryer")
    assert isinstance(found.dryer, Refrigerated)
    assert pair(found.dryer.rated_flow) == pytest.approx((25.0 / 3600.0, 2.5 / 3600.0))
    assert pair(found.dryer.dew_point) == pytest.approx((278.15, 2.0))
    power = found.dryer.power
    assert (power.contact, power.off_when_closed, power.in_service) == (
        "dryer-on.contact",
        True,
        True,
    )
    assert isinstance(found.around, Fixed)
    assert found.around.value == pytest.approx(301.15)
    assert found.trap is not None
    assert found.trap.separation.value == 0.97


def test_a_dryer_s_contact_is_not_taken_for_the_compressor_s() -> None:
    text = GOOD.replace('running = "motor.contact"\n', "")
    assert site(text).line.compressor.running == "motor.contact"


def test_a_cooler_is_as_warm_as_its_coolant_and_the_approach() -> None:
    found = station("aftercooler").temperature
    assert isinstance(found, Measured)
    assert (found.channel, found.plus, found.plus_give_or_take) == (
        "cold-water.temperature",
        6.0,
        3.0,
    )
    literal = station("aftercooler", GOOD.replace('"cold-water.temperature"', '"12 degC"'))
    assert isinstance(literal.temperature, Fixed)
    assert literal.temperature.value == pytest.approx(291.15)
    room = station("aftercooler", GOOD.replace('coolant = "cold-water.temperature"\n', ""))
    assert room.temperature == Like("intake", 6.0, 3.0)


def test_a_coil_in_ice_is_a_little_above_0_degc() -> None:
    found = station("coil")
    assert pair(found.temperature) == pytest.approx((276.15, 2.0))
    assert found.ice == Fixed(5.0, 0.5)


def test_a_cartridge_takes_up_a_share_of_its_mass() -> None:
    """Silica gel: 12 % of its mass +- 5 (practice)."""
    found = station("beads").dryer
    assert isinstance(found, Desiccant)
    assert found.holds is not None
    assert found.holds.value == pytest.approx(0.18)
    assert found.holds.give_or_take == pytest.approx(0.075, rel=0.02)
    assert found.held_at_start_kg == pytest.approx(0.036)
    assert found.dew_point.value == pytest.approx(243.15)


def test_twin_beds_are_what_a_desiccant_dryer_is_unless_said() -> None:
    text = GOOD.replace('mass = "1.5 kg"\nused_at_start = "20 %"', 'rated_flow = "20 m3/h"')
    found = station("beads", text).dryer
    assert isinstance(found, Desiccant)
    assert found.holds is None
    assert found.dew_point.value == pytest.approx(233.15)
    assert (found.purge.value, found.purge.give_or_take) == (0.175, 0.05)


def test_a_dryer_without_a_rating_is_taken_to_suit_the_compressor() -> None:
    text = GOOD.replace('rated_flow = "25 m3/h"\n', "")
    found = station("dryer", text).dryer
    assert isinstance(found, Refrigerated)
    assert found.rated_flow.value == pytest.approx(1.5 * 150e-3 / 60.0)
    said = [each for each in site(text).defaults if each.table == 'station "dryer"']
    assert any(each.key == "rated_flow" and "225 L/min" in each.value for each in said)


def test_drains_that_empty_themselves_are_read_by_their_kind() -> None:
    timer, level, lifted = (
        found.emptying
        for name in ("aftercooler", "tank", "dryer")
        if (found := station(name).trap) is not None
    )
    assert timer is not None
    assert (timer.period_s, timer.open_s) == (1200.0, 4.0)
    assert timer.passes.value == pytest.approx(0.05)
    assert level is not None
    assert (level.opens_at.value, level.closes_at_kg) == pytest.approx((0.4, 0.05))
    assert lifted is not None
    assert lifted.opens_at.value == pytest.approx(0.02)
    assert site().without_effect == ()


def test_a_float_opens_below_drain_at_where_nobody_says_when() -> None:
    trap = 'trap = { drain = "float", capacity = "100 ml", opens_at = "20 ml" }'
    usual = station("dryer", GOOD.replace(', opens_at = "20 ml"', "")).trap
    assert usual is not None
    assert usual.emptying is not None
    assert pair(usual.emptying.opens_at) == pytest.approx((0.03, 0.01))
    low = trap.replace('opens_at = "20 ml"', 'drain_at = "30 ml"')
    early = station("dryer", GOOD.replace(trap, low)).trap
    assert early is not None
    assert early.emptying is not None
    assert early.emptying.opens_at.value == pytest.approx(0.018)


# What stands in the good file, what is written instead, and what the one problem must say.
MISTAKES = [
    ('"25 m3/h"', '"25 bar"', "rated_flow", "a flow belongs here"),
    ('"25 m3/h"', '"25 scfm"', "rated_flow", "different volumes to different makers"),
    ('"25 m3/h"', '"0.1 L/min"', "rated_flow", "is no rated flow"),
    ('"5 degC"', '"30 degC"', "dew_point", "is no pressure dew point of such a dryer: 1 degC to"),
    ('"5 degC"', '"-40 degC"', "dew_point", "is no pressure dew point of such a dryer"),
    ('"dryer-on.contact"', '"dryer-of.contact"', "powered", 'did you mean "dryer-on.contact"'),
    ('"dryer-on.contact"', '"inlet-air.pressure"', "powered", "gives a pressure, but a contact"),
    ("off_when_closed = true", 'off_when_closed = "yes"', "off_when_closed", "true or false"),
    ('powered = "dryer-on', 'purge = "10 %"\npowered = "dryer-on', "purge", "of kind desiccant"),
    (
        'around = "28 degC"',
        'around = { like = "tank" }',
        "around.like",
        "no station of the line says it: name a channel or write a value",
    ),
    ('"28 degC"', '"280 degC"', "around", "is no temperature of a shop's air"),
    ('approach = "6 K"', 'approach = "90 K"', "approach", "0 to 60 K"),
    ('ice = "5 kg"', 'ice = "5 L"', "ice", "is a volume, but a mass belongs here"),
    ('ice = "5 kg"', 'ice = "5 kg"\ncoolant = "3 degC"', "coolant", "says twice what cools it"),
    ('ice = "5 kg"', 'ice = "5 kg"\ntemperature = "8 degC"', "temperature", "is said twice"),
    ('mass = "1.5 kg"', 'bed = "cartridge"', "mass", 'write e.g. mass = "1.5 kg"'),
    ('mass = "1.5 kg"', 'mass = "1.5 kg"\npurge = "15 %"', "purge", "with cartridge beds"),
    ('mass = "1.5 kg"', 'mass = "1.5 kg"\nbed = "triple"', "bed", "is no kind of bed"),
    ('"20 %"', '"120 %"', "used_at_start", "from 0 (new) to 1 (spent)"),
    ('volume = "100 L"', 'volume = "100 L"\nice = "2 kg"', "ice", "of kind cooler, not receiver"),
    ('opens_at = "20 ml"', 'opens_at = "200 ml"', "trap.opens_at", "is no level in this trap"),
    ('opens_at = "20 ml"', 'opens_at = "70 ml"', "trap.opens_at", "lies below drain_at, 50 ml"),
    ('closes_at = "50 ml"', 'closes_at = "500 ml"', "trap.closes_at", "below opens_at, 400 ml"),
    (
        'blows_for = "4 s"',
        'blows_for = "40 min"',
        "trap.blows_for",
        "less than blows_every, 20 min",
    ),
    ('passes = "3 L/min"', 'passes = "3 kg"', "trap.passes", "is a mass, but a flow belongs"),
    (
        'passes = "3 L/min"',
        'opens_at = "9 ml"',
        "trap.opens_at",
        "of kind float or level, not timer",
    ),
    (
        '"pressure-off"',
        '"petcock", blows_for = "3 s"',
        "trap.blows_for",
        "of kind timer, not petcock",
    ),
]


@pytest.mark.parametrize(("good", "bad", "key", "words"), MISTAKES)
def test_a_mistake_is_one_problem_with_what_to_write(
    good: str, bad: str, key: str, words: str
) -> None:
    assert GOOD.count(good) == 1
    found = problems(GOOD.replace(good, bad))
    assert [each.key for each in found] == [key], found
    assert words in str(found[0])


def test_all_mistakes_are_told_at_once() -> None:
    text = GOOD
    wrong = [MISTAKES[n] for n in (0, 3, 11, 12, 15, 21, 23)]
    for good, bad, _, _ in wrong:
        text = text.replace(good, bad)
    found = problems(text)
    assert sorted(each.key for each in found) == sorted(key for _, _, key, _ in wrong)


def test_check_explains_what_dries_and_what_drains_itself() -> None:
    text = " ".join(explain(site()).split())
    for words in (
        "dries to 5 degC at line pressure, give or take 2 K",
        "rated for 417 L/min of free air, give or take 41.7 L/min",
        "runs while dryer-on.contact is closed; off outside working hours",
        "around it 28 degC",
        "ice 5 kg, give or take 0.5 kg, at the start",
        "takes up 0.18 kg, give or take",
        "sensor cold-water.temperature + 6 K",
        "float: opens by itself at 20 ml, passes 0.2 L/min of water",
        "level: opens by itself at 400 ml, closes at 50 ml",
        "timer: blows every 20 min for 4 s, passes 3 L/min of water",
        "pressure-off: opens when the line is let down",
        "10 % of such drains stick within a year",
        "look at the drain, not at the display",
    ):
        assert words in text, words


def test_a_dryer_ends_the_remark_that_the_air_stays_saturated() -> None:
    ends = "Neither a dryer nor a regulator stands before line-end"
    assert ends not in " ".join(site().remarks)
    out = GOOD.replace("off_when_closed = true", "in_service = false")
    out = out.replace('mass = "1.5 kg"', 'mass = "1.5 kg"\nin_service = false')
    said = " ".join(site(out).remarks)
    assert ends in said
    assert "dryer is out of service: it is taken for a pipe." in said


def test_nothing_says_whether_a_dryer_runs_without_a_contact() -> None:
    assert "Nothing says whether beads runs" in " ".join(site().remarks)
    assert "Nothing says whether dryer runs" not in " ".join(site().remarks)
