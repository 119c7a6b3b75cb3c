"""The shop hand's page in a real browser: drain, mistake, undo, and a tap without a network."""

from __future__ import annotations

import base64
import re

import pytest

from daemon.journal import Confirm, Drain, Shelve, Undo
from tests.browser.person import PHONE, Person
from tests.browser.shop import Shop


def test_a_drain_with_a_volume_is_recorded_and_what_was_learned_is_said(
    person: Person, shop: Shop, width: int
) -> None:
    person.hold(width)
    person.open("/round")
    assert person.read("#line").startswith("1 to drain, the tank, before you leave: about 0.7 L")
    person.types("#volume-tank", "630")
    person.types("#by-tank", "AM")
    person.taps("label[for='look-clear-tank']")
    person.taps("#drained-tank")
    said = person.waits_to_read("#said-tank", "tank: you measured 630 ml, expected ")
    assert "the next estimate of tank" in said
    (entry,) = shop.entries()
    assert entry.body == Drain("tank", "emptied", 0.63, "AM", "clear")
    # the page has followed by itself
    assert "Nothing to drain" in person.waits_to_read("#line", "Nothing to drain")
    assert person.complaints() == []


def test_a_volume_that_cannot_be_is_refused_with_a_helpful_word(
    person: Person, shop: Shop, width: int
) -> None:
    person.hold(width)
    person.open("/round")
    person.types("#volume-tank", "63000")
    person.taps("#drained-tank")
    said = person.waits_to_read("#said-tank", "Not recorded.")
    assert 'more than twice what the trap "tank" holds (15000 ml)' in said
    assert "check the figure and its unit" in said
    assert person.find("#volume-tank").get_attribute("value") == "63000"  # to be corrected
    assert person.find("#volume-tank").get_attribute("aria-invalid") == "true"
    assert shop.entries() == []


def test_what_is_no_number_is_not_sent(person: Person, shop: Shop) -> None:
    person.open("/round")
    person.types("#volume-tank", "a mug")
    person.taps("#drained-tank")
    person.waits_to_read("#said-tank", '"a mug" is not a number. Write it like 380.')
    assert shop.entries() == []
    person.types("#volume-tank", "630,5")  # a comma is what half the world types
    person.taps("#drained-tank")
    person.waits_to_read("#said-tank", "you measured")
    (entry,) = shop.entries()
    assert isinstance(entry.body, Drain)
    assert entry.body.volume_kg == pytest.approx(0.6305)


def test_a_slip_is_taken_back_with_the_same_initials(
    person: Person, shop: Shop, width: int
) -> None:
    person.hold(width)
    person.open("/round")
    before = person.read("#trap-tank .big")
    person.types("#by-tank", "AM")
    person.taps("#drained-tank")
    person.waits_for(lambda: person.sees("#undo-button-tank"))
    assert person.read("#trap-tank .big") == "about 0 ml"
    person.types("#by-undo-tank", "BK")
    person.taps("#undo-button-tank")
    person.waits_to_read("#said-tank", 'It was recorded with "AM", and the undo came with "BK"')
    person.types("#by-undo-tank", "AM")
    person.taps("#undo-button-tank")
    person.waits_to_read("#trap-tank .note", "Taken back")
    assert person.read("#trap-tank .big") == before
    assert [type(entry.body) for entry in shop.entries()] == [Drain, Undo]


def test_was_empty_and_some_was_left_are_one_tap(person: Person, shop: Shop) -> None:
    person.open("/round")
    person.taps("#empty-riser")
    person.waits_to_read("#said-riser", "riser")
    person.taps("#partly-tank")
    person.waits_to_read("#said-tank", "Recorded.")
    said = [(each.body.trap, each.body.outcome) for each in shop.entries()]  # type: ignore[union-attr]
    assert said == [("riser", "empty"), ("tank", "partly")]


def test_rusty_water_asks_for_the_vessel_to_be_looked_at(person: Person) -> None:
    person.open("/round")
    person.taps("label[for='look-rusty-tank']")
    person.taps("#drained-tank")
    person.waits_to_read("#said-tank", "Rusty water: have the vessel looked at inside")


def test_a_surprising_volume_is_asked_about(person: Person, shop: Shop) -> None:
    person.open("/round")
    person.types("#volume-tank", "6300")
    person.taps("#drained-tank")
    person.waits_to_read("#said-tank", "look at the figure and its unit again")
    shop.tick()
    person.open("/round")
    assert "Is 6.3 L right?" in person.read("#right-tank")
    person.taps("#right-button-tank")
    person.waits_for(lambda: len(shop.entries()) == 2)
    assert isinstance(shop.entries()[1].body, Confirm)


