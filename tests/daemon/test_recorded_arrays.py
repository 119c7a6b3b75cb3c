"""Recorded readings into arrays: the same values and the same errors as row by row."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from daemon import recorded_arrays
from daemon.clock import SECOND_US, format_rfc3339
from daemon.csv_rows import BadRow
from daemon.errors import ReplayError
from daemon.recorded import ReadingsFile, read_readings
from daemon.recorded_arrays import read_record
from sensors.reading import Reading
from tests.daemon.shops import BEGUN_US, site

SHOP = site()
HEADER = "time,channel,value,unit"
ROWS = [
    "2026-03-02T07:00:00Z,intake-air.temperature,21.53,degC",
    "2026-03-02T07:00:00Z,intake-air.relative_humidity,55.5,%",
    "2026-03-02T07:00:00Z,tank-gauge.pressure,7.1234,bar",
    "2026-03-02T07:00:00Z,intake-air.pressure,101320,Pa",
    "2026-03-02T07:00:00Z,motor.contact,1,",
    "2026-03-02T07:00:10Z,pipe-end.temperature,-5e-1,degC",
    "2026-03-02T07:00:10Z,tank-gauge.pressure,+104.5,psig",
    "2028-02-29T23:59:59Z,motor.contact,0,",
]
PLAIN = "\n".join([HEADER, *ROWS]) + "\n"


def row_by_row(path: Path, skip_bad: bool) -> tuple[list[Reading], list[BadRow]] | str:
    try:
        found = read_readings(SHOP, path, skip_bad)
    except ReplayError as error:
        return str(error)
    return sorted(found.readings, key=lambda each: (each.time_us, each.channel)), found.bad


def as_arrays(path: Path, skip_bad: bool) -> tuple[list[Reading], list[BadRow]] | str:
    try:
        record, bad = read_record(SHOP, path, skip_bad)
    except ReplayError as error:
        return str(error)
    readings = record.readings(record.first_us - 1, record.last_us)
    return sorted(readings, key=lambda each: (each.time_us, each.channel)), bad


OTHERS = {
    "no newline at the end": PLAIN.rstrip("\n"),
    "lines end as on Windows": PLAIN.replace("\n", "\r\n"),
    "a byte order mark": "\ufeff" + PLAIN,
    "blank lines": PLAIN.replace("\n", "\n\n"),
    "quotes": PLAIN.replace("21.53", '"21.53"'),
    "spaces": PLAIN.replace(",21.53,", ", 21.53 ,"),
    "an offset": PLAIN.replace("07:00:10Z", "08:00:10+01:00"),
    "fractions of seconds": PLAIN.replace("07:00:10Z", "07:00:10.25Z"),
    "channel after channel": "\n".join([HEADER, *sorted(ROWS, key=lambda r: r.split(",")[1])]),
    "two units of a channel": PLAIN.replace("7.1234,bar", "103,psi"),
    "absolute on a gauge": PLAIN.replace("+104.5,psig", "8.3,bara"),
    "a row more than once": PLAIN + ROWS[-1] + "\n",
    "not a number": PLAIN.replace("21.53", "21,53"),
    "a number of another language": PLAIN.replace("21.53", "\u0662\u0661"),
    "underlines": PLAIN.replace("101320", "101_320"),
    "not finite": PLAIN.replace("101320", "1e999"),
    "no value": PLAIN.replace("21.53", ""),
    "out of range": PLAIN.replace("101320", "1013200"),
    "half a contact": PLAIN.replace("contact,1,", "contact,0.5,"),
    "an unknown channel": PLAIN.replace("pipe-end", "pipe-start"),
    "an unknown unit": PLAIN.replace("21.53,degC", "21.53,C"),
    "a day that does not exist": PLAIN.replace("2028-02-29", "2027-02-29"),
    "an hour that does not exist": PLAIN.replace("23:59:59", "24:59:59"),
    "a month that does not exist": PLAIN.replace("2028-02-29", "2028-13-29"),
    "a day 0": PLAIN.replace("2028-02-29", "2028-02-00"),
    "a year too early": PLAIN.replace("2026-03-02T07:00:00", "1969-03-02T07:00:00"),
    "a year too late": PLAIN.replace("2028", "2200"),
    "a year 0": PLAIN.replace("2028", "0000"),
    "no offset": PLAIN.replace("07:00:10Z", "07:00:10"),
    "backwards": "\n".join([HEADER, *reversed(ROWS)]),
    "too few columns": PLAIN.replace("contact,1,", "contact,1"),
    "too many columns": PLAIN.replace("contact,1,", "contact,1,,"),
    "an open quote": PLAIN.replace("21.53", '"21.53'),
    "another header": PLAIN.replace("unit", "units"),
    "nothing": "",
    "only a header": HEADER + "\n",
}


@pytest.mark.parametrize("skip_bad", [False, True])
@pytest.mark.parametrize("at_once", [2, 1000])
@pytest.mark.parametrize("name", ["plain", *OTHERS])
def test_a_file_is_read_as_row_by_row(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, name: str, at_once: int, skip_bad: bool
) -> None:
    monkeypatch.setattr(recorded_arrays, "ROWS_AT_ONCE", at_once)
    path = tmp_path / "readings.csv"
    path.write_text(OTHERS.get(name, PLAIN), encoding="utf-8", newline="")
    assert as_arrays(path, skip_bad) == row_by_row(path, skip_bad)


def test_plain_rows_are_not_taken_one_by_one(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "readings.csv"
    path.write_text(PLAIN.replace("7.1234,bar", "103,psig"))
    expected = row_by_row(path, False)

    def never(*cells: str) -> None:
        raise AssertionError(cells)

    monkeypatch.setattr(ReadingsFile, "row", never)
    assert as_arrays(path, False) == expected


def test_bytes_that_are_no_utf8_are_named(tmp_path: Path) -> None:
    path = tmp_path / "readings.csv"
    path.write_bytes(PLAIN.encode().replace(b"pipe-end", b"pipe-\xe9nd"))
    assert as_arrays(path, False) == row_by_row(path, False)
    assert "not UTF-8" in str(as_arrays(path, False))


def test_a_file_that_is_not_there_is_named(tmp_path: Path) -> None:
    assert as_arrays(tmp_path / "none.csv", False) == row_by_row(tmp_path / "none.csv", False)


def test_every_value_is_rounded_to_its_step_as_a_reading_is(tmp_path: Path) -> None:
    random = np.random.default_rng(7)
    values = random.uniform(-40.0, 80.0, 3000)
    rows = [
        f"{format_rfc3339(BEGUN_US + n * SECOND_US)},pipe-end.temperature,{value!r},degC"
        for n, value in enumerate(values.tolist())
    ]
    path = tmp_path / "readings.csv"
    path.write_text("\n".join([HEADER, *rows]))
    assert as_arrays(path, False) == row_by_row(path, False)


def test_the_share_that_is_read_is_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(recorded_arrays, "ROWS_AT_ONCE", 3)
    path = tmp_path / "readings.csv"
    path.write_text(PLAIN)
    told: list[float] = []
    read_record(SHOP, path, progress=told.append)
    assert len(told) == 3
    assert told == sorted(told)
    assert 0.9 < told[-1] <= 1.0
