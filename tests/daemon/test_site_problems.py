"""What is wrong with a site file: all of it at once, one problem for one mistake."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from daemon.errors import Problem, SiteError
from daemon.site.reader import parse_site, read_site
from sensors.registry import DRIVERS

EXAMPLE = Path(__file__).parents[2] / "deploy" / "site-example.toml"

# An invented shop with everything that a mistake can be made in.
GOOD = """
[site]
id = "rowan-works"
timezone = "Europe/Lisbon"
units = "metric"
sample_every = "10 s"

[hours]
mon = ["08:00-12:00", "13:00-17:30"]
holidays = ["2026-12-25"]

[compressor]
free_air_delivery = { value = "150 L/min", give_or_take = "10 %" }
running = "motor.contact"
cut_in = "6 bar"
cut_out = "8 bar"
off_when_closed = true

[cup]
each_time = "5 % + 5 ml"

[[sensor]]
id = "inlet-air"
driver = "bme280"
bus = 1
address = 0x76

[[sensor]]
id = "booth-air"
driver = "bme280"
bus = 1
address = 0x77

[[sensor]]
id = "tank-gauge"
driver = "pressure-transducer"
input = 0
range = "0-12 bar"

[[sensor]]
id = "skin"
driver = "ds18b20"
serial = "28-0123456789ab"

[[sensor]]
id = "motor"
driver = "contact"
line = 17

[[station]]
id = "inlet"
kind = "intake"
temperature = "inlet-air.temperature"
relative_humidity = "inlet-air.relative_humidity"
pressure = "inlet-air.pressure"

[[station]]
id = "tank"
kind = "receiver"
after = "inlet"
volume = "100 L"
temperature = { like = "inlet", rise_by_duty = "20 K", time_constant = "30 min" }
pressure = "tank-gauge.pressure"
trap = { capacity = "15 L", drain_at = "600 ml", separation = { value = 0.7, give_or_take = 0.2 } }

[[station]]
id = "riser"
kind = "pipe"
after = "tank"
temperature = { channel = "skin.temperature", give_or_take = "1 K" }
pressure = { like = "tank", plus = "-0.1 bar" }

[[station]]
id = "regulator"
kind = "regulator"
after = "riser"
set = "3 bar"

[[outlet]]
id = "gun"
after = "regulator"
share = 0.5
surroundings = "booth-air"
work = "powder"
line_margin = "5 K"

[[outlet]]
id = "blast"
after = "riser"
share = 0.5

[mqtt]
host = "127.0.0.1"
port = 1883

