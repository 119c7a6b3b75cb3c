"""A replay in blocks gives what tick by tick gives: on invented shops and records of many kinds.

Compared is the whole outcome before it is rounded for the files, and the files once. Nothing
outside the project is needed: tick by tick is the reference.
"""

from __future__ import annotations

import json
import math
from collections.abc import Iterator, Sequence
from dataclasses import fields, is_dataclass, replace
from pathlib import Path

import numpy as np
import pytest

from daemon.__main__ import main
from daemon.advance import Core
from daemon.clock import HOUR_US, SECOND_US, format_rfc3339
from daemon.errors import ReplayError
from daemon.journal import Drain, Entry
from daemon.record_arrays import Record
from daemon.replay import Result, replay, summarise
from daemon.replay_along import BlockResult, replay_in_blocks
from daemon.site.types import Site
from sensors.reading import Reading
from tests.daemon.block_shops import SHOPS, Weather, a_record, a_shop, drains, listed
from tests.daemon.shops import BEGUN_US

# kg, K, s: below it two zeros differ by rounding; a margin is a difference of two temperatures,
# each of which is kept to 6e-14 K
RELATIVE, LEAST = 1e-9, 5e-13
# what no file says, and what no later tick asks for
LEFT_OUT = {"looked_us"}


def differences(one: object, other: object, where: str = "") -> Iterator[str]:
    """Where two outcomes differ by more than rounding."""
    if type(one) is not type(other):
        yield f"{where}: {one} and {other}"
    elif isinstance(one, tuple | list | dict) or is_dataclass(one):
        mine, its = dict(_parts(one)), dict(_parts(other))
        if mine.keys() != its.keys():
            yield f"{where}: {one} and {other}"
        for name in mine.keys() & its.keys():
            yield from differences(mine[name], its[name], f"{where}.{name}")
    elif not _same(one, other):
        yield f"{where}: {one} and {other}"


def _parts(whole: object) -> Iterator[tuple[object, object]]:
    if isinstance(whole, dict):
        yield from whole.items()
    elif isinstance(whole, tuple | list):
        yield from enumerate(whole)
    elif is_dataclass(whole):
        names = (each.name for each in fields(whole) if each.name not in LEFT_OUT)
        yield from ((name, getattr(whole, name)) for name in names)


def _same(one: object, other: object) -> bool:
    if isinstance(one, np.ndarray) and isinstance(other, np.ndarray):
        return one.shape == other.shape and np.allclose(
            one, other, rtol=RELATIVE, atol=LEAST, equal_nan=True
        )
    if isinstance(one, float) and isinstance(other, float):
        both = math.isnan(one) and math.isnan(other)
        return both or math.isclose(one, other, rel_tol=RELATIVE, abs_tol=LEAST)
    return one == other


def both_ways(shop: Site, record: Record, entries: Sequence[Entry]) -> tuple[Result, BlockResult]:
    """The same record tick by tick and in blocks."""
    core = Core(shop, hourly=False)
    return replay(core, listed(record), entries), replay_in_blocks(core, record, entries)


def compare(shop: Site, record: Record, entries: Sequence[Entry] = ()) -> BlockResult:
    """Replay both ways and find no difference."""
    ticks, blocks = both_ways(shop, record, entries)
    for name in ("begun_us", "ticks", "transitions", "learned", "reminders", "marks", "state"):
        found = list(differences(getattr(ticks, name), getattr(blocks, name), name))
        assert not found, "\n".join(found[:5])
    assert sum(blocks.taken.values()) == blocks.ticks - 1
    return blocks


WEATHERS = {
    "work": Weather(BEGUN_US, 1.4),
    "the evening": Weather(BEGUN_US + 9 * HOUR_US, 1.6, humid=True),
    "frost, beside the hour": Weather(BEGUN_US + 3337 * SECOND_US, 1.2, cold=True),
    "trouble": Weather(BEGUN_US + 7 * SECOND_US, 1.4, trouble=5.0),
    "edges": Weather(BEGUN_US, 1.4, edges=True, shift_us=3 * SECOND_US),
    "now and then": Weather(BEGUN_US, 1.2, step_every=3),
}
PAIRS = [
    (shop, list(WEATHERS)[(number + turn) % len(WEATHERS)])
    for number, shop in enumerate(SHOPS)
    for turn in range(2)
]


@pytest.mark.parametrize(("name", "weather"), PAIRS)
def test_blocks_give_what_ticks_give(name: str, weather: str) -> None:
    shop, told = a_shop(name), WEATHERS[weather]
    if shop.sample_every_us < 10 * SECOND_US:
        told = replace(told, hours=told.hours / 4.0)
    record = a_record(shop, told, seed=len(name))
    entries = [each for each in drains(shop, told, len(weather)) if each.at_us >= record.first_us]
    compare(shop, record, entries)


def test_an_ordinary_day_is_nearly_all_taken_together() -> None:
    shop = a_shop("all measured")
    found = compare(shop, a_record(shop, Weather(BEGUN_US, 3.0), 1))
    assert found.taken["together"] > 0.97 * found.ticks


