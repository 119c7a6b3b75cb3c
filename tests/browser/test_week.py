"""The owner's page in a real browser: the week read, and its PDF and CSV opened and read back."""

from __future__ import annotations

import base64
import io

import pytest
from pypdf import PdfReader
from selenium.webdriver.common.by import By

from daemon.hour_figures import Noted
from daemon.weekly.weeks import Week, first_hour_us
from tests.browser.person import DESK, PHONE, Person
from tests.browser.shop import Shop
from tests.daemon.week_rows import rows_of

WEEK = Week(2026, 10)


@pytest.fixture
def owner(person: Person, shop: Shop) -> Person:
    """Somebody at a shop whose week is over, on the Monday after it."""
    _, to_us = WEEK.bounds_us(shop.site.timezone)
    begun_us = int(shop.store.get_meta("grid_us") or 0)
    rows = rows_of(shop.site, first_hour_us(begun_us), to_us)
    del rows.hours[40:52]
    shop.store.commit_tick(to_us, [], noted=Noted(tuple(rows.hours), tuple(rows.days)))
    shop.clock.wall_us = to_us
    return person


def fetched(person: Person, link: str) -> bytes:
    """What a link of the page leads to, fetched by the page itself."""
    href = person.browser.find_element(By.LINK_TEXT, link).get_attribute("href")
    coded = person.browser.execute_async_script(
        "const done = arguments[1]; fetch(arguments[0]).then(r => r.arrayBuffer()).then(b =>"
        "done(btoa(String.fromCharCode(...new Uint8Array(b)))))",
        href,
    )
    return base64.b64decode(coded)


def test_the_owner_reads_the_week_and_its_files(owner: Person, width: int) -> None:
    owner.hold(width)
    owner.open("/week")
    assert owner.read("h1") == "Week 10 of 2026: Mon 2 Mar to Sun 8 Mar"
    assert "of water came in with the air; 0 drains, none late" in owner.read(".lead")
    assert "Not all of this week is known." in owner.read("main .warn")
    assert "Not watched: Tue 3 Mar, 23:00 to Wed 4 Mar, 11:00 (12 h)" in owner.read("main .warn")
    assert "Unfit to spray (wait)" in owner.read("main")
    assert not owner.is_wider_than_the_screen()
    charts = owner.browser.find_elements(By.CSS_SELECTOR, "figure svg")
    assert len(charts) == 4
    assert all(chart.size["width"] > 300 and chart.size["height"] > 100 for chart in charts)
    pages = PdfReader(io.BytesIO(fetched(owner, "PDF"))).pages
    assert "Week 10 of 2026" in pages[0].extract_text()
    assert b"traps,tank,shed," in fetched(owner, "CSV")
    assert owner.complaints() == []


@pytest.mark.parametrize(("width", "scheme"), [(PHONE, "light"), (DESK, "dark")])
def test_axe_finds_no_serious_fault_in_the_week(owner: Person, width: int, scheme: str) -> None:
    owner.hold(width, scheme)
    owner.open("/week")
    assert owner.serious_faults() == []


def test_the_owner_goes_from_week_to_week(owner: Person) -> None:
    owner.open("/week")
    owner.browser.find_element(By.LINK_TEXT, "Week before").click()
    assert owner.read("h1").startswith("Week 9 of 2026")
    assert owner.read(".lead") == "Nothing is known of this week."
    owner.browser.find_element(By.LINK_TEXT, "Week after").click()
    assert owner.read("h1").startswith("Week 10 of 2026")


def test_a_chart_can_be_read_in_words(owner: Person) -> None:
    owner.open("/week")
    owner.browser.find_element(By.CSS_SELECTOR, "figure summary").click()
    said = owner.read("figure details p")
    assert said.startswith("Mon ")
    assert "ml" in said
