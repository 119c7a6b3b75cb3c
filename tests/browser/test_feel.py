"""What holds for every page in a browser: reach, contrast, weight, and no request elsewhere."""

from __future__ import annotations

from itertools import pairwise
from urllib.parse import urlsplit

import pytest
from selenium.webdriver.common.keys import Keys

from tests.browser.person import DESK, PHONE, Person
from tests.browser.shop import Shop

PAGES = ("/", "/round", "/spray", "/spray?outlet=spray-gun&surface=13", "/line")
LARGEST = 60_000  # bytes of a page's HTML, style and script together


@pytest.mark.parametrize("path", PAGES)
@pytest.mark.parametrize(("width", "scheme"), [(PHONE, "light"), (DESK, "dark")])
def test_axe_finds_no_serious_fault(visitor: Person, path: str, width: int, scheme: str) -> None:
    visitor.hold(width, scheme)
    visitor.open(path)
    assert visitor.serious_faults() == []


@pytest.mark.parametrize("path", PAGES)
def test_a_page_fits_a_phone_and_asks_nobody_else(visitor: Person, path: str) -> None:
    visitor.open(path)
    assert not visitor.is_wider_than_the_screen()
    loaded = visitor.browser.execute_script(
        "return performance.getEntriesByType('resource').map(e => [e.name, e.decodedBodySize])"
        ".concat(performance.getEntriesByType('navigation').map(e => [e.name, e.decodedBodySize]))"
    )
    assert {urlsplit(name).netloc for name, _ in loaded} == {f"127.0.0.1:{visitor.shop.wire.port}"}
    assert len(loaded) >= 4
    assert sum(size for _, size in loaded) < LARGEST
    assert visitor.complaints() == []


def test_the_keyboard_alone_drains_a_trap(person: Person, shop: Shop) -> None:
    person.hold(DESK)
    person.open("/round")
    person.browser.switch_to.active_element.send_keys(Keys.TAB)
    assert person.browser.switch_to.active_element.text == "To the content"
    visited = []
    for _ in range(40):
        here = person.browser.switch_to.active_element
        here.send_keys(Keys.TAB)
        visited.append(person.browser.switch_to.active_element.get_attribute("id"))
        if visited[-1] == "drained-tank":
            break
    wanted = ["volume-tank", "unit-tank", "by-tank", "look-clear-tank", "drained-tank"]
    assert [each for each in visited if each in wanted] == wanted
    outline = person.browser.execute_script(
        "return getComputedStyle(document.activeElement).outlineWidth"
    )
    assert outline == "3px"
    person.browser.switch_to.active_element.send_keys(Keys.ENTER)
    person.waits_for(lambda: len(shop.entries()) == 1)


@pytest.mark.parametrize("path", PAGES)
def test_a_screen_reader_finds_its_way(visitor: Person, path: str) -> None:
    visitor.open(path)
    found = visitor.browser.execute_script(
        "return [document.documentElement.lang, document.querySelectorAll('h1').length,"
        "document.querySelectorAll('main').length, document.querySelectorAll('nav').length,"
        "document.querySelectorAll('[role=status], output').length,"
        "[...document.querySelectorAll('h1,h2,h3')].map(h => +h.tagName[1])]"
    )
    lang, titles, mains, navigations, told, levels = found
    assert (lang, titles, mains, navigations) == ("en", 1, 1, 1)
    assert told >= 1
    assert levels[0] == 1
    assert all(after - before <= 1 for before, after in pairwise(levels))


def test_a_page_that_has_lost_its_connection_says_so_until_it_is_back(
    person: Person, shop: Shop
) -> None:
    look = "document.dispatchEvent(new Event('visibilitychange'))"
    person.open("/spray")
    shop.wire.cut()
    person.browser.execute_script(look)
    person.waits_to_read("#net", "No connection. The page shows what was so at 07:10.")
    shop.wire.fate = "carries"
    person.browser.execute_script(look)
    person.waits_for(lambda: person.read("#net") == "")
