"""A state as bytes and back: to the bit, or not at all."""

from __future__ import annotations

import json
import struct
import zlib
from collections.abc import Mapping
from dataclasses import fields, is_dataclass
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from daemon.advance import Core
from daemon.checkpoint import FORMAT, decode, encode
from daemon.clock import HOUR_US
from daemon.errors import StoreError
from daemon.journal import Acknowledge, Drain, Entry
from daemon.replay import replay
from daemon.state import CoreState, Inputs
from tests.daemon.shops import BEGUN_US, PERIOD_US, flat, site, working

SHOP = site()
CORE = Core(SHOP)
TICKS = 380


def picture(value: Any) -> Any:
    """A value as plain things that are equal only when types, structure, order and bits are."""
    if isinstance(value, np.ndarray):
        return value.dtype.str, value.shape, value.tobytes()
    if is_dataclass(value):
        return type(value), [(f.name, picture(getattr(value, f.name))) for f in fields(value)]
    if isinstance(value, Mapping):
        return "map", [(key, picture(each)) for key, each in value.items()]
    if isinstance(value, tuple | list):
        return "sequence", [picture(each) for each in value]
    if isinstance(value, float):  # nan too
        return "float", struct.pack("d", value)
    return type(value), value


@pytest.fixture(scope="module")
def states() -> list[CoreState]:
    """A fresh one, one with a history, and one in which everything has fallen silent."""
    record = list(working(SHOP, TICKS))
    silent_us = BEGUN_US + 2 * HOUR_US
    at_us = BEGUN_US + 100 * PERIOD_US + 5
    entries = [
        Entry(1, at_us, at_us, Drain("tank", volume_kg=0.02, by="AM")),
        Entry(2, at_us + 1, at_us + 1, Acknowledge("tank-drain-due")),
        Entry(3, at_us + 2, at_us + 2, Drain("riser", volume_kg=9.0)),
    ]
    fresh = replay(CORE, record[0][1][:1], []).state
    grown = replay(CORE, flat(record), entries).state
    silent = [Entry(1, silent_us, silent_us, Acknowledge("tank-drain-due"))]
    return [fresh, grown, replay(CORE, flat(record[:20]), silent).state]


def test_a_state_comes_back_to_the_bit(states: list[CoreState]) -> None:
    for state in states:
        blob = encode(state, "abc")
        back, fingerprint = decode(blob)
        assert fingerprint == "abc"
        assert picture(back) == picture(state)
        assert encode(back, "abc") == blob


def test_a_state_that_came_back_goes_on_to_the_same_bits(states: list[CoreState]) -> None:
    more = list(working(SHOP, 20, BEGUN_US + TICKS * PERIOD_US))
    one = states[1]
    other, _ = decode(encode(one, ""))
    for now_us, found in more:
        one = CORE.advance(one, now_us, Inputs(found))[0]
        other = CORE.advance(other, now_us, Inputs(found))[0]
    assert encode(one, "") == encode(other, "")


def test_it_does_not_share_memory_with_its_blob(states: list[CoreState]) -> None:
    """What came back can be changed as any state can."""
    back, _ = decode(encode(states[1], ""))
    assert back.model.water.trap.flags.writeable
    assert back.model.water.trap.flags.owndata


def test_a_checkpoint_is_small(states: list[CoreState]) -> None:
    """One an hour for eight days: 32 members, 5 stations."""
    assert len(encode(states[1], "")) < 150_000


def packed(structure: object, head: bytes = FORMAT) -> bytes:
    text = json.dumps(structure).encode()
    return zlib.compress(head + struct.pack("<I", len(text)) + text)


@pytest.mark.parametrize(
    "blob",
    [
        b"",
        b"not a checkpoint",
        zlib.compress(b""),
        zlib.compress(b"DLC1"),
        packed(["", {}], b"DLC0"),
        packed([]),
        packed({}),
        packed(7),
        packed(["", 7]),
        packed(["", {"class": "CoreState", "fields": {}}]),
        packed(["", {"class": "Nonsense", "fields": {}}]),
        packed(["", {"array": [3], "at": 0}]),
        packed(["", {"map": []}]),
        zlib.compress(FORMAT + struct.pack("<I", 2**32 - 1) + b"[]"),
    ],
)
def test_what_is_no_checkpoint_is_refused_in_words(blob: bytes) -> None:
    with pytest.raises(StoreError, match="a checkpoint cannot be read: "):
        decode(blob)


def test_a_state_of_another_version_is_refused(states: list[CoreState]) -> None:
    """A field that is not known any more, or one that is missing."""
    raw = zlib.decompress(encode(states[1], ""))
    for old, new in ((b'"begun_us"', b'"begun_xy"'), (b'"WaterState"', b'"WaterStaty"')):
        assert old in raw
        with pytest.raises(StoreError, match="cannot be read"):
            decode(zlib.compress(raw.replace(old, new, 1)))


@settings(max_examples=150, deadline=None)
@given(st.data())
def test_damage_never_crashes(states: list[CoreState], data: st.DataObject) -> None:
    """A flipped byte is found, or is in a number: then it is still a state."""
    blob = bytearray(encode(states[0], ""))
    blob[data.draw(st.integers(0, len(blob) - 1))] ^= data.draw(st.integers(1, 255))
    try:
        state, _ = decode(bytes(blob))
    except StoreError:
        return
    assert isinstance(state, CoreState)


@settings(max_examples=100, deadline=None)
@given(st.data())
def test_a_checkpoint_that_was_cut_off_is_refused(
    states: list[CoreState], data: st.DataObject
) -> None:
    blob = encode(states[0], "")
    with pytest.raises(StoreError):
        decode(blob[: data.draw(st.integers(0, len(blob) - 1))])
