"""The painter's page in a real browser: a typed surface, a gauge, a blotter test."""

from __future__ import annotations

import math
import re

import psychrolib
import pytest

from daemon.journal import Blotter, Gauge
from tests.browser.person import Person
from tests.browser.shop import TICKS, Shop

# The air around at the last tick, as `tests.daemon.shops.working` has it; its dew point by another
# program (ASHRAE's formulas), good to 0.1 K. The median over the sensors' errors is near it.
AIR_C = 20.0 + 2.0 * math.sin(TICKS / 300.0)
HUMIDITY = 0.6 + 0.05 * math.sin(TICKS / 170.0)
psychrolib.SetUnitSystem(psychrolib.SI)
DEW_POINT_C = psychrolib.GetTDewPointFromRelHum(AIR_C, HUMIDITY)


def spread_in(card: str, unit: str) -> float:
    """How far the card says that the surface is above the dew point."""
    found = re.search(rf"The surface is ([-\d.]+) {unit}", card)
    assert found is not None, card
    return float(found[1])


def test_a_surface_that_is_typed_in_gives_its_margin(
    person: Person, shop: Shop, width: int
) -> None:
    person.hold(width)
    person.open("/spray")
    assert person.read("#out-spray-gun .verdict") == "Unknown"
    assert "The surface's temperature is not known." in person.read("#out-spray-gun .answer")
    person.types("#surface-c-spray-gun", "18,5")
    person.taps("#surface-button-spray-gun")
    card = person.waits_to_read("#out-spray-gun", "as you typed it")
    assert "With the surface at 18,5 °C, as you typed it; give or take 1 K." in card
    assert spread_in(card, "K") == pytest.approx(18.5 - DEW_POINT_C, abs=0.25)
    assert person.read("#out-spray-gun .verdict") == "Care"  # the line's, whose width is large
    assert person.find("#surface-c-spray-gun").get_attribute("value") == "18,5"
    assert (
        f"&at={shop.clock.wall_us // 1000}" in person.browser.current_url
    )  # for how long it counts
    assert person.complaints() == []


def test_a_cold_surface_says_wait_and_to_what_to_warm_it(person: Person) -> None:
    person.open("/spray")
    person.types("#surface-c-spray-gun", "13")
    person.taps("#surface-button-spray-gun")
    answer = person.waits_to_read("#out-spray-gun .answer", "Wait")
    assert "Do: Warm the surface to 1" in answer
    assert "What would make it dry enough (water only)" in person.read("#out-spray-gun")


@pytest.mark.parametrize(
    ("typed", "words"),
    [
        ("180", "180 °C is no surface to be sprayed: type -40 °C to 80 °C."),
        ("warm", '"warm" is not a number. Write it like 380 or 12.5.'),
    ],
)
def test_what_is_no_surface_is_refused_with_a_helpful_word(
    person: Person, typed: str, words: str
) -> None:
    person.open("/spray")
    person.types("#surface-c-spray-gun", typed)
    person.taps("#surface-button-spray-gun")
    person.waits_to_read("#surface-said-spray-gun", words)
    assert person.find("#surface-c-spray-gun").get_attribute("value") == typed
    person.browser.execute_script("document.dispatchEvent(new Event('visibilitychange'))")
    person.waits_for(lambda: person.browser.execute_script("return performance.now() > 1500"))
    assert person.read("#net") == ""  # a refused question is no lost connection


def test_a_gauge_s_reading_is_recorded_and_counts(person: Person, shop: Shop, width: int) -> None:
    person.hold(width)
    person.open("/spray")
    person.types("#spread-spray-gun", "6.5")
    person.types("#by-gauge-spray-gun", "PK")
    person.taps("#gauge-button-spray-gun")
    person.waits_to_read("#gauge-said-spray-gun", "Recorded; it speaks for 30 minutes.")
    (entry,) = shop.entries()
    assert entry.body == Gauge("spray-gun", 6.5, 1800.0, "PK")
    card = person.waits_to_read("#out-spray-gun", "Your gauge speaks until")
    assert "by your gauge" in card


def test_a_gauge_s_impossible_reading_is_refused(person: Person, shop: Shop) -> None:
    person.open("/spray")
    person.types("#spread-spray-gun", "650")
    person.taps("#gauge-button-spray-gun")
    said = person.waits_to_read("#gauge-said-spray-gun", "Not recorded.")
    assert "a spread is the surface's temperature less the dew point around it" in said
    assert shop.entries() == []


@pytest.mark.parametrize(
    ("result", "verdict", "reason"),
    [
        ("water", "Wait", "The blotter showed water"),
        ("oil", "Wait", "The blotter showed oil"),
        ("clean", "Unknown", "The surface's temperature is not known."),
    ],
)
def test_a_blotter_test_is_one_tap_and_decides(
    person: Person, shop: Shop, result: str, verdict: str, reason: str
) -> None:
    person.open("/spray")
    person.types("#by-blotter-spray-gun", "PK")
    person.taps(f"#blotter-{result}-spray-gun")
    person.waits_to_read("#blotter-said-spray-gun", "Recorded.")
    (entry,) = shop.entries()
    assert entry.body == Blotter("spray-gun", result, "PK")  # type: ignore[arg-type]
    card = person.waits_to_read("#out-spray-gun", f"Last blotter test: {result}")
    assert f"{verdict} {reason}" in card


def test_a_blotter_test_works_without_script(person: Person, shop: Shop) -> None:
    person.without_script()
    person.open("/spray")
    person.taps_plainly("#blotter-water-spray-gun")
    assert "The blotter showed water" in person.read("#out-spray-gun")
    assert len(shop.entries()) == 1


def test_a_us_painter_types_fahrenheit(us_shop: Shop, person: Person) -> None:
    person.shop = us_shop
    person.open("/spray")
    person.types("#surface-c-spray-gun", "65.3")  # 18.5 degC
    person.taps("#surface-button-spray-gun")
    card = person.waits_to_read("#out-spray-gun", "65.3 °F, as you typed it")
    assert spread_in(card, "°F") == pytest.approx(1.8 * (18.5 - DEW_POINT_C), abs=0.45)
    assert not re.search(r"\d K\b", card)
    person.types("#spread-spray-gun", "11.7")
    person.taps("#gauge-button-spray-gun")
    person.waits_to_read("#gauge-said-spray-gun", "Recorded")
    (entry,) = us_shop.entries()
    assert isinstance(entry.body, Gauge)
    assert entry.body.spread_k == pytest.approx(6.5)  # 11.7 / 1.8


def test_the_answer_is_on_the_first_screen_within_a_second(person: Person) -> None:
    person.open("/spray")
    answer = person.find("#out-spray-gun .answer")
    bottom = person.browser.execute_script(
        "return arguments[0].getBoundingClientRect().bottom", answer
    )
    assert bottom < 800  # of a phone's screen
    ready_ms = person.browser.execute_script(
        "return performance.getEntriesByType('navigation')[0].domContentLoadedEventEnd"
    )
    assert 0 < ready_ms < 1000
