"""What `dripleg check` says: the line as understood, what is assumed, and what a hand would ask."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from daemon.check import Section, defaults_table, explain, render, sections
from daemon.site.defaults import KINDS
from daemon.site.reader import parse_site, read_site
from sensors.registry import DRIVERS

EXAMPLE = Path(__file__).parents[2] / "deploy" / "site-example.toml"

AIR = '[[sensor]]\nid = "air"\ndriver = "bme280"\n'
MOTOR = '[[sensor]]\nid = "motor"\ndriver = "contact"\nline = 17\n'
INTAKE = '[[station]]\nid = "intake"\nkind = "intake"\n'
TANK = '[[station]]\nid = "tank"\nkind = "receiver"\nafter = "intake"\n'
LINE = AIR + MOTOR + INTAKE + TANK
REGULATOR = '[[station]]\nid = "reg"\nkind = "regulator"\nafter = "tank"\nset = "3 bar"\n'
GAUGE = '[[sensor]]\nid = "gauge"\ndriver = "pressure-transducer"\ninput = 0\nrange = "0-12 bar"\n'
GAUGED = GAUGE + INTAKE + TANK + 'pressure = "gauge.pressure"\nvolume = "{}"\n'
HOURS = '[hours]\nmon = ["08:00-16:00"]\n'


def explained(text: str) -> str:
    return explain(parse_site(text, "shop.toml"))


def remarks(text: str) -> str:
    return "\n".join(parse_site(text, "shop.toml").remarks)


@pytest.mark.parametrize("text", ["", LINE, "[site]\nunits = 'us'\n" + LINE, EXAMPLE.read_text()])
def test_every_line_fits_into_a_terminal(text: str) -> None:
    lines = explained(text).splitlines()
    assert max(len(line) for line in lines) < 100
    assert not any(line != line.rstrip() for line in lines)


def test_the_line_is_told_station_by_station_in_order() -> None:
    site = read_site(EXAMPLE)
    text = explain(site)
    places = [text.index(f"\n{station.id} ({station.kind}") for station in site.line.stations]
    assert places == sorted(places)
    for config in site.sensors:
        assert f"{config.driver} at {DRIVERS[config.driver].occupies(config)[0]}" in text
    for name in site.channels:
        assert name in text


@pytest.mark.parametrize(
    "words",
    [
        "temperature       sensor tank-skin.temperature, give or take 2 K",
        "pressure          sensor tank-air.pressure (gauge), give or take 0.18 bar",
        "pressure          like tank - 0.1 bar, give or take 0.05 bar",
        "temperature       like inlet, give or take 4 K (not said)",
        "set               3.5 bar gauge, give or take 0.17 bar",
        "trap              holds 25 L; due at 800 ml",
        "drain             petcock, every working day",
        "drain             petcock, every 3 days",
        "keeps             85 % of the liquid that comes, give or take 10 %",
        "share             40 % of the air used",
        "pressure switch   starts at 7 bar, stops at 9 bar gauge",
        "open              mon 07:30-12:00, 12:45-16:30",
        "not on 2026-12-25, 2027-01-01",
        "makes air         while motor.contact is closed",
        "broker            127.0.0.1 port 1883",
    ],
)
def test_values_are_told_in_the_sites_units_with_where_they_come_from(words: str) -> None:
    assert words in explain(read_site(EXAMPLE))


@pytest.mark.parametrize(
    "words",
    [
        "volume            26.4 gal, give or take 13.2 gal (not said)",
        "like intake + 36 degF x duty, over 30 min, give or take 14.4 degF (not said)",
        "101.5 psi gauge, give or take 14.5 psi (not said)",
        "sensor air.temperature, give or take 1.8 degF (not said)",
        "5.3 cfm of free air",
        "surface 5.4 degF",
        "(29 CFR 1910.107)",
        "its margin stays near 0 degF for good",
    ],
)
def test_an_american_shop_is_told_in_its_own_units(words: str) -> None:
    text = explained('[site]\nunits = "us"\n' + AIR + MOTOR)
    assert words in " ".join(text.split()) or words in text
    assert not re.search(r"\d (bar|degC|K|ml|L)\b", text.split("Cautions")[0])


def test_values_nobody_said_are_marked_and_listed_with_the_reason() -> None:
    text = explained(LINE)
    assert "makes air         while motor.contact is closed (not said)" in text
    assert re.search(r'running = "motor.contact" +the only contact that nothing else uses', text)
    said = explained('[compressor]\nrunning = "motor.contact"\n' + LINE)
    assert "makes air         while motor.contact is closed\n" in said
    assert "running =" not in said


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (INTAKE + TANK, "nobody sees when: neither a contact nor the tank's pressure says so"),
        (GAUGED.format("4 L"), "nobody sees when: no contact says so, and readings are too far"),
        (GAUGED.format("40 L"), "while the tank's pressure rises: no contact says so"),
    ],
)
def test_when_a_compressor_without_a_contact_makes_air(text: str, words: str) -> None:
    assert words in " ".join(explained(text).split())
    assert ("at the quickest" in remarks(text)) == ("too far" in words)


def test_a_width_that_nobody_said_is_listed_apart() -> None:
    text = explained(LINE + 'volume = "100 L"\n')
    assert '  [station "tank"] volume 5 L' in text
    assert "volume.give_or_take" not in text


def test_every_key_of_the_example_has_an_effect() -> None:
    assert "Checked, but without effect" not in explain(read_site(EXAMPLE))
    assert "Checked, but without effect" not in explained(LINE)


def test_the_cautions_stand_in_every_explanation() -> None:
    for text in ("", LINE, EXAMPLE.read_text()):
        told = " ".join(explained(text).split())
        for words in (
            "ask whoever zoned it",
            "The compressor starts by itself",
            "Never drill, weld or plug a receiver",
            "Crack a drain valve slowly",
            "fitted by an electrician",
            "never to the drain",
            "not for breathing air",
            "an estimate of water only",
        ):
            assert words in told


def test_a_part_can_be_put_between_the_others() -> None:
    parts = sections(parse_site(LINE, "shop.toml"))
    parts.insert(4, Section("What the sensors read now", ("  air.temperature   20 degC",)))
    text = render(parts)
    assert "\nWhat the sensors read now\n-------------------------\n  air.temperature" in text
    assert text.index("What the sensors read now") < text.index("Not said")


# --- remarks of a practitioner: common practice, no source ---


def test_the_tanks_temperature_is_asked_for_first() -> None:
    site = parse_site(LINE, "shop.toml")
    assert site.remarks[0].startswith("The temperature of tank is a guess")
    assert "ds18b20 under lagging on the tank's outlet stub" in site.remarks[0]
    skin = '[[sensor]]\nid = "skin"\ndriver = "ds18b20"\nserial = "28-0123456789ab"\n'
    assert "is a guess" not in remarks(skin + LINE + 'temperature = "skin.temperature"\n')


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (LINE, "Neither a dryer nor a regulator stands before line-end"),
        (LINE, "is it a screw compressor"),
        (LINE, "There is no [hours] table"),
        (HOURS + LINE, "Is the compressor off at night?"),
        (HOURS + LINE, "The hours are taken for UTC"),
        (AIR + INTAKE + TANK, "Nothing says when the compressor makes air"),
        (GAUGED.format("4 L"), "in 3 s at the quickest, and sample_every is 10 s"),
        (MOTOR + INTAKE + TANK, "Nobody measures the humidity"),
        (MOTOR + INTAKE + TANK, "There is no barometer"),
        (LINE + 'trap = { drain = "float" }', "The float drain of tank can gum shut or stick open"),
        (LINE + 'trap = { drain = "timer" }', "set too short it floods"),
        (LINE + 'trap = { drain = "pressure-off" }', "passes only when the line is let down"),
        (LINE + 'trap = "none"', "a steel tank without one rusts"),
        (
            LINE + REGULATOR + '[[station]]\nid = "c"\nkind = "coalescer"\nafter = "reg"\n',
            "c hangs behind a regulator, where the air is no longer saturated",
        ),
        (
            LINE + REGULATOR + '[[outlet]]\nid = "gun"\nafter = "tank"\n',
            "No air passes reg: no outlet hangs behind",
        ),
        (INTAKE + '[[station]]\nid = "p"\nkind = "pipe"\nafter = "intake"\n', "is a receiver"),
    ],
)  # fmt: skip
def test_what_a_hand_would_say(text: str, words: str) -> None:
    assert words in remarks(text)


def test_what_is_answered_is_not_asked() -> None:
    text = HOURS + '[site]\ntimezone = "Europe/Oslo"\n[compressor]\noff_when_closed = false\n'
    said = remarks(text + LINE + REGULATOR)
    for words in ("off at night", "for UTC", "[hours]", "Neither a dryer", "No air passes"):
        assert words not in said


def test_a_sensor_that_nothing_uses_is_told() -> None:
    skin = '[[sensor]]\nid = "skin"\ndriver = "ds18b20"\nserial = "28-0123456789ab"\n'
    assert "Nothing uses the sensor skin" in remarks(skin + LINE)
    assert "Nothing uses" not in remarks(LINE)


# --- the table of defaults ---


def rows(table: str) -> list[list[str]]:
    return [[cell.strip() for cell in line.strip("|").split("|")] for line in table.splitlines()]


def test_the_table_of_defaults_is_markdown() -> None:
    for block in defaults_table().split("\n\n"):
        cells = rows(block.strip())
        assert len({len(row) for row in cells}) == 1
        assert set(cells[1]) == {"---"}


def test_the_table_of_defaults_names_every_kind_and_every_key_of_every_driver() -> None:
    table = defaults_table()
    for kind in KINDS:
        assert f"| `{kind}` |" in table
    for driver in DRIVERS.values():
        block = table[table.index(f"| `{driver.name}` |") :]
        for key in driver.keys:
            assert f"| `{key.name}` |" in block


def test_the_table_of_defaults_says_what_the_reader_does() -> None:
    table = defaults_table()
    for used in parse_site("", "shop.toml").defaults:
        if used.table in ("site", "compressor", "model", "api"):
            value = used.value.replace(" give or take ", " +- ").strip('"')
            assert re.search(rf"\| `{used.key}` \| `?{re.escape(value)}`? \|", table), used
    separate = parse_site(LINE + '[[station]]\nid = "s"\nkind = "separator"\nafter = "tank"\n', "x")
    trap = separate.line.stations[-1].trap
    assert trap is not None
    share = f"{trap.separation.value:g} +- {trap.separation.give_or_take:g}"
    size = f"{trap.capacity.value * 1000:g} ml"
    assert f"| `separator` | {size} | 50 % of it | {share} (a water separator) | never |" in table