def test_a_tap_while_the_server_is_down_is_kept_and_sent_once(
    person: Person, shop: Shop, width: int
) -> None:
    person.hold(width)
    person.open("/round")
    shop.stop_server()
    shop.wire.cut()
    person.types("#volume-tank", "630")
    person.types("#by-tank", "AM")
    person.taps("#drained-tank")
    person.waits_to_read("#said-tank", "Kept on this phone")
    person.waits_to_read("#net", "Kept on this phone, to be sent once: tank: Drained")
    assert shop.entries() == []
    shop.start_server()
    shop.wire.fate = "carries"
    person.is_back_online()
    person.waits_for(lambda: len(shop.entries()) == 1)
    person.waits_for(lambda: person.read("#net") == "")
    person.waits_to_read("#said-tank", "you measured 630 ml")
    person.waits_for(lambda: "Nothing to drain" in person.read("#line"))
    (entry,) = shop.entries()
    assert entry.body == Drain("tank", "emptied", 0.63, "AM")


def test_a_kept_tap_survives_that_the_page_is_closed(person: Person, shop: Shop) -> None:
    person.open("/round")
    shop.wire.cut()
    person.taps("#drained-tank")
    person.waits_to_read("#said-tank", "Kept on this phone")
    person.browser.get("about:blank")
    shop.wire.fate = "carries"
    person.open("/spray")  # any page sends it
    person.waits_for(lambda: len(shop.entries()) == 1)


def test_a_browser_that_stores_nothing_keeps_a_tap_while_the_page_is_open(
    person: Person, shop: Shop
) -> None:
    person.open("/round")
    refuse = "Storage.prototype.setItem = () => { throw new DOMException('full') }"
    person.browser.execute_script(refuse)
    shop.wire.cut()
    person.taps("#drained-tank")
    person.waits_to_read("#net", "Kept on this phone, to be sent once: tank: Drained")
    shop.wire.fate = "carries"
    person.is_back_online()
    person.waits_for(lambda: len(shop.entries()) == 1)
    person.waits_for(lambda: person.read("#net") == "")


def test_an_answer_that_was_lost_makes_no_second_drain(person: Person, shop: Shop) -> None:
    person.open("/round")
    shop.wire.fate = "loses answers"
    person.types("#volume-tank", "630")
    person.taps("#drained-tank")
    person.waits_to_read("#said-tank", "Kept on this phone")
    assert len(shop.entries()) == 1  # it has arrived; the phone cannot know
    shop.wire.fate = "carries"
    person.waits_for(lambda: person.read("#net") == "")
    assert shop.wire.lost >= 1
    assert len(shop.entries()) == 1


def test_a_tap_that_comes_late_says_when_it_was(person: Person, shop: Shop) -> None:
    """A minute without network: the drain is dated by the daemon's clock, not by the phone's."""
    tapped_us = shop.clock.wall_us
    person.open("/round")
    shop.wire.cut()
    person.taps("#drained-tank")
    person.waits_to_read("#said-tank", "Kept on this phone")
    age = "const list = JSON.parse(localStorage.getItem('dripleg.kept')); list[0].at -= 60000;"
    person.browser.execute_script(
        age + "localStorage.setItem('dripleg.kept', JSON.stringify(list))"
    )
    shop.clock.wall_us += 60_000_000
    shop.tick(6)
    shop.wire.fate = "carries"
    person.is_back_online()
    person.waits_for(lambda: len(shop.entries()) == 1)
    (entry,) = shop.entries()
    # the page learned the daemon's time when it was opened, a minute after that tap of a minute ago
    assert entry.at_us == pytest.approx(tapped_us - 60_000_000, abs=20_000_000)


def test_an_alarm_is_put_off_also_when_the_network_comes_back_late(
    person: Person, shop: Shop
) -> None:
    person.open("/")
    shop.wire.cut()
    person.taps("#off-button-tank-drain-due")
    person.waits_to_read("#said-tank-drain-due", "Kept on this phone")
    age = "const list = JSON.parse(localStorage.getItem('dripleg.kept')); list[0].at -= 60000;"
    person.browser.execute_script(
        age + "localStorage.setItem('dripleg.kept', JSON.stringify(list))"
    )
    shop.wire.fate = "carries"
    person.is_back_online()
    person.waits_to_read("#said-tank-drain-due", "Put off.")
    (entry,) = shop.entries()
    assert entry.body == Shelve("tank-drain-due", 1800.0)


