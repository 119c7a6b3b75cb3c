"""Recorded readings and drains from CSV: every format taken, every bad row named by its place."""

from __future__ import annotations

from pathlib import Path

import pytest

from daemon.clock import parse_rfc3339
from daemon.errors import ReplayError
from daemon.journal import Drain
from daemon.recorded import read_drains, read_readings
from daemon.site.types import Site
from tests.daemon.shops import SITE, site

SHOP = site()
HEADER = "time,channel,value,unit\n"
DRAINS_HEADER = "time,trap,volume,unit\n"
AT = "2026-03-02T07:00:00Z"
AT_US = parse_rfc3339(AT)

# exact by definition: NIST SP 811 (2008), appendix B
PSI_PA = 6894.757293168361
GALLON_M3 = 3.785411784e-3
OUNCE_M3 = GALLON_M3 / 128


@pytest.fixture
def file(tmp_path: Path) -> Path:
    return tmp_path / "readings.csv"


def read_one(file: Path, channel: str, value: str, unit: str, shop: Site = SHOP) -> float:
    file.write_text(f"{HEADER}{AT},{channel},{value},{unit}\n")
    (found,) = read_readings(shop, file).readings
    assert (found.channel, found.time_us, found.fault) == (channel, AT_US, "")
    return found.value


# ---- what can be written ----


@pytest.mark.parametrize(
    ("channel", "value", "unit", "expected"),
    [
        ("intake-air.temperature", "21.5", "degC", 294.65),
        ("intake-air.temperature", "-5", "degC", 268.15),
        ("intake-air.temperature", "68", "degF", 293.15),  # 68 degF is 20 degC
        ("intake-air.temperature", "293.15", "K", 293.15),
        ("pipe-end.temperature", "1.8e1", "degC", 291.15),
        ("intake-air.relative_humidity", "55.5", "%", 0.555),
        ("intake-air.pressure", "1.0132", "bar", 101_320.0),
        ("intake-air.pressure", "1.0132", "bara", 101_320.0),
        ("intake-air.pressure", "101.32", "kPa", 101_320.0),
        ("intake-air.pressure", "101320", "Pa", 101_320.0),
        ("intake-air.pressure", "14.7", "psi", 14.7 * PSI_PA),
        ("intake-air.pressure", "14.7", "psia", 14.7 * PSI_PA),
        ("tank-gauge.pressure", "7.2", "bar", 720_000.0),
        ("tank-gauge.pressure", "+7.2", "barg", 720_000.0),
        ("tank-gauge.pressure", "720", "kPa", 720_000.0),
        ("tank-gauge.pressure", "720000", "Pa", 720_000.0),
        ("tank-gauge.pressure", "120", "psi", 120 * PSI_PA),
        ("tank-gauge.pressure", "120", "psig", 120 * PSI_PA),
        ("motor.contact", "1", "", 1.0),
        ("motor.contact", "0", "", 0.0),
    ],
)
def test_a_reading_is_taken_in_the_units_of_its_gauge(
    file: Path, channel: str, value: str, unit: str, expected: float
) -> None:
    step = SHOP.channels[channel].step
    assert read_one(file, channel, value, unit) == pytest.approx(expected, rel=1e-12, abs=step / 2)


@pytest.mark.parametrize(
    "time",
    [
        "2026-03-02T08:00:00+01:00",
        "2026-03-02T02:00:00-05:00",
        "2026-03-02T12:45:00+05:45",
        "2026-03-02t07:00:00z",
        "2026-03-02 07:00:00Z",
        "2026-03-02T07:00:00.000Z",
        " 2026-03-02T07:00:00Z ",
        "2026-03-01T23:00:00-08:00",
    ],
)
def test_a_time_counts_from_its_offset(file: Path, time: str) -> None:
    file.write_text(f"{HEADER}{time},motor.contact,1,\n")
    assert [found.time_us for found in read_readings(SHOP, file).readings] == [AT_US]


def test_a_fraction_of_a_second_is_kept(file: Path) -> None:
    file.write_text(f"{HEADER}2026-03-02T07:00:00.25Z,motor.contact,1,\n")
    assert read_readings(SHOP, file).readings[0].time_us == AT_US + 250_000


