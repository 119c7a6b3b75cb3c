"""What a good site file is understood to mean. All shops are invented."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from daemon.moisture.description import Fixed, Like, Measured, RiseByDuty, Share, Source, Station
from daemon.moisture.model import Model
from daemon.site.reader import parse_site, read_site
from daemon.site.types import Api, Cup, Site

EXAMPLE = Path(__file__).parents[2] / "deploy" / "site-example.toml"

AIR = '[[sensor]]\nid = "air"\ndriver = "bme280"\n'
MOTOR = '[[sensor]]\nid = "motor"\ndriver = "contact"\nline = 17\n'
INTAKE = '[[station]]\nid = "intake"\nkind = "intake"\n'
TANK = '[[station]]\nid = "tank"\nkind = "receiver"\nafter = "intake"\n'


def site(text: str) -> Site:
    return parse_site(text, "shop/site.toml")


def station(found: Site, name: str) -> Station:
    return next(each for each in found.line.stations if each.id == name)


def tank(more: str = "", before: str = "") -> Station:
    """The tank of a small line."""
    return station(site(before + INTAKE + TANK + more), "tank")


def after_tank(text: str) -> Station:
    """A station "x" behind the tank."""
    return station(site(f'{INTAKE}{TANK}[[station]]\nid = "x"\nafter = "tank"\n{text}'), "x")


def close(found: Source | None, value: float, give_or_take: float, gauge: bool = False) -> bool:
    return (
        isinstance(found, Fixed)
        and found.gauge == gauge
        and math.isclose(found.value, value, rel_tol=1e-9)
        and math.isclose(found.give_or_take, give_or_take, rel_tol=1e-9, abs_tol=1e-12)
    )


# --- the example and the smallest files ---


def test_the_example_site_file_is_read_and_the_model_takes_it() -> None:
    found = read_site(EXAMPLE)
    assert found.id == "hollow-oak"
    assert found.traps == ("tank", "main", "booth-filter", "blast-separator")
    assert [outlet.share for outlet in found.line.outlets] == pytest.approx([0.4, 0.6])
    assert found.line.compressor.running == "motor.contact"
    assert Model(found.line).plan.parent == (-1, 0, 1, 2, 3, 2)


def test_an_empty_file_is_a_site_that_knows_almost_nothing() -> None:
    found = site("")
    assert (found.id, found.name, found.timezone, found.units) == ("shop", "shop", "UTC", "metric")
    assert found.sample_every_us == 10_000_000
    assert found.hours.always_open
    assert found.mqtt is None
    assert (found.api.host, found.api.port) == ("127.0.0.1", 8080)
    assert [each.kind for each in found.line.stations] == ["intake", "receiver"]
    assert close(station(found, "intake").temperature, 293.15, 10.0)
    assert close(station(found, "intake").relative_humidity, 0.5, 0.3)
    assert close(station(found, "intake").pressure, 101_300.0, 3_000.0)
    assert found.line.compressor.running is None
    assert "almost nothing is known" in found.remarks[0]
    Model(found.line)


def test_five_lines_with_one_sensor_and_one_contact_begin() -> None:
    found = site("\n".join([
        '[[sensor]]', 'id = "air"', 'driver = "bme280"',
        '[[sensor]]', 'id = "motor"', 'driver = "contact"', 'line = 17',
    ]))  # fmt: skip
    inlet = station(found, "intake")
    assert inlet.temperature == Measured("air.temperature", 1.0)
    assert inlet.relative_humidity == Measured("air.relative_humidity", 0.03)
    assert inlet.pressure == Measured("air.pressure", 100.0)
    assert found.line.compressor.running == "motor.contact"
    assert [(o.id, o.after, o.share) for o in found.line.outlets] == [("line-end", "tank", 1.0)]
    used = {(each.table, each.key): each.because for each in found.defaults}
    assert used["compressor", "running"] == "the only contact that nothing else uses"
    assert used['station "intake"', "temperature"] == "the only sensor that could stand here"


def test_the_tank_that_nobody_declared_may_be_named() -> None:
    found = site(AIR + '[[outlet]]\nid = "gun"\nafter = "tank"\n')
    assert [(o.id, o.after) for o in found.line.outlets] == [("gun", "tank")]


def test_a_line_without_an_intake_gets_one() -> None:
    found = site(AIR + '[[station]]\nid = "t"\nkind = "receiver"\nafter = "intake"\n')
    assert [each.id for each in found.line.stations] == ["intake", "t"]
    assert station(found, "intake").temperature == Measured("air.temperature", 1.0)


# --- sections ---


def test_every_section_is_read() -> None:
    found = site("""