def test_two_taps_in_a_hurry_are_one(person: Person, shop: Shop) -> None:
    person.open("/round")
    script = "const b = document.getElementById('drained-tank'); b.click(); b.click(); b.click();"
    person.browser.execute_script(script)
    person.waits_to_read("#said-tank", "Recorded.")
    assert len(shop.entries()) == 1


def test_the_enter_key_sends_and_the_undo_is_there_at_once(person: Person, shop: Shop) -> None:
    """A phone's keyboard has a key that sends; the field keeps the focus."""
    person.open("/round")
    person.types("#volume-tank", "630\n")
    person.waits_to_read("#said-tank", "you measured 630 ml")
    person.waits_for(lambda: person.sees("#undo-button-tank"))
    assert "Nothing to drain" in person.read("#line")


def test_the_same_tap_again_without_a_network_is_one_tap(person: Person, shop: Shop) -> None:
    person.open("/round")
    shop.wire.cut()
    person.types("#volume-tank", "630")
    person.taps("#drained-tank")
    person.waits_to_read("#said-tank", "Kept on this phone")
    person.taps("#drained-tank")
    person.waits_to_read("#said-tank", "kept on this phone already")
    person.taps("#volume-riser")  # another trap is another tap
    person.taps("#drained-riser")
    person.waits_to_read("#said-riser", "Kept on this phone")
    shop.wire.fate = "carries"
    person.is_back_online()
    person.waits_for(lambda: person.read("#net") == "")
    assert [each.body.trap for each in shop.entries()] == ["tank", "riser"]  # type: ignore[union-attr]


def test_it_works_without_script(person: Person, shop: Shop) -> None:
    person.without_script()
    person.open("/round")
    person.types("#volume-tank", "63000")
    person.types("#by-tank", "AM")
    person.taps_plainly("#drained-tank")
    assert 'more than twice what the trap "tank" holds' in person.read("#said-tank")
    assert person.find("#volume-tank").get_attribute("value") == "63000"
    assert shop.entries() == []
    person.types("#volume-tank", "630")
    person.taps_plainly("#drained-tank")
    assert "you measured 630 ml" in person.read("#said-tank")
    person.types("#by-undo-tank", "AM")
    person.taps_plainly("#undo-button-tank")
    assert "Taken back" in person.read("#trap-tank .note")
    assert [type(entry.body) for entry in shop.entries()] == [Drain, Undo]


def test_a_page_that_refreshes_keeps_what_is_typed(person: Person, shop: Shop) -> None:
    person.open("/round")
    person.types("#volume-tank", "12")
    person.taps("label[for='look-milky-tank']")
    shop.tick(20)
    person.browser.execute_script("document.dispatchEvent(new Event('visibilitychange'))")
    person.waits_for(lambda: person.browser.execute_script("return performance.now() > 1500"))
    assert person.find("#volume-tank").get_attribute("value") == "12"
    assert person.find("#look-milky-tank").is_selected()


def test_a_us_shop_reads_and_types_ounces(us_shop: Shop, person: Person) -> None:
    person.shop = us_shop
    person.open("/round")
    # 0.65 kg of water: 650 ml / 29.57353 (NIST Handbook 44) = 22 oz
    assert "about 22 oz, a jug" in person.read("#line")
    person.types("#volume-tank", "20")
    person.taps("#drained-tank")
    person.waits_to_read("#said-tank", "you measured 20 oz")
    (entry,) = us_shop.entries()
    assert isinstance(entry.body, Drain)
    assert entry.body.volume_kg == pytest.approx(20 * 0.02957353, rel=1e-4)


def test_on_a_phone_every_control_is_large_enough_for_a_glove(person: Person) -> None:
    person.hold(PHONE)
    person.open("/round")
    sizes = person.browser.execute_script(
        "const all = 'button, select, summary, nav a, label:has([type=radio]), [inputmode]';"
        "return [...document.querySelectorAll(all)].filter(e => e.checkVisibility())"
        ".map(e => [e.outerHTML.slice(0, 60), e.getBoundingClientRect().height])"
    )
    assert len(sizes) > 10
    assert [each for each in sizes if each[1] < 48] == []


def test_the_page_is_printed_on_one_sheet(person: Person) -> None:
    person.open("/round")
    options = {"paperWidth": 8.27, "paperHeight": 11.69}  # A4, in
    pdf = person.browser.execute_cdp_cmd("Page.printToPDF", options)["data"]
    assert pages_of(pdf) == 1


def pages_of(pdf: str) -> int:
    return len(re.findall(rb"/Type\s*/Page\b", base64.b64decode(pdf)))
