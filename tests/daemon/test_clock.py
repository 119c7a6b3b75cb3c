"""Times as people and programs write them, and the demo's fast clock."""

from __future__ import annotations

import threading

import pytest
from hypothesis import given
from hypothesis import strategies as st

from daemon.clock import ScaledClock, format_rfc3339, parse_rfc3339, to_datetime


@pytest.mark.parametrize(
    ("text", "time_us"),
    [
        # RFC 3339, section 5.8, but for its leap seconds
        ("1985-04-12T23:20:50.52Z", 482_196_050_520_000),
        ("1996-12-19T16:39:57-08:00", 851_042_397_000_000),
        ("1937-01-01T12:00:27.87+00:20", -1_041_337_172_130_000),
        ("1970-01-01T00:00:00Z", 0),
        ("1970-01-01t00:00:00z", 0),
        ("1969-12-31T19:00:00-05:00", 0),
        ("1970-01-01T00:00:00.9999999Z", 1_000_000),
        ("2000-02-29T00:00:00Z", 951_782_400_000_000),
    ],
)
def test_a_time_is_read_with_its_offset(text: str, time_us: int) -> None:
    assert parse_rfc3339(text) == time_us


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "is not an RFC 3339 time with an offset"),
        ("2026-03-02", "write it like 2026-03-02T07:10:00Z"),
        ("2026-03-02T07:10:00", "with an offset"),
        ("2026-03-02T07:10Z", "with an offset"),
        ("2026-3-2T07:10:00Z", "with an offset"),
        ("2026-03-02T07:10:00+0100", "with an offset"),
        ("２０２６-03-02T07:10:00Z", "with an offset"),
        ("2026-03-02T07:10:00Z\n1", "with an offset"),
        ("2026-02-29T00:00:00Z", "is not a time that exists"),
        ("2026-03-02T24:00:00Z", "is not a time that exists"),
        ("2026-03-02T07:10:00+24:00", "has an offset that does not exist"),
        ("2026-03-02T07:10:00-00:60", "has an offset that does not exist"),
        ("0001-01-01T00:00:00+00:01", "is not a time that exists"),
        ("9999-12-31T23:59:59-00:01", "is not a time that exists"),
    ],
)
def test_what_is_no_time_is_refused_in_words(text: str, words: str) -> None:
    with pytest.raises(ValueError, match=r"time|offset") as caught:
        parse_rfc3339(text)
    assert words in str(caught.value)


@given(st.integers(-62_135_596_800_000_000, 253_402_300_799_000_000))
def test_a_time_that_is_written_is_read_back(time_us: int) -> None:
    assert parse_rfc3339(format_rfc3339(time_us)) == time_us


@given(st.text(alphabet="0123456789-+:.TZtz ", max_size=32))
def test_whatever_is_read_can_be_written(text: str) -> None:
    try:
        time_us = parse_rfc3339(text)
    except ValueError:
        return
    assert parse_rfc3339(format_rfc3339(time_us)) == time_us
    assert to_datetime(time_us).tzinfo is not None


def test_a_fast_clock_stands_still_for_whoever_is_too_slow() -> None:
    """A million times as fast, everybody is."""
    clock, stop = ScaledClock(1e6, 500, patience_s=10.0), threading.Event()
    while clock.monotonic() < 10.0:
        pass
    assert clock.monotonic() == 10.0
    assert clock.now_us() == 10_000_500
    assert not clock.wait(5.0, stop)
    while clock.monotonic() < 25.0:
        pass
    assert clock.monotonic() == 25.0
    stop.set()
    assert clock.wait(3600.0, stop)
    assert 25.0 <= clock.monotonic() <= 25.0 + 3600.0 + 10.0


def test_a_fast_clock_is_so_many_times_as_fast() -> None:
    clock, stop = ScaledClock(1000.0, 0), threading.Event()
    begun_s = clock.monotonic()
    assert not clock.wait(20.0, stop)
    assert clock.monotonic() - begun_s >= 20.0
    assert not clock.wait(-1.0, stop)
