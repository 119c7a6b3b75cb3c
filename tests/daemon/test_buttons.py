"""The "drained" button: each press is one drain of its trap, in the same journal as any other."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from daemon.advance import Core
from daemon.checkpoint import encode
from daemon.errors import StoreError
from daemon.journal import Drain
from daemon.replay import replay
from daemon.shell import Shell
from daemon.store.store import Store
from sensors.reading import Reading
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, flat, site, working
from tests.daemon.test_shell import HandClock, Played

BUTTON = """
[[sensor]]
id = "tank-button"
driver = "drained-button"
chip = "/dev/gpiochip0"
line = 23
trap = "tank"

[[station]]
id = "intake"
"""
SHOP = site(SITE.replace('[[station]]\nid = "intake"\n', BUTTON))
CHANNEL = "tank-button.contact"


def bad(at_us: int) -> Reading:
    return Reading(CHANNEL, float("nan"), at_us, "edges were lost")


class Rig:
    """A daemon with a button that says its level every tick, and edges between."""

    def __init__(self, path: Path, ticks: int) -> None:
        self.path = path
        self.said: dict[int, list[Reading]] = {
            now_us: [*readings, Reading(CHANNEL, 0.0, now_us)]
            for now_us, readings in working(SHOP, ticks)
        }
        self.clock = HandClock(BEGUN_US)
        self.open()

    def open(self) -> None:
        self.store = Store.open(self.path, SHOP.channels)
        self.shell = Shell(SHOP, self.clock, Played(sorted(self.said.items())), self.store)
        self.shell.recover()

    def kill(self) -> None:
        self.store.close()
        self.open()

    def say(self, tick: int, *told: tuple[float, float]) -> None:
        """What the button says in the period before a tick, as (seconds before it, level)."""
        now_us = BEGUN_US + tick * PERIOD_US
        others = [one for one in self.said[now_us] if one.channel != CHANNEL]
        mine = [Reading(CHANNEL, level, now_us - round(ago * 1e6)) for ago, level in told]
        self.said[now_us] = others + mine
        self.shell._sampler = Played(sorted(self.said.items()))

    def tick(self, number: int) -> None:
        self.clock.wall_us = BEGUN_US + number * PERIOD_US
        self.shell.tick(self.clock.wall_us)

    def drains(self) -> list[tuple[int, str]]:
        """Seconds after the beginning, and the key, of every drain."""
        return [
            (round((e.at_us - BEGUN_US) / 1e6), e.key)
            for e in self.store.entries()
            if e.body == Drain("tank", "emptied", None, "button")
        ]


@pytest.fixture
def rig(tmp_path: Path) -> Iterator[Rig]:
    made = Rig(tmp_path / "birch-works.db", 400)
    yield made
    made.store.close()


PRESS = ((4.0, 1.0), (3.5, 0.0), (0.0, 0.0))


def test_a_press_empties_its_trap_at_its_own_time(rig: Rig) -> None:
    rig.say(300, *PRESS)
    for number in range(302):
        rig.tick(number)
    assert rig.drains() == [(2996, f"{CHANNEL}@{BEGUN_US + 2996 * 1_000_000}")]
    view = rig.shell.traps()[0]
    assert view.last_drain_us == BEGUN_US + 2996 * 1_000_000
    assert view.p95_kg < 0.005


def test_a_button_that_is_held_or_found_closed_is_one_press_or_none(rig: Rig) -> None:
    rig.say(0, (0.0, 1.0))  # closed from the beginning: nobody saw it pressed
    rig.say(1, (0.0, 1.0))
    rig.say(4, (2.0, 1.0), (0.0, 1.0))  # pressed
    rig.say(5, (0.0, 1.0))  # and held
    for number in range(8):
        rig.tick(number)
    assert [at_s for at_s, _ in rig.drains()] == [38]


def test_a_button_that_comes_back_closed_after_a_fault_was_not_seen_pressed(rig: Rig) -> None:
    at_us = BEGUN_US + 3 * PERIOD_US
    rig.said[at_us] = [o for o in rig.said[at_us] if o.channel != CHANNEL] + [bad(at_us)]
    rig.say(4, (0.0, 1.0))
    rig.say(6, (3.0, 1.0), (0.0, 0.0))
    for number in range(8):
        rig.tick(number)
    assert [at_s for at_s, _ in rig.drains()] == [57]


def test_a_press_is_one_drain_though_its_tick_has_to_be_tried_again(
    rig: Rig, monkeypatch: pytest.MonkeyPatch
) -> None:
    rig.say(20, *PRESS)
    for number in range(20):
        rig.tick(number)

    def full(*_: object) -> None:
        raise StoreError("no space left (invented)")

    with monkeypatch.context() as failing:
        failing.setattr(rig.store, "commit_tick", full)
        rig.tick(20)
        rig.tick(21)
    rig.tick(22)
    assert [at_s for at_s, _ in rig.drains()] == [196]
    assert rig.shell.traps()[0].last_drain_us == BEGUN_US + 196 * 1_000_000


@pytest.mark.parametrize("kills", [(), (101,), (100, 102, 250)])
def test_what_was_pressed_survives_kills_and_is_replayed_from_the_journal(
    rig: Rig, kills: tuple[int, ...]
) -> None:
    rig.say(101, *PRESS)
    rig.say(
        200,
        *PRESS,
    )
    for number in range(300):
        if number in kills:
            rig.kill()
        rig.tick(number)
    entries = sorted(rig.store.entries(), key=lambda e: (e.at_us, e.seq))
    assert [at_s for at_s, _ in rig.drains()] == [1006, 1996]
    record = [
        (t, sorted(r, key=lambda one: one.time_us)) for t, r in sorted(rig.said.items())[:300]
    ]
    readings = sorted(flat(record), key=lambda one: one.time_us)
    replayed = replay(Core(SHOP), readings, entries)
    assert rig.shell._state is not None
    assert encode(rig.shell._state, "") == encode(replayed.state, "")


def test_a_press_killed_before_its_tick_was_committed_is_still_a_drain(rig: Rig) -> None:
    rig.say(50, *PRESS)
    for number in range(50):
        rig.tick(number)
    assert rig.shell._state is not None
    now_us = BEGUN_US + 50 * PERIOD_US
    rig.clock.wall_us = now_us
    rig.shell._record_presses(rig.shell._state, rig.said[now_us])
    rig.kill()
    rig.tick(51)
    assert [at_s for at_s, _ in rig.drains()] == [496]
    assert rig.shell.traps()[0].since == "last drain"