[site]
id = "birch"
name = "Birch & Sons"
timezone = "America/Chicago"
units = "us"
sample_every = "30 s"
[hours]
mon = ["13:00-17:30", "08:00-12:00"]
sun = "10:00-24:00"
holidays = [2026-12-25, "2027-01-01"]
[cup]
reads_low_by = "3 %"
give_or_take = 0.04
each_time = "2 % + 10 ml"
[model]
members = 64
seed = 7
[mqtt]
host = "broker.local"
user = "dripleg"
password_file = "secret.txt"
ca_file = "/etc/ca.pem"
prefix = "shop/dripleg"
[api]
host = "0.0.0.0"
port = 8081
open_reading = true
""")
    assert (found.name, found.units, found.sample_every_us) == ("Birch & Sons", "us", 30_000_000)
    assert found.hours.spans[0] == ((480, 720), (780, 1050))
    assert found.hours.spans[6] == ((600, 1440),)
    assert found.hours.holidays == {"2026-12-25", "2027-01-01"}
    assert not found.hours.always_open
    assert found.cup == Cup(0.03, 0.04, 0.02, 0.01)
    assert (found.line.members, found.line.seed, found.line.period_s) == (64, 7, 30.0)
    assert found.mqtt is not None
    assert (found.mqtt.host, found.mqtt.port, found.mqtt.tls) == ("broker.local", 8883, True)
    assert found.mqtt.password_file == "shop/secret.txt"
    assert (found.mqtt.ca_file, found.mqtt.prefix) == ("/etc/ca.pem", "shop/dripleg")
    assert found.api == Api("0.0.0.0", 8081, open_reading=True)
    assert not any(each.table in ("site", "hours", "model", "api") for each in found.defaults)


def test_a_password_is_never_shown() -> None:
    found = site('[mqtt]\nuser = "u"\npassword = "hush"\n')
    assert found.mqtt is not None
    assert found.mqtt.password == "hush"
    assert "hush" not in repr(found)


def test_a_file_with_a_byte_order_mark_is_read(tmp_path: Path) -> None:
    path = tmp_path / "site.toml"
    path.write_bytes(b"\xef\xbb\xbf[site]\nid = 'elm'\n")
    assert read_site(str(path)).id == "elm"


# --- the compressor ---


@pytest.mark.parametrize(
    ("text", "value_l_min", "width_l_min"),
    [
        ("", 150.0, 75.0),
        ('free_air_delivery = "200 L/min"', 200.0, 20.0),
        ('free_air_delivery = { value = "200 L/min", give_or_take = "5 %" }', 200.0, 10.0),
        ('free_air_delivery = { value = "200 L/min", give_or_take = "30 L/min" }', 200.0, 30.0),
        ('displacement = "200 L/min"', 130.0, 30.0),  # 0.65 +- 0.15: common practice, no source
        (
            'displacement = { value = "200 L/min", give_or_take = "20 L/min" }',
            130.0,
            math.hypot(30.0, 13.0),
        ),
    ],
)
def test_what_the_compressor_delivers(text: str, value_l_min: float, width_l_min: float) -> None:
    delivered = site(f"[compressor]\n{text}\n").line.compressor.delivered
    assert delivered.value * 60e3 == pytest.approx(value_l_min)
    assert delivered.give_or_take * 60e3 == pytest.approx(width_l_min)


def test_switch_pressures_are_gauge() -> None:
    compressor = site('[compressor]\ncut_in = "90 psi"\ncut_out = "120 psi"\n').line.compressor
    assert close(compressor.cut_in, 90 * 6894.757293168, 2e4, gauge=True)
    assert close(compressor.cut_out, 120 * 6894.757293168, 2e4, gauge=True)
    assert compressor.off_when_closed


def test_a_loaded_contact_stands_before_running() -> None:
    valve = '[[sensor]]\nid = "valve"\ndriver = "contact"\nline = 18\n'
    said = '[compressor]\nrunning = "motor.contact"\nloaded = "valve.contact"\n'
    found = site(MOTOR + valve + said)
    assert found.line.compressor.running == "valve.contact"
    assert not any("screw" in remark for remark in found.remarks)


def test_no_contact_may_be_said_to_be_the_compressors() -> None:
    assert site(MOTOR + '[compressor]\nrunning = "none"\n').line.compressor.running is None


def test_switches_that_belong_to_a_trap_are_not_the_compressors() -> None:
    button = '[[sensor]]\nid = "b"\ndriver = "drained-button"\nline = 22\ntrap = "tank"\n'
    assert site(button).line.compressor.running is None
    assert site(button + MOTOR).line.compressor.running == "motor.contact"


# --- where values come from ---


@pytest.mark.parametrize(
    ("text", "source"),
    [
        ('temperature = "25 degC"', Fixed(298.15, 2.0)),
        ('temperature = { value = "25 degC", give_or_take = "9 degF" }', Fixed(298.15, 5.0)),
        ('temperature = { like = "intake", plus = "8 K" }', Like("intake", 8.0, 8.0)),
        (
            'temperature = { like = "intake", plus = "-9 degF", give_or_take = "0 K" }',
            Like("intake", -5.0, 0.0),
        ),
        (
            'temperature = { like = "intake", rise_by_duty = "15 K", time_constant = "20 min" }',
            RiseByDuty("intake", 15.0, 1200.0, 8.0),
        ),
        ("", RiseByDuty("intake", 20.0, 1800.0, 8.0)),
    ],
)
def test_temperatures_of_a_tank(text: str, source: Source) -> None:
    found = tank(text).temperature
    assert type(found) is type(source)
    for name in source.__slots__:
        assert getattr(found, name) == pytest.approx(getattr(source, name))


@pytest.mark.parametrize(
    ("text", "value", "width", "gauge"),
    [
        ('pressure = "8 bar"', 8e5, 2e4, True),
        ('pressure = "9 bar abs"', 9e5, 2e4, False),
        ('pressure = { value = "8 bar", give_or_take = "10 %" }', 8e5, 8e4, True),
        ('pressure = { value = "8 bar", give_or_take = "0.5 bar" }', 8e5, 5e4, True),
        ("", 7e5, 1e5, True),  # between cut_in and cut_out
    ],
)
def test_pressures_of_a_tank(text: str, value: float, width: float, gauge: bool) -> None:
    assert close(tank(text).pressure, value, width, gauge)


def test_a_channel_has_its_data_sheets_width_unless_another_is_said() -> None:
    gauge = (
        '[[sensor]]\nid = "g"\ndriver = "pressure-transducer"\ninput = 0\n'
        'supply_input = 3\nrange = "0-10 bar"\n'
    )
    sheet = site(gauge).channels["g.pressure"].give_or_take
    assert tank('pressure = "g.pressure"', gauge).pressure == Measured("g.pressure", sheet, True)
    assert tank(
        'pressure = { channel = "g.pressure", give_or_take = "0.1 bar" }', gauge
    ).pressure == Measured("g.pressure", 1e4, True)


@pytest.mark.parametrize(
    ("text", "value", "width"),
    [
        ('pressure = "980 hPa"', 98_000.0, 1_000.0),
        ('pressure = "14.2 psi abs"', 97_905.6, 1_000.0),
        ('pressure = { value = "28.9 inHg", give_or_take = "5 hPa" }', 97_866.6, 500.0),
    ],
)
def test_the_intakes_pressure_is_absolute(text: str, value: float, width: float) -> None:
    found = station(site(INTAKE + text + "\n" + TANK), "intake").pressure
    assert isinstance(found, Fixed)
    assert not found.gauge
    assert found.value == pytest.approx(value, rel=1e-5)
    assert found.give_or_take == pytest.approx(width)


@pytest.mark.parametrize(
    "text", ['relative_humidity = "60 %"', "relative_humidity = { value = 0.6 }"]
)
def test_humidity_is_a_fraction_however_it_is_written(text: str) -> None:
    assert close(station(site(INTAKE + text), "intake").relative_humidity, 0.6, 0.1)


def test_a_sensor_at_the_intake_gives_all_that_it_can() -> None:
    other = AIR.replace('"air"', '"booth"') + "address = 0x77\n"
    found = site(AIR + other + INTAKE + 'temperature = "booth.temperature"\n' + TANK)
    inlet = station(found, "intake")
    assert inlet.relative_humidity == Measured("booth.relative_humidity", 0.03)
    assert inlet.pressure == Measured("booth.pressure", 100.0)


def test_a_sensor_that_serves_an_outlet_is_not_taken_for_the_intakes() -> None:
    other = AIR.replace('"air"', '"booth"') + "address = 0x77\n"
    gun = '[[outlet]]\nid = "gun"\nafter = "tank"\nsurroundings = "booth"\n'
    inlet = station(site(other + AIR + gun), "intake")
    assert inlet.temperature == Measured("air.temperature", 1.0)


def test_a_cell_bled_from_the_line_is_not_taken_for_the_intakes() -> None:
    cell = '[[sensor]]\nid = "cell"\ndriver = "vented-cell"\n'
    inlet = station(site(cell), "intake")
    assert close(inlet.temperature, 293.15, 10.0)
    assert close(inlet.pressure, 101_300.0, 3_000.0)


# --- defaults by kind: common practice, no source ---


@pytest.mark.parametrize(
    ("text", "temperature", "pressure"),
    [
        ('kind = "cooler"', Like("intake", 8.0, 5.0), Like("tank", 0.0, 5e3)),
        ('kind = "pipe"', Like("intake", 0.0, 4.0), Like("tank", 0.0, 5e3)),
        ('kind = "separator"', Like("tank", 0.0, 1.0), Like("tank", 0.0, 5e3)),
        ('kind = "coalescer"', Like("tank", 0.0, 1.0), Like("tank", 0.0, 5e3)),
        (
            'kind = "regulator"\nset = "3 bar"',
            Like("tank", 0.0, 1.0),
            Fixed(3e5, 15e3, gauge=True),
        ),
        ('kind = "receiver"', RiseByDuty("intake", 20.0, 1800.0, 8.0), Like("tank", 0.0, 5e3)),
    ],
)
def test_what_a_station_assumes(text: str, temperature: Source, pressure: Source) -> None:
    found = after_tank(text)
    assert found.temperature == temperature
    assert found.pressure == pressure


def test_a_station_before_the_tank_has_the_tanks_pressure() -> None:
    cooler = '[[station]]\nid = "aftercooler"\nkind = "cooler"\nafter = "intake"\n'
    found = site(INTAKE + TANK.replace('after = "intake"', 'after = "aftercooler"') + cooler)
    assert [each.id for each in found.line.stations] == ["intake", "aftercooler", "tank"]
    assert station(found, "aftercooler").pressure == Like("tank", 0.0, 5e3)
    Model(found.line)


@pytest.mark.parametrize(
    ("text", "separation", "capacity_ml", "drain_at_ml"),
    [
        ('kind = "separator"', Share(0.85, 0.1), 150.0, 75.0),
        ('kind = "coalescer"', Share(0.97, 0.03), 120.0, 60.0),
        ('kind = "pipe"\ntrap = {}', Share(0.6, 0.3), 300.0, 150.0),
        ('kind = "pipe"\ntake_off = "bottom"\ntrap = {}', Share(0.1, 0.1), 300.0, 150.0),
        ('kind = "cooler"\ntrap = {}', Share(0.3, 0.3), 150.0, 75.0),
        ('kind = "cooler"\nseparator = true\ntrap = {}', Share(0.85, 0.1), 150.0, 75.0),
        ('kind = "receiver"\nvolume = "200 L"', Share(0.7, 0.25), 30_000.0, 1_200.0),
    ],
)
def test_what_a_trap_assumes(
    text: str, separation: Share, capacity_ml: float, drain_at_ml: float
) -> None:
    trap = after_tank(text).trap
    assert trap is not None
    assert trap.separation == separation
    assert trap.capacity.value * 1e3 == pytest.approx(capacity_ml)
    assert trap.capacity.give_or_take * 1e3 == pytest.approx(capacity_ml / 10)
    assert trap.drain_at_kg * 1e3 == pytest.approx(drain_at_ml)
    assert (trap.heel_kg, trap.holds_at_start_kg, trap.drain) == (0.0, 0.0, "petcock")


@pytest.mark.parametrize(
    "text",
    ['kind = "pipe"', 'kind = "cooler"', 'kind = "coalescer"\ntrap = "none"',
     'kind = "regulator"\nset = "3 bar"'],
)  # fmt: skip
def test_stations_without_a_trap(text: str) -> None:
    assert after_tank(text).trap is None


@pytest.mark.parametrize(
    ("text", "every", "seconds"),
    [
        ("{}", "working day", 0.0),
        ('{ drain = "float" }', "never", 0.0),
        ('{ drain_every = "never" }', "never", 0.0),
        ('{ drain_every = "12 h" }', "12 h", 43_200.0),
        ('{ drain_every = "3 days" }', "3 days", 259_200.0),
        ('{ drain_every = "week" }', "week", 604_800.0),
    ],
)
def test_how_often_a_tank_is_drained(text: str, every: str, seconds: float) -> None:
    trap = tank(f"trap = {text}").trap
    assert trap is not None
    assert (trap.drain_every, trap.every_s) == (every, seconds)


@pytest.mark.parametrize(
    ("text", "share"),
    [
        ("0.8", Share(0.8, 0.25)),
        ('"80 %"', Share(0.8, 0.25)),
        ("{ value = 0.8 }", Share(0.8, 0.25)),
        ("{ give_or_take = 0.1 }", Share(0.7, 0.1)),
        ('{ value = "80 %", give_or_take = "10 %" }', Share(0.8, 0.1)),
        ("{ value = 1, give_or_take = 0 }", Share(1.0, 0.0)),
        ("{ value = 0, give_or_take = 0 }", Share(0.0, 0.0)),
    ],
)
def test_how_a_separation_is_written(text: str, share: Share) -> None:
    trap = tank(f"trap = {{ separation = {text} }}").trap
    assert trap is not None
    assert trap.separation == share


def test_what_a_trap_says_is_taken() -> None:
    trap = tank(
        'trap = { capacity = { value = "5 gal", give_or_take = "1 gal" }, drain_at = "20 oz", '
        'heel = "30 ml", holds_at_start = "100 ml" }'
    ).trap
    assert trap is not None
    assert trap.capacity.value == pytest.approx(5 * 3.785412, rel=1e-6)  # SP 811: kg of water
    assert trap.capacity.give_or_take == pytest.approx(3.785412, rel=1e-6)
    assert trap.drain_at_kg == pytest.approx(20 * 0.02957353, rel=1e-6)
    assert (trap.heel_kg, trap.holds_at_start_kg) == pytest.approx((0.03, 0.1))


# --- shape and outlets ---

TWO_ENDS = (
    f'{INTAKE}{TANK}[[station]]\nid = "a"\nkind = "pipe"\nafter = "tank"\n'
    '[[station]]\nid = "b"\nkind = "pipe"\nafter = "tank"\n'
)


def outlets(*shares: str) -> list[float]:
    text = "".join(
        f'[[outlet]]\nid = "o{number}"\nafter = "{"ab"[number % 2]}"\n{share}\n'
        for number, share in enumerate(shares)
    )
    return [outlet.share for outlet in site(TWO_ENDS + text).line.outlets]


def test_shares_not_said_are_equal_parts_of_what_is_left() -> None:
    assert outlets("", "") == [0.5, 0.5]
    assert outlets("share = 0.5", "", "") == [0.5, 0.25, 0.25]
    assert outlets('share = "40 %"', "share = 0.6") == pytest.approx([0.4, 0.6])


def test_shares_rounded_by_a_person_are_made_whole() -> None:
    found = outlets("share = 0.333", "share = 0.333", "share = 0.333")
    assert sum(found) == pytest.approx(1.0, abs=1e-15)


def test_stations_come_out_after_the_one_they_hang_on() -> None:
    lines = (INTAKE + TANK + TWO_ENDS[len(INTAKE + TANK) :]).split("[[station]]")[1:]
    for order in ((3, 2, 1, 0), (1, 3, 0, 2), (0, 1, 2, 3)):
        text = "".join("[[station]]" + lines[number] for number in order)
        text += '[[outlet]]\nid = "o"\nafter = "a"\n'
        seen = {""}
        for each in site(text).line.stations:
            assert each.after in seen
            seen.add(each.id)
        assert seen == {"", "intake", "tank", "a", "b"}


def test_what_changes_nothing_yet_is_listed() -> None:
    found = site(
        '[cup]\nreads_low_by = "4 %"\n' + AIR + INTAKE
        + TANK + 'trap = { drain = "float" }\n[[outlet]]\nid = "gun"\nafter = "tank"\n'
        'work = "powder"\nline_margin = "18 degF"\n'
    )  # fmt: skip
    words = "\n".join(found.without_effect)
    assert "float" not in words  # it empties itself in the model too
    assert "[cup]" not in words  # it counts when a drain is measured
    assert "outlet" not in words  # all its keys count
    assert found.outlets[0].line_margin_k == pytest.approx(10.0)
    assert found.outlets[0].work == "powder"


def test_open_reading_has_no_effect_where_nobody_else_can_come() -> None:
    near = site("[api]\nopen_reading = true\n")
    (said,) = near.without_effect
    says = '[api] open_reading = true: host = "127.0.0.1" is for this machine alone'
    assert said.startswith(says)
    assert site('[api]\nhost = "::"\nopen_reading = true\n').without_effect == ()
