"""Float switches: closing says that a trap holds at least its level, and an open one nothing."""

from __future__ import annotations

import numpy as np
import pytest

from daemon.advance import Core
from daemon.clock import HOUR_US, MINUTE_US
from daemon.errors import SiteError
from daemon.journal import Drain, Entry
from daemon.moisture.ensemble import Array, percentiles
from daemon.replay import Result, replay
from daemon.site.types import Site
from sensors.reading import Reading
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, site, working

FLOAT = """
[[sensor]]
id = "tank-float"
driver = "float-switch"
chip = "/dev/gpiochip0"
line = 22
trap = "tank"
closes_at = "{level}"

[[station]]
id = "intake"
"""


def floated(level: str = "60 ml") -> Site:
    """Birch Works with a float in its tank."""
    return site(SITE.replace('[[station]]\nid = "intake"\n', FLOAT.format(level=level)))


def run(
    shop: Site, ticks: int, edges: dict[int, float], entries: list[Entry] | None = None
) -> Result:
    """A working record in which the float says its level at some ticks."""
    readings = []
    for number, (_, said) in enumerate(working(shop, ticks)):
        readings += said
        if number in edges:
            at_us = BEGUN_US + number * PERIOD_US
            readings.append(Reading("tank-float.contact", edges[number], at_us))
    return replay(Core(shop), readings, entries or [])


def held(result: Result) -> Array:
    """What the members believe that the tank holds, kg."""
    found: Array = result.state.model.water.trap[1]
    return found


def test_a_closing_float_lifts_those_who_believed_in_less() -> None:
    shop = floated()
    open_all_along = run(shop, 721, {0: 0.0})
    closed = run(shop, 721, {0: 0.0, 719: 1.0})
    before, after = percentiles(held(open_all_along)), percentiles(held(closed))
    assert before[0] < 0.045 < before[2]  # else there would be nothing to learn here
    assert after[0] > before[0] + 0.3 * (0.060 - before[0])
    assert after[1] > before[1]
    above = held(open_all_along) > 0.066
    assert np.allclose(held(closed)[above], held(open_all_along)[above], rtol=0.05)
    closed.state.model.ledger.check(closed.state.model.water)


def test_a_float_that_closes_late_teaches_nothing() -> None:
    shop = floated(level="5 ml")
    open_all_along = run(shop, 721, {0: 0.0})
    closed = run(shop, 721, {0: 0.0, 719: 1.0})
    assert percentiles(held(open_all_along))[0] > 0.006
    assert np.array_equal(held(closed), held(open_all_along))


def test_a_float_that_flutters_says_no_more_than_once() -> None:
    """Where it closes is off by the same each time: forty closings are one witness."""
    shop = floated()
    once = run(shop, 721, {0: 0.0, 600: 1.0})
    edges = {0: 0.0} | {number: float(number % 2 == 0) for number in range(600, 681)}
    many = run(shop, 721, edges)
    assert percentiles(held(many)) == pytest.approx(percentiles(held(once)), rel=0.02)
    names = [name for name in once.state.model.beliefs if name.startswith("separation")]
    for name in names:
        first, last = (each.state.model.beliefs[name] for each in (once, many))
        assert last.mean() == pytest.approx(first.mean(), abs=0.1)
        assert last.std() == pytest.approx(first.std(), rel=0.05)


def test_a_closing_that_nobody_can_believe_is_learned_from_the_second_time() -> None:
    shop = floated(level="5 L")
    never = run(shop, 400, {0: 0.0})
    once = run(shop, 400, {0: 0.0, 360: 1.0})
    assert np.array_equal(held(once), held(never))
    assert once.state.sensed.floats["tank-float.contact"].surprised
    twice = run(shop, 400, {0: 0.0, 360: 1.0, 370: 0.0, 380: 1.0})
    assert float(held(twice).mean()) > float(held(never).mean())


def alarms(result: Result) -> list[tuple[str, str]]:
    mine = [each for each in result.transitions if each.alarm == "tank-float-sensor-fault"]
    return [(each.after, each.text) for each in mine]