def test_quotes_a_byte_order_mark_line_ends_and_blank_lines_are_as_spreadsheets_write_them(
    file: Path,
) -> None:
    text = f'"time","channel","value","unit"\r\n\r\n"{AT}","tank-gauge.pressure","7,2","bar"\r\n'
    file.write_bytes(b"\xef\xbb\xbf" + text.replace("7,2", "7.2").encode())
    assert [found.value for found in read_readings(SHOP, file).readings] == [720_000.0]


def test_the_last_line_needs_no_end(file: Path) -> None:
    file.write_text(f"{HEADER}{AT},motor.contact,1,")
    assert len(read_readings(SHOP, file).readings) == 1


def test_channels_may_come_one_after_the_other(file: Path) -> None:
    file.write_text(
        f"{HEADER}{AT},motor.contact,1,\n2026-03-02T09:00:00Z,motor.contact,0,\n"
        f"{AT},tank-gauge.pressure,7,bar\n2026-03-02T08:00:00Z,tank-gauge.pressure,7.5,bar\n"
    )
    found = read_readings(SHOP, file).readings
    assert [(each.channel, each.value) for each in found] == [
        ("motor.contact", 1.0),
        ("tank-gauge.pressure", 700_000.0),
        ("tank-gauge.pressure", 750_000.0),
        ("motor.contact", 0.0),
    ]


# ---- gauge and absolute ----


def test_an_absolute_reading_of_a_gauge_is_turned_with_the_barometer_of_that_time(
    file: Path,
) -> None:
    """Gauge is absolute less the atmosphere then, not less a standard one (by definition)."""
    file.write_text(
        f"{HEADER}2026-03-02T07:00:00Z,tank-gauge.pressure,8,bara\n"
        "2026-03-02T08:00:00Z,tank-gauge.pressure,8,bara\n"
        "2026-03-02T08:30:00Z,tank-gauge.pressure,116.03,psia\n"
        "2026-03-02T07:10:00Z,intake-air.pressure,95,kPa\n"
        "2026-03-02T08:30:00Z,intake-air.pressure,1.02,bara\n"
    )
    found = read_readings(SHOP, file).readings
    gauge = [each.value for each in found if each.channel == "tank-gauge.pressure"]
    # the first reading is from before any of the barometer: the first of them counts
    assert gauge == pytest.approx([705_000.0, 705_000.0, 116.03 * PSI_PA - 102_000.0], abs=5.0)


def test_a_gauge_reading_of_an_absolute_channel_is_turned_too(file: Path) -> None:
    text = SITE.replace('range = "0-12 bar"', 'range = "0-12 bar abs"')
    shop = site(text)
    assert not shop.channels["tank-gauge.pressure"].gauge
    file.write_text(
        f"{HEADER}{AT},intake-air.pressure,0.95,bar\n{AT},tank-gauge.pressure,100,psig\n"
    )
    values = {each.channel: each.value for each in read_readings(shop, file).readings}
    assert values["tank-gauge.pressure"] == pytest.approx(100 * PSI_PA + 95_000.0, abs=5.0)


def test_a_stated_barometer_serves_as_well(file: Path) -> None:
    text = SITE.replace('pressure = "intake-air.pressure"', 'pressure = "0.9 bar abs"')
    value = read_one(file, "tank-gauge.pressure", "8", "bara", site(text))
    assert value == pytest.approx(710_000.0, abs=5.0)


def test_without_a_barometer_an_absolute_reading_of_a_gauge_is_refused(file: Path) -> None:
    file.write_text(f"{HEADER}{AT},motor.contact,1,\n\n{AT},tank-gauge.pressure,8,bara\n")
    with pytest.raises(ReplayError) as caught:
        read_readings(SHOP, file)
    assert f"{file}, line 4, column unit: " in str(caught.value)
    assert '"8 bara" needs the barometer of that time' in str(caught.value)


# ---- bad rows ----

