"""When a desiccant cartridge and an ice bath are used up, foreseen and as it came. Invented."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import pytest

from daemon.advance import Core
from daemon.clock import HOUR_US, parse_rfc3339
from daemon.journal import Entry, Service
from daemon.moisture.ensemble import Array
from daemon.moisture.supplies import USED_UP, Supplies
from daemon.site import hours as opening
from daemon.state import CoreState, Inputs
from daemon.ticks import ticks
from tests.daemon.plants import Plant
from tests.daemon.shops import SITE
from tests.daemon.shops import site as parsed

BEGUN = parse_rfc3339("2026-03-02T07:00:00Z")  # a Monday
ASKED = parse_rfc3339("2026-03-04T07:00:00Z")
HOURS = 'mon = ["08:00-12:00", "13:00-17:30"]\ntue = ["08:00-12:00", "13:00-17:30"]'
WEEK = "\n".join(
    f'{day} = ["08:00-12:00", "13:00-17:30"]' for day in ("mon", "tue", "wed", "thu", "fri")
)
FITTED = """
[[station]]
id = "bath"
kind = "cooler"
after = "tank"
ice = "20 kg"

[[station]]
id = "riser"
kind = "pipe"
after = "bath"
"""
GEL = """
[[station]]
id = "gel"
kind = "desiccant"
after = "bowl"
bed = "cartridge"
mass = "2 kg"

[[station]]
id = "booth-regulator"
kind = "regulator"
after = "gel"
"""
SHOP = parsed(
    SITE.replace(HOURS, WEEK)
    .replace("[site]", '[site]\nsample_every = "60 s"')
    .replace('\n[[station]]\nid = "riser"\nkind = "pipe"\nafter = "tank"\n', FITTED)
    .replace('\n[[station]]\nid = "booth-regulator"\nkind = "regulator"\nafter = "bowl"\n', GEL)
    # nobody drains here, and a bowl that runs over would wet the cartridge
    .replace('"120 ml", drain_at = "60 ml"', '"2 L", drain_at = "1 L"')
    .replace("members = 32", "members = 64")
)


def gun(now_us: int) -> float:
    return 60.0 if opening.is_open(SHOP.hours, SHOP.timezone, now_us) else 0.0


@lru_cache(maxsize=1)
def four_days() -> tuple[Core, CoreState, dict[str, int], CoreState]:
    """The state on Wednesday morning, when half of the members had used each supply up, the end."""
    plant = Plant(SHOP, leak_l_min=2.0, used_l_min=gun, relative_humidity=0.6, step_s=10)
    readings = [r for tick in plant.record(BEGUN, round(4.4 * 86_400), 60) for r in tick]
    core, supplies = Core(SHOP), Supplies(Core(SHOP).model)
    first = [each for each in readings if each.time_us == BEGUN]
    state, _, _ = core.initial(BEGUN, Inputs(first))
    asked, gone = state, dict[str, int]()
    rest = readings[len(first) :]
    for tick in ticks(BEGUN, core.model.period_us, BEGUN, BEGUN, rest, (), rest[-1].time_us):
        state, _, _ = core.advance(state, tick.now_us, tick.inputs)
        if tick.now_us == ASKED:
            asked = state
        if tick.now_us % (10 * 60_000_000) == 0:
            medians = np.median(supplies.used(state.model), axis=1)
            for name, used in zip(supplies.names, medians, strict=True):
                if used >= USED_UP:
                    gone.setdefault(name, tick.now_us)
    return core, asked, gone, state


@pytest.mark.parametrize("name", ["gel", "bath"])
def test_what_is_used_up_was_foreseen(name: str) -> None:
    core, asked, gone, _ = four_days()
    found = core.following.foreseen(asked).supplies[name]
    assert found.p05_us is not None
    assert found.p50_us is not None
    assert ASKED < found.p05_us < gone[name]
    assert found.p95_us is None or gone[name] < found.p95_us
    assert abs(found.p50_us - gone[name]) < 0.15 * (gone[name] - ASKED) + HOUR_US


def test_supplies_are_named_cartridges_first() -> None:
    core = four_days()[0]
    assert Supplies(core.model).names == ["gel", "bath"]
    assert list(core.following.foreseen(four_days()[1]).supplies) == ["gel", "bath"]


def test_a_new_cartridge_is_foreseen_anew() -> None:
    core, _, _, end = four_days()
    spent = core.following.foreseen(end).supplies["gel"]
    assert spent.p50_us == end.time_us
    at_us = end.time_us
    service = Entry(1, at_us, at_us, Service("element changed", "gel"))
    renewed, _, _ = core.take(end, [service])
    fresh = core.following.foreseen(renewed).supplies["gel"]
    assert fresh.p50_us is not None
    assert fresh.p50_us > at_us + 12 * HOUR_US


def test_shares_used_grow_from_nothing_to_all() -> None:
    core, asked, _, end = four_days()
    supplies = Supplies(core.model)
    early, late = supplies.used(asked.model), supplies.used(end.model)
    assert early.shape == (2, 64)
    assert np.all(early > 0.0)
    assert np.all(np.median(early, axis=1) < 0.9)
    grown: Array = late - early
    assert np.all(grown >= 0.0)
    assert np.median(late[0]) == pytest.approx(1.0, abs=1e-6)