[api]
port = 8080
"""


def problems(text: str) -> tuple[Problem, ...]:
    try:
        parse_site(text, "site.toml")
    except SiteError as error:
        return error.problems
    return ()


def test_the_shop_that_mistakes_are_made_in_is_good() -> None:
    assert problems(GOOD) == ()
    assert problems(EXAMPLE.read_text()) == ()


# What stands in the good file, what is written instead, and what the one problem must say.
MISTAKES = [
    # [site]
    ('id = "rowan-works"', 'id = "Rowan Works"', "[site] id", 'write "rowan-works"'),
    ('"Europe/Lisbon"', '"Europe/Lisbn"', "[site] timezone", 'did you mean "Europe/Lisbon"?'),
    ('"Europe/Lisbon"', '"Lisbon time"', "[site] timezone", "is no time zone"),
    ('"Europe/Lisbon"', '"../etc/passwd"', "[site] timezone", "is no time zone"),
    ('"metric"', '"imperial"', '[site] units = "imperial"', "known: metric, us"),
    ('"10 s"', '"10 bar"', "[site] sample_every", "is a pressure, but a duration belongs here"),
    ('"10 s"', '"2 h"', "[site] sample_every", "from 1 s to 10 min"),
    ('"10 s"', "10", "[site] sample_every = 10", "10 has no unit"),
    ("sample_every =", "sample_evry =", "[site] sample_evry", 'did you mean "sample_every"?'),
    ("sample_every =", 'sample_evry = "9 s"\nsample_every =', "[site] sample_evry", "take it out"),
    ("sample_every =", "colour =", "[site] colour", "there is no such key here; known: id, name"),
    ("[site]\n", "", "[file]", "before the first table; write [site] above them"),
    # [hours]
    ('"08:00-12:00"', '"08:00-25:00"', "[hours] mon", "there is no such time; a day ends at 24:00"),
    ('"08:00-12:00"', '"12:00-08:00"', "[hours] mon", "ends before it begins"),
    ('"08:00-12:00"', '"08:00-13:30"', "[hours] mon", "the times overlap at 13:00"),
    ('"08:00-12:00"', '"8 to noon"', "[hours] mon", 'write it like "08:00-12:00"'),
    ('"2026-12-25"', '"2026-02-30"', "[hours] holidays", "no such day in the calendar"),
    ('"2026-12-25"', '"25.12.2026"', "[hours] holidays", 'write it like "2026-12-25"'),
    ("mon =", "monday =", "[hours] monday", 'did you mean "mon"?'),
    ("[hours]\n", "", "[site]", "they belong to [hours]: is its header missing"),
    ('mon = ["08:00-12:00", "13:00-17:30"]\n', "", "[hours]", "no time at which the shop works"),
    # [compressor], [cup]
    ('cut_in = "6 bar"', 'cut_in = "8 bar"', "[compressor] cut_in", "so cut_in lies below"),
    ('cut_in = "6 bar"', 'cut_in = "7 bar abs"', "[compressor] cut_in", 'without "abs"'),
    ('cut_out = "8 bar"', 'cut_out = "8 degC"', "[compressor] cut_out", "is a temperature, but"),
    ('"150 L/min"', '"150 L"', "[compressor] free_air_delivery.value", "is a volume, but a flow"),
    ('"150 L/min"', '"-5 L/min"', "[compressor] free_air_delivery.value", "no compressor's flow"),
    ('"10 %" }', '"150 %" }', "[compressor] free_air_delivery.give_or_take", "at most 100 %"),
    ('"10 %" }', '"-10 %" }', "[compressor] free_air_delivery.give_or_take", "cannot be negative"),
    ('"10 %" }', '"10 %" }\ndisplacement = "250 L/min"', "[compressor] displacement", "twice"),
    ('"motor.contact"', '"moter.contact"', "[compressor] running", 'did you mean "motor.contact"?'),
    ('"motor.contact"', '"motor.contct"', "[compressor] running", 'gives no "contct"'),
    ('"motor.contact"', '"motor"', "[compressor] running", 'write "motor.contact"'),
    ('"motor.contact"', '"skin.temperature"', "[compressor] running", "gives a temperature, but a"),
    ("= true", '= "true"', "[compressor] off_when_closed", "true or false, without quotes"),
    ('"5 % + 5 ml"', '"80 %"', "[cup] each_time", "no error of a cup"),
    ("[cup]", "[cupp]", "[cupp]", "did you mean [cup]?"),
    ("[cup]", "[bucket]", "[bucket]", "there is no such table; known: site, hours"),
    # [[sensor]]
    ('driver = "ds18b20"', 'driver = "ds18b21"', '[sensor "skin"] driver', 'mean "ds18b20"?'),
    ('driver = "ds18b20"', 'driver = "thermistor"', '[sensor "skin"] driver', "known: bme280"),
    ('driver = "ds18b20"', 'modell = "ds18b20"', '[sensor "skin"] modell', 'mean "driver"?'),
    ('driver = "ds18b20"\n', "", '[sensor "skin"] driver', "a sensor needs a driver"),
    ("0x77", "0x76", '[sensor "booth-air"]', 'taken by sensor "inlet-air" already'),
    ("0x77", "0x75", '[sensor "booth-air"] address = 0x75', "write 0x76 or 0x77"),
    ('id = "booth-air"', 'id = "inlet-air"', '[sensor "inlet-air"] id', "another sensor has this"),
    ('id = "skin"', 'id = "Skin!"', '[sensor "Skin!"] id', 'write "skin"'),
    ('id = "skin"\n', "", "[sensor 4] id", "every sensor needs an id"),
    ("input = 0\n", "", '[sensor "tank-gauge"] input', "pressure-transducer needs this key"),
    ("line = 17", "lines = 17", '[sensor "motor"] lines', 'did you mean "line"?'),
    ("line = 17", "pin = 17", '[sensor "motor"] pin', 'did you mean "line"?'),
    ("[[sensor]]\nid = \"skin\"", "[[sensors]]\nid = \"skin\"", "[sensors]", "mean [[sensor]]?"),
    # [[station]]
    ('kind = "receiver"', 'kind = "reciever"', '[station "tank"] kind', 'mean "receiver"?'),
    ('kind = "receiver"', 'kind = "tank"', '[station "tank"] kind', "write receiver"),
    ('kind = "receiver"', 'type = "receiver"', '[station "tank"] type', 'did you mean "kind"?'),
    ('kind = "pipe"', 'kind = "filter"', '[station "riser"] kind', "coalescer or separator"),
    ('kind = "pipe"', 'kind = "dryer"', '[station "riser"] kind', "say which of the two it is"),
    ('= "riser"\nset', '= "rizer"\nset', '[station "regulator"] after', 'mean "riser"?'),
    ('after = "riser"\nset', "set", '[station "regulator"] after', "hangs nowhere"),
    ('after = "inlet"', 'after = "riser"', '[station "tank"] after', "tank -> riser -> tank"),
    ('after = "inlet"', 'after = "tank"', '[station "tank"] after', "in a circle: tank -> tank"),
    ('id = "riser"', 'id = "tank"', '[station "tank"] id', "another station has this id"),
    ('id = "riser"\n', "", "[station 3] id", "every station needs an id"),
    ('"100 L"', '"-100 L"', '[station "tank"] volume', "no tank's volume"),
    ('"100 L"', '"100 bar"', '[station "tank"] volume', "is a pressure, but a volume belongs here"),
    ('"20 K"', '"20 L"', '[station "tank"] temperature.rise_by_duty', "is a volume"),
    ("rise_by_duty =", "zz =", '[station "tank"] temperature.zz', "no such key here"),
    ('{ like = "inlet"', '{ like = "outlet"', '[station "tank"] temperature.like', "no station"),
    ('{ like = "inlet"', '{ value = "20 degC", like = "inlet"', '[station "tank"] temperature',
     "says value and like; keep one"),
    ('like = "tank", plus = "-0.1 bar"', 'plus = "-0.1 bar"', '[station "riser"] pressure',
     "does not say where the value comes from"),
    ('plus = "-0.1 bar"', 'plus = "0.1 bar"', '[station "riser"] pressure', "air loses pressure"),
    ('plus = "-0.1 bar"', 'plus = "-0.1 K"', '[station "riser"] pressure.plus', "temperature"),
    ('like = "tank", plus', 'like = "riser", plus', '[station "riser"] pressure',
     "in a circle: riser -> riser"),
    ('pressure = "tank-gauge.pressure"', 'pressure = "8 degC"', '[station "tank"] pressure',
     "is a temperature, but a pressure belongs here"),
    ('pressure = "tank-gauge.pressure"', 'pressure = "300 bar"', '[station "tank"] pressure',
     "0 to 16 bar"),
    ('pressure = "tank-gauge.pressure"', 'pressure = "booth-air.pressure"',
     '[station "tank"] pressure', "is a barometer: it cannot stand in the line"),
    ('pressure = "tank-gauge.pressure"', 'pressure = "skin.temperature"',
     '[station "tank"] pressure', "gives a temperature, but a pressure belongs here"),
    ('pressure = "inlet-air.pressure"', 'pressure = "tank-gauge.pressure"',
     '[station "inlet"] pressure', "the intake's pressure is the barometer's"),
    ('pressure = "inlet-air.pressure"', 'pressure = "1 bar gauge"', '[station "inlet"] pressure',
     "is absolute"),
    ('pressure = "inlet-air.pressure"', 'pressure = "0 bar"', '[station "inlet"] pressure',
     "500 to 1100 hPa"),
    ('= "inlet-air.relative_humidity"', '= "120 %"', '[station "inlet"] relative_humidity',
     "between 0 and 100 %"),
    ('= "inlet-air.relative_humidity"', "= 55", '[station "inlet"] relative_humidity = 55',
     'write it like "50 %"'),
    ('= "inlet-air.temperature"', '= "400 degC"', '[station "inlet"] temperature', "100 degC"),
    ('= "inlet-air.temperature"', '= "warm"', '[station "inlet"] temperature',
     "neither a value with its unit nor a channel"),
    ('= "inlet-air.temperature"', '= { like = "tank" }', '[station "inlet"] temperature.like',
     "the line begins at the intake"),
    ('after = "tank"\n', 'after = "tank"\nvolume = "5 L"\n', '[station "riser"] volume',
     "belongs to a station of kind receiver"),
    ('set = "3 bar"', 'set = "9 bar"', '[station "regulator"] set', "cut_out is at most 8.2 bar"),
    ('pressure = { like = "tank", plus = "-0.1 bar" }', 'pressure = "2 bar"',
     '[station "regulator"] set = "3 bar"', "riser is at most 2.2 bar"),
    ('set = "3 bar"', 'set = "-1 bar"', '[station "regulator"] set', "0 to 16 bar"),
    ('set = "3 bar"\n', "", '[station "regulator"] set', "needs its set pressure"),
    ('set = "3 bar"', 'set = "3 bar"\ntrap = {}', '[station "regulator"] trap', "keeps no water"),
    ('give_or_take = "1 K"', 'give_or_take = "10 %"', '[station "riser"] temperature.give_or_take',
     'a share says nothing here; write it like "3 K"'),
    ('"30 min"', '"3 weeks"', '[station "tank"] temperature.time_constant', "from 1 s to 1 day"),
    ('rise_by_duty = "20 K"', 'rise_by_duty = "90 K"', '[station "tank"] temperature.rise_by_duty',
     "a tank warms by 0 to 60 K"),
    ('time_constant = "30 min"', 'plus = "3 K"', '[station "tank"] temperature.plus',
     "says nothing beside rise_by_duty"),
    ('channel = "skin.temperature"', 'like = "tank", rise_by_duty = "5 K"',
     '[station "riser"] temperature.rise_by_duty', "belongs to a receiver's temperature"),
    ('channel = "skin.temperature"', "channel = 3", '[station "riser"] temperature.channel = 3',
     "must be a channel in quotes"),
    ('plus = "-0.1 bar"', 'plus = "-90 bar"', '[station "riser"] pressure.plus', "no such differ"),
    ('kind = "intake"\n', 'kind = "intake"\nafter = "tank"\n', '[station "inlet"] after',
     "it hangs on nothing"),
    # traps
    ('"600 ml"', '"600 ml", holds_at_start = "-1 L"', '[station "tank"] trap.holds_at_start',
     "a volume cannot be negative"),
    ('"600 ml"', '"600 ml", drain_every = "0.2 h"', '[station "tank"] trap.drain_every',
     "from 1 h to a year"),
    ('"15 L"', '"0 L"', '[station "tank"] trap.capacity', "no capacity of a trap: more than 0"),
    ('set = "3 bar"', 'set = { give_or_take = "5 %" }', '[station "regulator"] set',
     "says no value"),
    ('after = "tank"\n', 'after = "tank"\ntrap = "yes"\n', '[station "riser"] trap',
     'write trap = "none", or a table'),
    ('"600 ml"', '"20 L"', '[station "tank"] trap.drain_at', "above the trap's capacity, 15 L"),
    ('"600 ml"', '"0 ml"', '[station "tank"] trap.drain_at', "must be more than nothing"),
    ('"15 L"', '"500 L"', '[station "tank"] trap.capacity', "more than the tank's volume, 100 L"),
    ('"600 ml"', '"600 ml", heel = "2 L"', '[station "tank"] trap.heel', "below drain_at, 600 ml"),
    ('"600 ml"', '"600 ml", drain = "valve"', '[station "tank"] trap.drain', "no kind of drain"),
    ('"600 ml"', '"600 ml", drain_every = "often"', '[station "tank"] trap.drain_every', '"12 h"'),
    ("value = 0.7", "value = 1.7", '[station "tank"] trap.separation.value', "from 0 to 1"),
    ("value = 0.7", "value = 1", '[station "tank"] trap.separation', "exactly 1 leaves no room"),
    ("give_or_take = 0.2 }", "give_or_take = 2 }", '[station "tank"] trap.separation.give_or_take',
     "wider than anything"),
    ("drain_at =", "drain-at =", '[station "tank"] trap.drain-at', 'did you mean "drain_at"?'),
    ("trap = {", "trapp = {", '[station "tank"] trapp', 'did you mean "trap"?'),
    # [[outlet]]
    ("share = 0.5\nsur", "share = 0.6\nsur", '[outlet "blast"] share', "are 110 % together"),
    ("share = 0.5\nsur", "share = 0\nsur", '[outlet "gun"] share', "more than 0"),
    ('"powder"', '"breathing"', '[outlet "gun"] work', "not for breathing air"),
    ('"powder"', '"powdr"', '[outlet "gun"] work', 'did you mean "powder"?'),
    ('surroundings = "booth-air"', 'surroundings = "both-air"', '[outlet "gun"] surroundings',
     'did you mean "booth-air"?'),
    ('surroundings = "booth-air"', 'surroundings = "booth-air.temperature"',
     '[outlet "gun"] surroundings', 'write "booth-air"'),
    ('surroundings = "booth-air"', 'surroundings = "skin"', '[outlet "gun"] surroundings',
     "gives no temperature and relative humidity"),
    ('"5 K"', '"5 bar"', '[outlet "gun"] line_margin', "is a pressure"),
    ('after = "regulator"', 'after = "inlet"', '[outlet "gun"] after', "before the compressor"),
    # [mqtt], [api]
    ("port = 1883", "port = 70000", "[mqtt] port = 70000", "from 1 to 65535"),
    ("port = 1883", 'password = "hush"', '[mqtt] password = "..."', "a password needs a user"),
    ("port = 1883", 'tls = false\nca_file = "ca.pem"', "[mqtt] ca_file", "but tls = false"),
    ('host = "127.0.0.1"', 'host = "127.0.0"', "[mqtt] host", "is no address"),
    ("port = 1883", 'user = "u"\npassword = "p"\npassword_file = "f"', "[mqtt] password_file",
     "says the password twice"),
    ("port = 1883", 'prefix = "a b"', "[mqtt] prefix", "is no beginning of a topic"),
    ("port = 8080", 'port = "8080"', '[api] port = "8080"', "without quotes"),
]  # fmt: skip


@pytest.mark.parametrize(("stands", "written", "where", "what"), MISTAKES)
def test_one_mistake_is_one_problem(stands: str, written: str, where: str, what: str) -> None:
    assert stands in GOOD
    found = problems(GOOD.replace(stands, written, 1))
    assert len(found) == 1, "\n".join(str(each) for each in found)
    assert where in str(found[0])
    assert what in str(found[0])


def test_a_second_intake_is_one_problem() -> None:
    found = problems(GOOD + '[[station]]\nid = "other"\nkind = "intake"\n')
    assert [str(each) for each in found] == [
        '[station "other"] kind = "intake": the line begins at one intake, and "inlet" is it; '
        "describe another compressor's line in a site file of its own"
    ]


def test_two_values_like_each_other_are_one_problem() -> None:
    text = GOOD.replace('pressure = "tank-gauge.pressure"', 'pressure = { like = "riser" }')
    (found,) = problems(text)
    assert 'pressure = { like = "riser" }: goes round in a circle: tank -> riser' in str(found)


# --- never choosing between two candidates ---


@pytest.mark.parametrize(
    ("text", "where", "what"),
    [
        (
            '[[sensor]]\nid = "a"\ndriver = "bme280"\n'
            '[[sensor]]\nid = "b"\ndriver = "bme280"\naddress = 0x77\n'
            '[[station]]\nid = "i"\nkind = "intake"\ntemperature = "20 degC"\n',
            '[station "i"] pressure',
            "two or more barometers could serve: a.pressure, b.pressure",
        ),
        (
            '[[sensor]]\nid = "a"\ndriver = "bme280"\n'
            '[[sensor]]\nid = "b"\ndriver = "bme280"\naddress = 0x77\n',
            '[station "intake"] temperature',
            "two or more sensors could stand at the intake: a, b",
        ),
        (
            '[[sensor]]\nid = "a"\ndriver = "contact"\nline = 17\n'
            '[[sensor]]\nid = "b"\ndriver = "contact"\nline = 27\n',
            "[compressor] running",
            "could be the compressor's: a.contact, b.contact",
        ),
        (
            '[[station]]\nid = "t"\nkind = "receiver"\nafter = "intake"\n'
            '[[station]]\nid = "p"\nkind = "pipe"\nafter = "t"\n'
            '[[station]]\nid = "q"\nkind = "pipe"\nafter = "t"\n',
            "[outlet]",
            "more than one end (p, q)",
        ),
    ],
)
def test_between_two_candidates_the_file_must_choose(text: str, where: str, what: str) -> None:
    (found,) = problems(text)
    assert where in str(found)
    assert what in str(found)


def test_a_wrong_channel_at_the_intake_asks_no_further_question() -> None:
    text = (
        '[[sensor]]\nid = "a"\ndriver = "bme280"\n'
        '[[sensor]]\nid = "b"\ndriver = "bme280"\naddress = 0x77\n'
        '[[station]]\nid = "i"\nkind = "intake"\ntemperature = "a.temprature"\n'
    )
    (found,) = problems(text)
    assert 'the sensor "a" gives no "temprature"; did you mean "a.temperature"?' in str(found)


def test_shares_that_leave_nothing_are_one_problem() -> None:
    text = GOOD.replace("share = 0.5\nsur", "share = 1\nsur").replace("share = 0.5", "")
    (found,) = problems(text)
    assert '[outlet "gun"] share = 1: the shares said are 100 % together' in str(found)
    assert "which leaves nothing for blast" in str(found)


def test_a_part_at_the_address_of_a_converter_is_one_problem() -> None:
    spot = replace(
        DRIVERS["bme280"],
        name="spot",
        occupies=lambda config: ("bus 1 address 0x48",),  # whole, where others take an input of it
    )
    text = GOOD + '[[sensor]]\nid = "spot"\ndriver = "spot"\n'
    with pytest.raises(SiteError) as caught:
        parse_site(text, "site.toml", {**DRIVERS, "spot": spot})
    (found,) = caught.value.problems
    assert '[sensor "spot"]: bus 1 address 0x48 is taken by sensor "tank-gauge"' in str(found)


def test_a_second_regulator_cannot_be_set_above_the_first() -> None:
    second = '[[station]]\nid = "fine"\nkind = "regulator"\nafter = "regulator"\nset = "4 bar"\n'
    (found,) = problems(GOOD + second)
    assert '[station "fine"] set = "4 bar"' in str(found)
    assert "regulator is at most 3.15 bar" in str(found)


def test_keys_that_do_not_go_together_are_told_by_the_driver() -> None:
    text = GOOD + (
        '[[sensor]]\nid = "far"\ndriver = "mqtt-channel"\ntopic = "shop/far"\n'
        'quantity = "temperature"\nunit = "bar"\n'
    )
    (found,) = problems(text)
    assert '[sensor "far"] unit = "bar": write one of degC' in str(found)


def test_a_switch_at_a_trap_that_is_not_there_is_told() -> None:
    float_switch = '[[sensor]]\nid = "f"\ndriver = "float-switch"\nline = 5\n'
    at = 'trap = "{}"\ncloses_at = "{}"\n'
    (found,) = problems(GOOD + float_switch + at.format("tonk", "80 ml"))
    assert 'trap = "tonk": no station has this id; did you mean "tank"?' in str(found)
    (found,) = problems(GOOD + float_switch + at.format("regulator", "80 ml"))
    assert "this station has no trap; traps are at tank" in str(found)
    (found,) = problems(GOOD + float_switch + at.format("tank", "20 L"))
    assert "closes_at" in str(found)
    assert "above the trap's capacity, 15 L" in str(found)


# --- all at once ---


def test_ten_mistakes_are_ten_problems_and_nothing_starts() -> None:
    text = GOOD
    for stands, written in [
        ('"Europe/Lisbon"', '"Europe/Lisbonne-sur-Mer"'),
        ('"13:00-17:30"', '"13:00-12:30"'),
        ('cut_in = "6 bar"', 'cut_in = "9 bar"'),
        ("0x77", "0x76"),
        ('driver = "ds18b20"', 'driver = "thermometer"'),
        ('"inlet-air.relative_humidity"', '"130 %"'),
        ('volume = "100 L"', 'volume = "8 bar"'),
        ('after = "riser"\nset', 'after = "nowhere"\nset'),
        ('work = "powder"', 'work = "breathing"'),
        ("[api]\n", '[api]\ncolour = "green"\n'),
    ]:
        assert stands in text
        text = text.replace(stands, written, 1)
    with pytest.raises(SiteError) as caught:
        parse_site(text, "rowan.toml")
    assert len(caught.value.problems) == 10, str(caught.value)
    lines = str(caught.value).splitlines()
    assert lines[0] == "rowan.toml: 10 problems; nothing was started."
    assert [line.split(".")[0].strip() for line in lines[1:]] == [str(n) for n in range(1, 11)]
    for each in caught.value.problems:
        assert each.table
        assert len(each.remedy) > 15


def test_a_missing_id_does_not_hide_another_unknown_name() -> None:
    text = GOOD.replace('id = "riser"\n', "").replace('"motor.contact"', '"moter.contact"')
    text = text.replace('after = "inlet"', 'after = "inlett"')
    found = problems(text)
    assert len(found) == 3
    assert {each.table for each in found} == {"station 3", "compressor", 'station "tank"'}


def test_a_table_without_an_id_does_not_hide_a_station_that_hangs_nowhere() -> None:
    text = GOOD.replace('after = "riser"\nset', 'after = "nowhere"\nset')
    assert len(problems(text + '[[station]]\nkind = "pipe"\nafter = "tank"\n')) == 2
    assert len(problems(text + '[[station]]\nid = "tank"\nkind = "pipe"\nafter = "tank"\n')) == 2


def test_a_set_pressure_is_checked_beside_a_switch_that_is_wrong() -> None:
    text = GOOD.replace('cut_in = "6 bar"', 'cut_in = "9 bar"').replace('"3 bar"', '"12 bar"')
    assert {each.key for each in problems(text)} == {"cut_in", "set"}


# --- slips of the pen, everywhere in a file ---


def slips(text: str) -> Iterator[tuple[str, str]]:
    """Every key, table and name of a file with its last two letters changed over."""
    for match in re.finditer(r"(?m)(?<=^)[a-z_]+(?= = )|(?<=\[)[a-z]{4,}(?=\])|(?<=\"|\.)[a-z-]{4,}"
                             r"(?=\")|(?<=[{,] )[a-z_]+(?= = )", text):  # fmt: skip
        word = match[0]
        changed = word[:-2] + word[-1] + word[-2]
        if changed != word and len(word) > 2:
            line = text.count("\n", 0, match.start()) + 1
            yield f"line {line}: {changed}", text[: match.start()] + changed + text[match.end() :]


FREE_WORDS = ("rowan-worsk", "blats")  # ids that nobody names: any spelling is right


@pytest.mark.parametrize(
    "text", [pytest.param(t, id=name) for name, t in slips(GOOD) if not name.endswith(FREE_WORDS)]
)
def test_a_slip_of_the_pen_is_one_problem(text: str) -> None:
    found = problems(text)
    assert len(found) == 1, "\n".join(str(each) for each in found)


def test_there_are_slips_to_make() -> None:
    names = [name for name, _ in slips(GOOD)]
    assert len(names) > 100
    assert any(name.endswith(": statino") for name in names)
    assert any(name.endswith(": capaciyt") for name in names)


WRONG_VALUES = (
    "true",
    "3",
    "-1",
    '"nonsense"',
    '"8 degC"',
    '"8 L"',
    "[]",
    "{}",
    '""',
    "2026-01-01",
)


@pytest.mark.parametrize("value", WRONG_VALUES)
def test_no_wrong_value_makes_more_than_one_problem(value: str) -> None:
    for match in re.finditer(r"(?m)(?<= = )\S.*$", GOOD):
        text = GOOD[: match.start()] + value + GOOD[match.end() :]
        found = problems(text)
        where = GOOD[: match.end()].splitlines()[-1]
        assert len(found) <= 1, f"{where} -> {value}:\n" + "\n".join(str(each) for each in found)


def test_no_lost_line_makes_more_than_one_problem() -> None:
    lines = GOOD.splitlines()
    for number, line in enumerate(lines):
        found = problems("\n".join(lines[:number] + lines[number + 1 :]))
        assert len(found) <= 1, f"{line}:\n" + "\n".join(str(each) for each in found)


# --- files that are not TOML, or not there ---


@pytest.mark.parametrize(
    ("text", "line", "found"),
    [
        ('[site]\nid = "a"\nname = Rowan\n', "line 3", "name = Rowan"),
        ('[site]\nid = "a"\nid = "b"\n', "line 3", 'id = "b"'),
        ("[site\n", "line 1", "[site"),
        ('[site]\nname = """', "line 2", 'name = """'),
    ],
)
def test_a_syntax_error_stands_alone_with_its_line(text: str, line: str, found: str) -> None:
    (problem,) = problems(text)
    assert problem.table == line
    assert problem.value == found
    assert "not TOML" in problem.remedy


def test_a_file_that_is_not_there_is_named(tmp_path: Path) -> None:
    with pytest.raises(SiteError, match="cannot be read") as caught:
        read_site(tmp_path / "none.toml")
    assert "none.toml" in str(caught.value)


def test_a_file_that_is_not_utf8_is_told_by_line(tmp_path: Path) -> None:
    path = tmp_path / "site.toml"
    path.write_bytes(b'[site]\nname = "M\xfcller"\n')
    with pytest.raises(SiteError, match=r"\[line 2\].*UTF-8"):
        read_site(path)


def test_a_section_that_is_no_table_is_one_problem() -> None:
    assert len(problems("api = 3\n")) == 1
    assert len(problems("[[api]]\nport = 3\n")) == 1
    assert len(problems('[station]\nid = "a"\nkind = "intake"\n')) == 1


def test_a_problem_with_a_password_does_not_show_it() -> None:
    for text in ('[mqtt]\npasword = "hush"\nuser = "u"\n', '[mqtt]\npassword = 77\nuser = "u"\n'):
        found = problems(text)
        assert len(found) == 1
        assert "hush" not in str(found[0])
        assert "77" not in str(found[0])
