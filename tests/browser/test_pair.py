"""A phone is paired by its link, says what it may do, and can forget it: in a real browser, with a
daemon that asks for keys."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import dataclass, replace

import pytest
from selenium import webdriver

from api.app import create_app
from api.server import ApiServer
from daemon.clock import HOUR_US
from daemon.journal import Drain
from daemon.keys import Scope, make
from tests.api.fake import NOW_US, FakeRunning, a_site
from tests.browser.person import Person


@dataclass
class LockedShop:
    """A shop whose pages want a key, and the link that `dripleg key` would show."""

    running: FakeRunning
    url: str

    def link(self, *may: Scope) -> str:
        key, digest, text = make("paint booth tablet", may or ("read", "record"), NOW_US - HOUR_US)
        self.running.kept_keys.keys[key.id] = (key, digest)
        return f"/pair#{text}"

    def revoke_all(self) -> None:
        keys = self.running.kept_keys.keys
        for key, digest in list(keys.values()):
            keys[key.id] = (replace(key, revoked_us=NOW_US), digest)


@pytest.fixture
def shop() -> Iterator[LockedShop]:
    running = FakeRunning(site=a_site("0.0.0.0"))
    server = ApiServer(create_app(running), "127.0.0.1", 0)
    server.start()
    yield LockedShop(running, server.url.rstrip("/"))
    server.stop()


@pytest.fixture
def person(browser: webdriver.Chrome, shop: LockedShop, width: int) -> Iterator[Person]:
    made = Person(browser, shop)  # type: ignore[arg-type]  # its address is all that is asked
    made.hold(width)
    yield made
    browser.delete_all_cookies()
    made.leave()


def test_a_link_pairs_the_phone_and_lands_on_the_round(person: Person, shop: LockedShop) -> None:
    person.open(shop.link())
    said = person.waits_to_read("#pairing", "Paired as paint booth tablet.")
    assert "This phone may now see traps" in said
    assert "record drains" in said
    assert "#" not in person.browser.current_url  # nor in its history
    assert person.serious_faults() == []
    assert not person.is_wider_than_the_screen()
    person.waits_for(lambda: person.browser.current_url.endswith("/round"))
    assert "round" in person.read("h1").lower()
    assert person.complaints() == []
    person.open("/pair")
    assert "Paired as paint booth tablet." in person.read("main")
    cookies = person.browser.get_cookies()
    assert [(each["httpOnly"], each["sameSite"]) for each in cookies] == [(True, "Strict")]
    assert person.browser.execute_script("return document.cookie") == ""


def test_without_a_key_a_page_says_how_to_come_by_one(person: Person) -> None:
    person.open("/round")
    assert "needs a key" in person.read("h1")
    assert "dripleg key SITE make" in person.read("main")
    assert person.serious_faults() == []
    person.open("/pair")
    assert "This phone is not paired yet." in person.read("main")
    assert person.serious_faults() == []
    assert not person.is_wider_than_the_screen()


def test_a_phone_forgets_its_key_when_it_is_told_to(person: Person, shop: LockedShop) -> None:
    person.open(shop.link())
    person.waits_for(lambda: person.browser.current_url.endswith("/round"))
    person.open("/pair")
    person.taps("#forget button")
    person.waits_to_read("main", "This phone is not paired yet.")
    assert person.browser.get_cookies() == []


def test_what_a_key_may_not_do_is_refused_and_holds_up_nothing(
    person: Person, shop: LockedShop
) -> None:
    person.open(shop.link("read"))
    person.waits_to_read("#line", "to drain")
    person.taps("#drained-riser")
    person.waits_to_read("#said-riser", "Not recorded. The key ")
    assert person.read("#net") == ""
    person.open(shop.link("read", "record"))
    person.waits_to_read("#line", "to drain")
    # and where one tap waits for a key, those behind it are sent all the same
    stuck = {
        "id": "a",
        "path": "/api/v1/stations/tank/service",
        "label": "old",
        "at": 0,
        "tries": 1,
    }
    stuck["body"] = {"what": "sensor replaced", "sensor": "tank-gauge"}
    drain = {"id": "b", "path": "/api/v1/traps/tank/drains", "label": "tank", "at": 0, "tries": 1}
    drain["body"] = {"key": "k"}
    kept = f"localStorage.setItem('dripleg.kept', '{json.dumps([stuck, drain])}')"
    person.browser.execute_script(kept)
    person.is_back_online()
    person.waits_for(lambda: len(shop.running.journal) == 1)
    assert isinstance(shop.running.journal[0].body, Drain)
    assert "old" in person.read("#net")


def test_a_revoked_link_says_so_and_pairs_nothing(person: Person, shop: LockedShop) -> None:
    link = shop.link()
    shop.revoke_all()
    person.open(link)
    assert "was revoked at" in person.waits_to_read("#pairing", "revoked")
    assert person.browser.get_cookies() == []
    assert person.serious_faults() == []


def test_a_phone_whose_key_was_revoked_is_told_at_the_next_page(
    person: Person, shop: LockedShop
) -> None:
    person.open(shop.link())
    person.waits_for(lambda: person.browser.current_url.endswith("/round"))
    shop.revoke_all()
    person.open("/round")
    assert "opens nothing" in person.read("h1")


def test_a_link_that_is_opened_on_this_very_page_pairs_too(
    person: Person, shop: LockedShop
) -> None:
    person.open("/pair")
    person.open(shop.link())
    person.waits_to_read("#pairing", "Paired as paint booth tablet.")


def test_another_fragment_is_no_key(person: Person) -> None:
    person.open("/pair#main")
    assert person.read("#pairing") == ""
    assert person.browser.current_url.endswith("/pair#main")
