"""Whoever measured is told that the next estimate is tighter only where it is."""

from __future__ import annotations

from dataclasses import dataclass, replace

import pytest

from daemon.advance import Core
from daemon.journal import Drain, Entry
from daemon.moisture.learning import Learned
from daemon.state import CoreState, Inputs
from daemon.taking import learned_words
from tests.daemon.shops import SITE, site, working

SHOP = site(SITE.replace("members = 32", "members = 128"))
RECORD = list(working(SHOP, 1300))
ROUND = 600  # ticks


@dataclass
class Course:
    """A tank drained after one round and looked at after another."""

    said: list[str]
    width: float  # of the 5-95 % interval over the median, before the second drain


def course(volume_kg: float | None) -> Course:
    core = Core(SHOP)
    state, _, _ = core.initial(RECORD[0][0], Inputs(RECORD[0][1]))
    said = []
    for number, (now_us, readings) in enumerate(RECORD[1 : 2 * ROUND], 1):
        entries = []
        if number == ROUND:
            entries = [Entry(1, now_us, now_us, Drain("tank", volume_kg=volume_kg))]
        state, estimate, _ = core.advance(state, now_us, Inputs(readings, entries))
        said += [learned_words(SHOP, each) for each in estimate.learned]
    return Course(said, width_of(core, state))


def width_of(core: Core, state: CoreState) -> float:
    tank = next(view for view in core.views(state) if view.trap == "tank")
    return (tank.p95_kg - tank.p05_kg) / tank.p50_kg


def test_said_to_be_tighter_it_is_tighter_than_without_the_measurement() -> None:
    measured, unmeasured = course(0.038), course(None)
    assert measured.said[0].endswith("the next estimate of tank is tighter.")
    assert measured.width < 0.8 * unmeasured.width
    assert unmeasured.said == []


def test_where_there_was_nothing_left_to_learn_it_does_not_say_tighter() -> None:
    """Measurements one after the other leave the lasting part as narrow as it gets."""
    core = Core(SHOP)
    state, _, _ = core.initial(RECORD[0][0], Inputs(RECORD[0][1]))
    for now_us, readings in RECORD[1:ROUND]:
        state, _, _ = core.advance(state, now_us, Inputs(readings))
    ratios, said = [], []
    for _ in range(6):
        model, learned, _ = core.model.measure(state.model, "tank", 0.038, core.taking.cup)
        state = replace(state, model=model)
        ratios.append(learned.narrowed)
        said.append(learned_words(SHOP, learned))
    assert said[0].endswith("is tighter.")
    assert said[-1].endswith("has learned from it.")
    assert ratios[-1] == pytest.approx(1.0, abs=0.1)


@pytest.mark.parametrize(
    ("minutes", "volume_kg", "hinted"), [(0.5, 0.2, True), (29.0, 0.2, True), (31.0, 0.2, False)]
)
def test_a_second_cup_soon_after_is_asked_about(
    minutes: float, volume_kg: float, hinted: bool
) -> None:
    """Somebody whose cup is too small measures twice: the second time there should be nothing."""
    flagged = Learned(
        RECORD[0][0], "tank", volume_kg, (0.0, 0.004, 0.01), 9.0, True, (0.0, 0.004, 0.01)
    )
    before_us = RECORD[0][0] - round(minutes * 60e6)
    words = learned_words(SHOP, flagged, before_us)
    assert ("take that one back and enter both as one drain" in words) == hinted
    assert ("a minute before" in words) == (minutes < 1.0)
    assert "both as one" not in learned_words(SHOP, flagged)
    assert "both as one" not in learned_words(SHOP, replace(flagged, measured_kg=0.0), before_us)