def test_traps_that_stay_full_are_taken_together_too() -> None:
    shop = a_shop("small traps")
    found = compare(shop, a_record(shop, Weather(BEGUN_US, 5.0, humid=True), 3))
    assert {each.alarm for each in found.transitions} >= {"bowl-flooded"}
    assert found.state.model.water.spilled.any() or found.state.model.ledger.liquid_out.any()
    assert found.taken["together"] > 0.9 * found.ticks


def test_faults_are_taken_in_at_their_time() -> None:
    shop = a_shop("contact and gauge")
    record = a_record(shop, Weather(BEGUN_US, 2.0), 5)
    at_us = [BEGUN_US + number * 10 * SECOND_US for number in (100, 101, 102, 400)]
    faults = [Reading("pipe-end.temperature", math.nan, each, "no answer") for each in at_us]
    found = compare(shop, replace(record, faults=faults))
    assert any(each.alarm == "pipe-end-sensor-fault" for each in found.transitions)


def test_a_day_of_silence_is_taken_in_hours() -> None:
    shop = a_shop("a minute apart")
    early = a_record(shop, Weather(BEGUN_US, 0.5), 1)
    late = a_record(shop, Weather(BEGUN_US + 30 * HOUR_US, 0.5), 2)
    both = {
        name: type(told)(
            np.concatenate((told.times_us, late.channels[name].times_us)),
            np.concatenate((told.values, late.channels[name].values)),
        )
        for name, told in early.channels.items()
    }
    found = compare(shop, Record(both))
    assert found.ticks < 26 * 60


def test_measured_drains_are_learned_from_alike() -> None:
    shop = a_shop("contact and gauge")
    record = a_record(shop, Weather(BEGUN_US, 5.0, humid=True), 8)
    bodies = [Drain("tank", "emptied", 0.2), Drain("riser"), Drain("tank", "emptied", 3.0)]
    entries = [
        Entry(n, BEGUN_US + n * 90 * 60 * SECOND_US + 3, 0, body)
        for n, body in enumerate(bodies, 1)
    ]
    found = compare(shop, record, entries)
    assert {each.flagged for each in found.learned} == {False, True}


def test_a_compressor_that_never_rests_is_overworked_at_the_same_time() -> None:
    """What a full hour changes, alarms see in the tick after it."""
    shop = a_shop("always open")
    record = a_record(shop, Weather(BEGUN_US, 7.2), 8)
    motor = record.channels["motor.contact"]
    runs = (motor.times_us < BEGUN_US + 5 * HOUR_US).astype(np.float64)
    record = Record({**record.channels, "motor.contact": replace(motor, values=runs)})
    found = compare(shop, record)
    told = [each for each in found.transitions if each.alarm == "compressor-overworked"]
    hours = [(each.at_us - shop.sample_every_us - BEGUN_US) / HOUR_US for each in told]
    assert hours == [4.0, 7.0]


def test_nothing_to_replay_is_refused() -> None:
    with pytest.raises(ReplayError, match="no readings"):
        replay_in_blocks(Core(a_shop("a timer"), hourly=False), Record({}), [])


def test_the_time_that_is_reached_is_told() -> None:
    shop = a_shop("contact alone")
    told: list[int] = []
    record = a_record(shop, Weather(BEGUN_US, 2.0), 1)
    replay_in_blocks(Core(shop, hourly=False), record, [], told.append)
    assert told == sorted(told)
    assert told[-1] == record.last_us


def test_the_command_writes_the_same_files(tmp_path: Path) -> None:
    shop = a_shop("outlets watched")
    record = a_record(shop, Weather(BEGUN_US, 3.2, trouble=1.0), 4)
    (tmp_path / "site.toml").write_text(SHOPS["outlets watched"])
    units = {"temperature": "K", "relative_humidity": "%", "pressure": "Pa", "contact": ""}
    lines = ["time,channel,value,unit"]
    for each in listed(record):
        unit = units[shop.channels[each.channel].quantity]
        value = each.value * 100.0 if unit == "%" else each.value
        lines.append(f"{format_rfc3339(each.time_us)},{each.channel},{value!r},{unit}")
    (tmp_path / "readings.csv").write_text("\n".join(lines) + "\n")
    (tmp_path / "drains.csv").write_text("time,trap,volume,unit\n2026-03-02T08:10:00Z,tank,10,ml\n")
    arguments = ["replay", str(tmp_path / "site.toml"), str(tmp_path / "readings.csv")]
    arguments += ["--drains", str(tmp_path / "drains.csv"), "--members", "16", "--out"]
    assert main([*arguments, str(tmp_path / "ticks")]) == 0
    assert main([*arguments, str(tmp_path / "blocks"), "--blocks"]) == 0
    for name in ("traps.csv", "outlets.csv", "flow.csv", "transitions.csv"):
        ticks, blocks = ((tmp_path / way / name).read_text() for way in ("ticks", "blocks"))
        assert len(ticks.splitlines()) > 1
        assert ticks == blocks
    one, other = (
        json.loads((tmp_path / way / "summary.json").read_text()) for way in ("ticks", "blocks")
    )
    assert not list(differences(one, other))


def test_the_summary_is_the_same() -> None:
    shop = a_shop("two gauges")
    record = a_record(shop, Weather(BEGUN_US, 2.0), 6)
    ticks, blocks = both_ways(shop, record, [])
    core = Core(shop, hourly=False)
    one, other = (summarise(core, each, []) for each in (ticks, blocks))
    assert not list(differences(one, other))
