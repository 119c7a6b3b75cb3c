"""Whoever changed a part notes it on the line page, on a phone and at a desk."""

from __future__ import annotations

import pytest

from daemon.journal import Service
from tests.browser.person import Person


@pytest.fixture
def installer(person: Person, width: int) -> Person:
    person.hold(width)
    person.open("/line")
    return person


def test_every_station_is_there_in_the_air_s_order(installer: Person) -> None:
    said = installer.read("#stations")
    places = [said.index(name) for name in ("intake", "tank", "riser", "bowl", "booth-regulator")]
    assert places == sorted(places)
    assert "Nobody said; taken to be like intake + 20 K x duty" in said
    assert "By sensor pipe-end.temperature" in said
    assert "leaves booth-regulator" in installer.read("#lead")
    assert not installer.is_wider_than_the_screen()
    assert installer.serious_faults() == []
    assert installer.complaints() == []


def test_a_changed_element_is_noted(installer: Person) -> None:
    installer.taps("#what-bowl-1")
    installer.types("#by-bowl", "JR")
    installer.taps("#service-bowl button")
    installer.waits_to_read("#service-said-bowl", "Noted.")
    (entry,) = installer.shop.entries()
    assert entry.body == Service("element changed", "bowl", "JR")