def test_a_float_that_stays_open_in_a_full_trap_is_told() -> None:
    (found,) = alarms(run(floated(level="4 ml"), 1080, {0: 0.0}))
    assert found[0] == "unacknowledged"
    assert "tank-float: open, which says less than 4 ml, but tank is believed to hold" in found[1]
    assert "does the float stick" in found[1]


def test_a_float_that_stays_closed_after_a_drain_is_told() -> None:
    drained_us = BEGUN_US + 2 * HOUR_US
    entries = [Entry(1, drained_us, drained_us, Drain("tank"))]
    result = run(floated(), 1080, {0: 0.0, 700: 1.0}, entries)
    found = [each for each in result.transitions if each.alarm == "tank-float-sensor-fault"]
    assert found[-1].after == "unacknowledged"
    assert "closed, which says 60 ml or more" in found[-1].text
    assert drained_us + 5 * MINUTE_US <= found[-1].at_us <= drained_us + 7 * MINUTE_US


def test_a_float_that_opens_with_the_drain_is_not() -> None:
    drained_us = BEGUN_US + 2 * HOUR_US
    entries = [Entry(1, drained_us, drained_us, Drain("tank"))]
    assert alarms(run(floated(), 800, {0: 0.0, 700: 1.0, 721: 0.0}, entries)) == []


# ---- in the site file ----


def test_a_trap_may_name_its_float_or_any_contact_with_its_level() -> None:
    plain = floated().line.stations[1].trap
    assert plain is not None
    named = SITE.replace('[[station]]\nid = "intake"\n', FLOAT.format(level="60 ml"))
    said = named.replace('drain_at = "600 ml"', 'drain_at = "600 ml", float_switch = {}')
    by_name = site(said.replace("{}", '"tank-float.contact"', 1)).line.stations[1].trap
    assert by_name == plain
    (one,) = plain.floats
    assert one.channel == "tank-float.contact"
    assert one.level.value == pytest.approx(0.060)
    other = '[[sensor]]\nid = "reed"\ndriver = "contact"\nline = 5\n\n[[station]]\nid = "intake"'
    text = SITE.replace('[[station]]\nid = "intake"', other).replace(
        'drain_at = "600 ml"',
        'drain_at = "600 ml", float_switch = { channel = "reed.contact", closes_at = "2 L" }',
    )
    trap = site(text).line.stations[1].trap
    assert trap is not None
    assert [(f.channel, f.level.value) for f in trap.floats] == [("reed.contact", 2.0)]


@pytest.mark.parametrize(
    ("said", "problem"),
    [
        ('"motor.contact"', "does not say at which level it closes"),
        ('"tank-float"', 'names a sensor, not what it gives; write "tank-float.contact"'),
        ('"pipe-end.temperature"', "gives a temperature, but a contact belongs here"),
        ('{ channel = "motor.contact" }', "does not say closes_at"),
        ('{ channel = "motor.contact", closes_at = "90 L" }', "above the trap's capacity"),
        ('{ channel = "motor.contact", closes_at = "3 bar" }', "is a pressure"),
        ("3", "must be a channel in quotes"),
    ],
)
def test_a_float_that_cannot_be_is_told(said: str, problem: str) -> None:
    text = SITE.replace('[[station]]\nid = "intake"\n', FLOAT.format(level="60 ml"))
    text = text.replace('drain_at = "600 ml"', f'drain_at = "600 ml", float_switch = {said}')
    with pytest.raises(SiteError) as caught:
        site(text)
    assert len(caught.value.problems) == 1
    assert problem in str(caught.value.problems[0])
    assert "trap.float_switch" in caught.value.problems[0].key


def test_a_float_of_another_trap_is_told() -> None:
    text = SITE.replace('[[station]]\nid = "intake"\n', FLOAT.format(level="60 ml"))
    text = text.replace(
        'drain_at = "150 ml"', 'drain_at = "150 ml", float_switch = "tank-float.contact"'
    )
    with pytest.raises(SiteError, match='belongs to the trap of "tank" by its own table'):
        site(text)