BAD = [
    ("yesterday,motor.contact,1,", "time", ['"yesterday"', "RFC 3339", "2026-03-02T07:10:00Z"]),
    (",motor.contact,1,", "time", ['""', "RFC 3339"]),
    ("2026-03-02T07:00:00,motor.contact,1,", "time", ["with an offset"]),
    ("2026-03-02T07:00:00+25:00,motor.contact,1,", "time", ["+25:00", "does not exist"]),
    ("2026-02-30T07:00:00Z,motor.contact,1,", "time", ['"2026-02-30T07:00:00Z"', "not a time"]),
    ("0001-01-01T00:00:00+23:59,motor.contact,1,", "time", ["0001-01-01", "not a time"]),
    ("9999-12-31T23:59:59-23:59,motor.contact,1,", "time", ["9999-12-31", "not a time"]),
    ("1969-12-31T23:00:00Z,motor.contact,1,", "time", ["1970 to 2199", "correct the year"]),
    ("2206-03-02T07:00:00Z,motor.contact,1,", "time", ["1970 to 2199", "correct the year"]),
    (f"{AT},motor.contakt,1,", "channel", ['"motor.contakt"', "known: intake-air.pressure"]),
    (f"{AT},,1,", "channel", ['""', "not a channel"]),
    (f"{AT},motor.contact,2,", "value", ["2 is not a contact's state", "1 (closed) or 0 (open)"]),
    (f"{AT},motor.contact,on,", "value", ['"on" is not a number']),
    (f"{AT},motor.contact,1,V", "unit", ['"V" does not fit motor.contact', "an empty unit"]),
    (f"{AT},tank-gauge.pressure,,bar", "value", ['"" is not a number', "like 21.5"]),
    (f"{AT},tank-gauge.pressure,nan,bar", "value", ['"nan" is not a number']),
    (f"{AT},tank-gauge.pressure,-inf,bar", "value", ['"-inf" is not a number']),
    (f"{AT},tank-gauge.pressure,1e999,bar", "value", ['"1e999" is not a number']),
    (f"{AT},tank-gauge.pressure,7_2,bar", "value", ['"7_2" is not a number']),
    (f"{AT},tank-gauge.pressure,0x7,bar", "value", ['"0x7" is not a number']),
    (f'{AT},tank-gauge.pressure,"7,2",bar', "value", ['"7,2" is not a number']),
    (f"{AT},tank-gauge.pressure,7.2,", "unit", ['"" does not fit', "expected bar, psi, kPa, Pa"]),
    (f"{AT},tank-gauge.pressure,7.2,Bar", "unit", ['"Bar" does not fit', "barg, psig, bara, psia"]),
    (f"{AT},tank-gauge.pressure,7.2,degC", "unit", ['"degC" does not fit tank-gauge.pressure']),
    (f"{AT},tank-gauge.pressure,99,bar", "value", ['"99 bar" cannot be', "-0.3 barg to 12.3 barg"]),
    (f"{AT},intake-air.temperature,300,degC", "value", ['"300 degC" cannot be', "-40 degC to 85"]),
    (f"{AT},intake-air.temperature,20,C", "unit", ['"C" does not fit', "degC, degF, K"]),
    (f"{AT},intake-air.relative_humidity,130,%", "value", ['"130 %" cannot be', "0 % to 100 %"]),
    (f"{AT},intake-air.relative_humidity,0.5,", "unit", ['"" does not fit', "expected %"]),
    (f"{AT},motor.contact,1", "unit", ["has 3 columns; expected 4: time,channel,value,unit"]),
    (f"{AT},motor.contact,1,,", "unit", ["has 5 columns; expected 4"]),
    (f"{AT}", "channel", ["has 1 column; expected 4"]),
    (f"{AT},tank-gauge.pressure,7,2,bar", "unit", ["has 5 columns"]),
    (f'{AT},"motor.contact,1,', "channel", ["is not CSV", "unexpected end of data"]),
    (f'{AT},"motor".contact,1,', "channel", ["is not CSV"]),
    (f"{AT},tank-gauge.pressure,8\xb5,bar", "value", ["not UTF-8 (byte 0xb5)", "save the file as"]),
]


