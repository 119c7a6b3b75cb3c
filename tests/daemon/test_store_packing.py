"""Packed rows: what goes in comes out to the bit, whatever the readings are."""

from __future__ import annotations

import math
import struct

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from daemon.errors import StoreError
from daemon.store.columns import unpack_column
from daemon.store.packing import Layout, pack, unpack
from sensors.reading import Reading

TICK_US = 1_767_225_600_000_000  # 2026-01-01T00:00:00Z
LAYOUT = Layout.of(
    1, (("tank.pressure", 0.1), ("intake.temperature", 0.01), ("motor.contact", 1.0))
)


def bits(reading: Reading) -> tuple[str, bytes, int, str]:
    """A reading in a form that tells every bit of its value apart; all NaN are one."""
    value = b"NaN" if math.isnan(reading.value) else struct.pack("<d", reading.value)
    return reading.channel, value, reading.time_us, reading.fault


in_steps = st.builds(
    lambda place, count, offset: Reading(
        LAYOUT.channels[place], count * LAYOUT.steps[place], TICK_US + offset
    ),
    st.integers(0, 2),
    st.integers(-(2**33), 2**33),
    st.integers(-(2**40), 0),
)
any_value = st.builds(
    lambda place, value, offset: Reading(LAYOUT.channels[place], value, TICK_US + offset),
    st.integers(0, 2),
    st.floats(),
    st.integers(-20_000_000, 20_000_000),
)
bad = st.builds(
    lambda place, offset, fault: Reading(LAYOUT.channels[place], math.nan, TICK_US + offset, fault),
    st.integers(0, 2),
    st.integers(-20_000_000, 0),
    st.text(min_size=1).filter(lambda text: text.isprintable()),
)
many_readings = st.lists(st.one_of(in_steps, any_value, bad), max_size=12)


@given(many_readings)
@example([Reading("tank.pressure", -0.0, TICK_US), Reading("motor.contact", 0.0, TICK_US)])
@example([Reading("tank.pressure", 1e308, TICK_US), Reading("motor.contact", -math.inf, TICK_US)])
def test_readings_come_back_to_the_bit_and_in_their_order(readings: list[Reading]) -> None:
    back = unpack(LAYOUT, TICK_US, pack(LAYOUT, TICK_US, readings))
    assert [bits(reading) for reading in back] == [bits(reading) for reading in readings]


@given(st.lists(many_readings, max_size=6), st.sampled_from(LAYOUT.channels))
def test_a_column_holds_what_the_rows_hold(ticks: list[list[Reading]], channel: str) -> None:
    times = [TICK_US] * len(ticks)
    rows = [pack(LAYOUT, TICK_US, readings) for readings in ticks]
    column = unpack_column(LAYOUT, channel, times, rows)
    found = [
        bits(Reading(channel, value, time_us, fault))
        for time_us, value, fault in zip(
            column.times_us.tolist(), column.values.tolist(), column.faults, strict=True
        )
    ]
    expected = [bits(r) for readings in ticks for r in readings if r.channel == channel]
    assert found == expected


def test_a_row_has_the_documented_bytes() -> None:
    # by hand from the module's description of the format, little-endian
    readings = [
        Reading("tank.pressure", 8_000_000 * 0.1, TICK_US),
        Reading("intake.temperature", math.nan, TICK_US - 2, "no answer"),
        Reading("motor.contact", 1.0, TICK_US - 3),
    ]
    expected = (
        "01 03"  # format 1, own times and extras
        "00127a00 00000080 01000000"  # 8000000, absent, 1
        "00000000 00000000 fdffffff"  # 0, 0, -3 us
        "01000000"  # one extra
        "01000000 0100 feffffffffffffff 000000000000f87f"  # place 1, channel 1, -2 us, NaN
        "09000000 6e6f20616e73776572"  # nine bytes, "no answer"
    )
    assert pack(LAYOUT, TICK_US, readings) == bytes.fromhex(expected)


def test_an_ordinary_tick_takes_four_bytes_a_reading() -> None:
    readings = [Reading(channel, 20.0, TICK_US) for channel in LAYOUT.channels]
    assert len(pack(LAYOUT, TICK_US, readings)) == 2 + 4 * len(readings)


def test_the_edges_of_a_contact_keep_their_own_times() -> None:
    edges = [
        Reading("motor.contact", level, TICK_US - before)
        for level, before in ((1.0, 9_000_001), (0.0, 4_000_002), (1.0, 3), (1.0, 0))
    ]
    row = pack(LAYOUT, TICK_US, edges)
    column = unpack_column(LAYOUT, "motor.contact", [TICK_US], [row])
    assert column.times_us.tolist() == [edge.time_us for edge in edges]
    assert column.values.tolist() == [1.0, 0.0, 1.0, 1.0]


def test_a_channel_that_the_layout_lacks_is_refused() -> None:
    with pytest.raises(StoreError, match=r"channel 'gun\.pressure'.*opened without this channel"):
        pack(LAYOUT, TICK_US, [Reading("gun.pressure", 1.0, TICK_US)])


FULL_ROW = pack(
    LAYOUT,
    TICK_US,
    [Reading("tank.pressure", 1.0, TICK_US - 1), Reading("motor.contact", 1.0, TICK_US - 1, "off")],
)


@pytest.mark.parametrize(
    "row",
    [b"", b"\x02" + FULL_ROW[1:], *(FULL_ROW[:length] for length in range(1, len(FULL_ROW)))],
)
def test_a_damaged_row_is_told_and_not_guessed(row: bytes) -> None:
    with pytest.raises(StoreError, match=r"are damaged.*restore a backup"):
        unpack(LAYOUT, TICK_US, row)


def test_a_damaged_row_is_told_in_a_column_too() -> None:
    with pytest.raises(StoreError, match="are damaged"):
        unpack_column(LAYOUT, "tank.pressure", [TICK_US], [FULL_ROW[:13]])
