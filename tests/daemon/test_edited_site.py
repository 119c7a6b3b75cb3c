"""A site file edited between two runs: the daemon goes on and forgets no more than it must."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from daemon.journal import Acknowledge, Drain
from daemon.moisture.beliefs import CUP, DELIVERED, separation_of, temperature_of
from daemon.shell import Shell
from daemon.site.types import Site
from daemon.state import CoreState
from daemon.store.store import Store
from tests.daemon.shops import BEGUN_US, SITE, site, working
from tests.daemon.test_shell import HandClock, Played

SPARE = '\n[[sensor]]\nid = "spare"\ndriver = "ds18b20"\nserial = "28-0000000000ff"\n'
BUTTON = """
[[sensor]]
id = "drained"
driver = "drained-button"
line = 22
trap = "tank"
"""


class Runs:
    """One database, run by one site file after the other."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self.record = list(working(site(), 400))
        self.done = 0

    def run(self, shop: Site, ticks: int, drained_kg: float | None = None) -> CoreState:
        """So many ticks, with the tank drained and measured before the last of them."""
        clock = HandClock(self.record[self.done][0])
        with Store.open(self.path, shop.channels) as store:
            shell = Shell(shop, clock, Played(self._heard(shop)), store)
            shell.recover()
            for number in range(self.done, self.done + ticks):
                clock.wall_us = self.record[number][0]
                if number == self.done + ticks - 1 and drained_kg is not None:
                    clock.wall_us -= 1_000_000
                    shell.record(Drain("tank", volume_kg=drained_kg, by="AM"))
                    clock.wall_us += 1_000_000
                shell.tick(clock.wall_us)
            self.done += ticks
            shell.checkpoint()
            health = shell.health()
            assert not [each for each in health.problems if "balance" in each]
            state = shell._state
            assert state is not None
            state.model.ledger.check(state.model.water)
            return state

    def _heard(self, shop: Site) -> list[tuple[int, list]]:  # type: ignore[type-arg]
        return [
            (now_us, [r for r in readings if r.channel in shop.channels])
            for now_us, readings in self.record
        ]


@pytest.fixture
def runs(tmp_path: Path) -> Runs:
    return Runs(tmp_path / "birch-works.db")


def text(old: str, new: str, of: str = SITE) -> str:
    assert old in of
    return of.replace(old, new, 1)


@pytest.mark.parametrize(
    "edited",
    [
        SITE + SPARE,
        SITE + BUTTON,
        text('id = "spray-gun"\n', 'id = "spray-gun"\nwork = "waterborne"\n'),
        text('tue = ["08:00-12:00", "13:00-17:30"]\n', ""),
        text("[model]", '[costs]\nkwh_price = 0.3\n\n[reminders]\nat = ["break"]\n\n[model]'),
    ],
    ids=["a spare sensor", "a button", "another work", "other hours", "costs"],
)
def test_an_edit_beside_the_line_keeps_the_model_s_state(runs: Runs, edited: str) -> None:
    before = runs.run(site(), 60, drained_kg=0.1)
    after = runs.run(site(edited), 1)
    assert after.begun_us == before.begun_us
    for name, values in before.model.beliefs.items():
        assert np.allclose(after.model.beliefs[name], values, atol=1e-2), name
    back = runs.run(site(), 5)  # and the edit can be taken back
    assert back.begun_us == before.begun_us


def test_an_alarm_that_is_new_begins_and_one_that_is_gone_is_dropped(runs: Runs) -> None:
    assert "spare-sensor-fault" not in runs.run(site(), 5).alarms
    with_spare = runs.run(site(SITE + SPARE), 30)
    assert with_spare.alarms["spare-sensor-fault"].raised  # it has never said anything
    assert "spare-sensor-fault" not in runs.run(site(), 2).alarms


def test_an_edited_station_forgets_only_what_was_learned_of_itself(runs: Runs) -> None:
    before = runs.run(site(), 200, drained_kg=0.03).model.beliefs
    fresh = runs.run(site(text("300 ml", "280 ml")), 1).model.beliefs  # the riser's trap
    for name in (separation_of("tank"), temperature_of("tank"), DELIVERED, CUP):
        assert np.allclose(fresh[name], before[name], atol=1e-2), name
    # the draw from the seed, as if nothing had been learned
    drawn = Runs(runs.path.with_name("new.db")).run(site(text("300 ml", "280 ml")), 1)
    name = separation_of("riser")
    assert np.array_equal(fresh[name], drawn.model.beliefs[name])
    assert not np.allclose(
        before[separation_of("tank")], drawn.model.beliefs[separation_of("tank")]
    )


def test_another_number_of_members_keeps_contents_but_no_beliefs(runs: Runs) -> None:
    before = runs.run(site(), 200, drained_kg=0.03)
    after = runs.run(site(text("members = 32", "members = 48")), 1)
    row = list(after.stations).index("riser")
    assert after.model.water.trap.shape[1] == 48
    assert np.median(after.model.water.trap[row]) == pytest.approx(
        np.median(before.model.water.trap[row]), rel=0.1
    )


def test_alarms_go_on_as_they_stood_after_an_edit_of_the_line(runs: Runs, tmp_path: Path) -> None:
    low = text('drain_at = "150 ml" }', 'drain_at = "1 ml", holds_at_start = "20 ml" }')
    assert runs.run(site(low), 40).alarms["riser-drain-due"].state == "unacknowledged"
    shop = site(low)
    with Store.open(runs.path, shop.channels) as store:
        shell = Shell(shop, HandClock(runs.record[40][0] - 1_000_000), Played([]), store)
        shell.recover()
        shell.record(Acknowledge("riser-drain-due", "AM"))
    runs.run(shop, 2)
    after = runs.run(site(text("3 bar", "4 bar", of=low)), 3)
    assert after.alarms["riser-drain-due"].state == "acknowledged"  # nobody is told again
    assert after.begun_us > BEGUN_US