@pytest.mark.parametrize(("row", "column", "words"), BAD)
def test_a_bad_row_is_named_by_file_line_column_value_and_what_was_expected(
    file: Path, row: str, column: str, words: list[str]
) -> None:
    good = f'"{AT}","motor.contact","0",""\n'
    file.write_bytes(f"{HEADER}{good}\n{good}\n\n{row}\n{good}".encode("latin-1"))
    with pytest.raises(ReplayError) as caught:
        read_readings(SHOP, file)
    message = str(caught.value)
    assert message.startswith(f"{file}, line 7, column {column}: ")
    assert "--skip-bad" in message
    for each in words:
        assert each in message


def test_a_row_without_a_time_is_refused_also_at_the_top(file: Path) -> None:
    file.write_text(f"{HEADER},motor.contact,1,\n{AT},motor.contact,1,\n")
    with pytest.raises(ReplayError, match='line 2, column time: ""'):
        read_readings(SHOP, file)


def test_all_bad_rows_are_listed_in_order_when_they_are_left_out(file: Path) -> None:
    """Also a quote that is never closed costs its own row only."""
    rows = [row for row, _, _ in BAD]
    good = f"{AT},motor.contact,1,"
    lines = [line for row in rows for line in (row, good)]
    late = f"{AT},tank-gauge.pressure,8,bara"  # found out only at the end: no barometer here
    file.write_bytes((HEADER + "\n".join([late, *lines])).encode("latin-1"))
    found = read_readings(SHOP, file, skip_bad=True)
    assert [bad.line for bad in found.bad] == [2, *range(3, 3 + len(lines), 2)]
    assert [bad.column for bad in found.bad] == ["unit", *(column for _, column, _ in BAD)]
    assert len(found.readings) == len(rows)


def test_a_bad_row_can_be_printed_anywhere(file: Path) -> None:
    file.write_bytes(f"{HEADER}{AT},\xe9\x1b[31m{'x' * 500},1,\n{AT},motor.contact,1,".encode("l1"))
    (bad,) = read_readings(SHOP, file, skip_bad=True).bad
    assert str(bad).isprintable()
    assert len(bad.problem) < 200


def test_a_channel_s_time_must_not_go_back(file: Path) -> None:
    file.write_text(
        f"{HEADER}2026-03-02T07:00:10Z,motor.contact,1,\n"
        "2026-03-02T07:00:05Z,tank-gauge.pressure,7,bar\n"
        "2026-03-02T07:00:10Z,motor.contact,0,\n"
        "2026-03-02T07:00:09.9Z,motor.contact,1,\n"
        "2026-03-02T07:00:06Z,tank-gauge.pressure,7,bar\n"
    )
    with pytest.raises(ReplayError, match=r"line 5, column time: .*07:00:09.9Z.* motor.contact"):
        read_readings(SHOP, file)
    found = read_readings(SHOP, file, skip_bad=True)
    assert len(found.readings) == 4
    assert len(found.bad) == 1


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"", "empty; expected the header time,channel,value,unit"),
        (b"time;channel;value;unit\n", 'line 1: the header is "time;channel;value;unit"'),
        (b"time,channel,value\n", "expected time,channel,value,unit"),
        (b"\n", 'the header is ""'),
        (b'time,channel,value,"unit\n', "line 1: the header is"),
        (HEADER.encode(), "no usable readings"),
        (HEADER.encode("utf-16"), "line 1: the header is"),
    ],
)
def test_a_file_without_its_header_or_without_rows_is_refused(
    file: Path, content: bytes, words: str
) -> None:
    file.write_bytes(content)
    with pytest.raises(ReplayError) as caught:
        read_readings(SHOP, file, skip_bad=True)
    assert words in str(caught.value)
    assert str(file) in str(caught.value)


def test_a_file_that_is_not_there_or_is_a_folder_is_refused(tmp_path: Path) -> None:
    with pytest.raises(ReplayError, match="there is no such file"):
        read_readings(SHOP, tmp_path / "no.csv")
    with pytest.raises(ReplayError, match="cannot be read"):
        read_readings(SHOP, tmp_path)


# ---- drains ----


@pytest.mark.parametrize(
    ("volume", "unit", "expected"),
    [
        ("380", "ml", Drain("tank", volume_kg=0.38)),
        ("0.38", "L", Drain("tank", volume_kg=0.38)),
        ("12", "oz", Drain("tank", volume_kg=12 * OUNCE_M3 * 1000)),
        (" .1", "gal", Drain("tank", volume_kg=0.1 * GALLON_M3 * 1000)),
        ("", "", Drain("tank")),
        ("0", "", Drain("tank", "empty", 0.0)),
        ("0.0", "ml", Drain("tank", "empty", 0.0)),
    ],
)
def test_a_drain_is_taken_in_its_unit(file: Path, volume: str, unit: str, expected: Drain) -> None:
    file.write_text(f"{DRAINS_HEADER}2026-03-02T09:30:00+02:00,tank,{volume},{unit}\n")
    entries, bad = read_drains(SHOP, file, AT_US)
    assert bad == []
    (entry,) = entries
    assert entry.at_us == AT_US + 1_800_000_000
    assert isinstance(entry.body, Drain)
    assert (entry.body.trap, entry.body.outcome) == ("tank", expected.outcome)
    if expected.volume_kg is None:
        assert entry.body.volume_kg is None
    else:
        assert entry.body.volume_kg == pytest.approx(expected.volume_kg, rel=1e-12)


def test_drains_are_taken_in_order_of_time_whatever_theirs_in_the_file(file: Path) -> None:
    file.write_text(
        f"{DRAINS_HEADER}2026-03-02T09:00:00Z,tank,,\n2026-03-02T08:00:00Z,bowl,20,ml\n"
        "2026-03-02T08:00:00Z,riser,,\n"
    )
    entries, _ = read_drains(SHOP, file, AT_US)
    traps = [each.body.trap for each in entries if isinstance(each.body, Drain)]
    assert traps == ["bowl", "riser", "tank"]
    assert [each.seq for each in entries] == [1, 2, 3]


BAD_DRAINS = [
    ("noon,tank,,", "time", '"noon"'),
    ("2026-03-02T06:59:59Z,tank,,", "time", "before the first reading"),
    (f"{AT},tnak,,", "trap", '"tnak" is not a trap of this site (known: tank, riser, bowl)'),
    (f"{AT},intake,,", "trap", '"intake" is not a trap'),
    (f"{AT},tank,lots,ml", "volume", '"lots" is not a volume'),
    (f"{AT},tank,-5,ml", "volume", '"-5" is not a volume; 0 means found empty'),
    (f"{AT},tank,nan,ml", "volume", '"nan" is not a volume'),
    (f"{AT},tank,380,", "unit", '"" is not one of ml, L, oz, gal'),
    (f"{AT},tank,380,ML", "unit", '"ML" is not one of ml, L, oz, gal'),
    (f"{AT},tank,,ml", "unit", '"ml" without a volume'),
    (f"{AT},tank,380", "unit", "3 columns"),
]


@pytest.mark.parametrize(("row", "column", "words"), BAD_DRAINS)
def test_a_bad_drain_is_named_by_its_place(file: Path, row: str, column: str, words: str) -> None:
    file.write_text(f"{DRAINS_HEADER}\n{row}\n")
    with pytest.raises(ReplayError) as caught:
        read_drains(SHOP, file, AT_US)
    assert str(caught.value).startswith(f"{file}, line 3, column {column}: ")
    assert words in str(caught.value)


def test_bad_drains_are_listed_when_they_are_left_out(file: Path) -> None:
    file.write_text(
        DRAINS_HEADER + "".join(f"{row}\n" for row, _, _ in BAD_DRAINS) + f"{AT},tank,,\n"
    )
    entries, bad = read_drains(SHOP, file, AT_US, skip_bad=True)
    assert len(entries) == 1
    assert [(each.line, each.column) for each in bad] == [
        (number, column) for number, (_, column, _) in enumerate(BAD_DRAINS, 2)
    ]
