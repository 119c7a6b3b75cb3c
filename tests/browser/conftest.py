"""Debian's Chromium, driven for the tests of the pages."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest
from selenium import webdriver
from selenium.webdriver.chrome.service import Service

from tests.browser.person import PHONE, WIDTHS, Person
from tests.browser.shop import US, Shop

ARGUMENTS = (
    "--headless=new",
    "--no-sandbox",  # as root in a container there is no other way
    "--disable-gpu",
    "--disable-dev-shm-usage",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
)


@pytest.fixture(scope="session")
def browser() -> Iterator[webdriver.Chrome]:
    options = webdriver.ChromeOptions()
    options.binary_location = "/usr/bin/chromium"
    for argument in ARGUMENTS:
        options.add_argument(argument)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL"})
    driver = webdriver.Chrome(options, Service("/usr/bin/chromedriver"))
    driver.set_page_load_timeout(20)
    yield driver
    driver.quit()


@pytest.fixture
def shop(tmp_path: Path) -> Iterator[Shop]:
    made = Shop(tmp_path)
    yield made
    made.close()


@pytest.fixture
def us_shop(tmp_path: Path) -> Iterator[Shop]:
    (tmp_path / "us").mkdir()
    made = Shop(tmp_path / "us", US)
    yield made
    made.close()


@pytest.fixture(scope="session")
def lasting_shop(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Shop]:
    """For those who only look."""
    made = Shop(tmp_path_factory.mktemp("lasting"))
    yield made
    made.close()


@pytest.fixture
def visitor(browser: webdriver.Chrome, lasting_shop: Shop) -> Iterator[Person]:
    made = Person(browser, lasting_shop)
    made.hold(PHONE)
    yield made
    made.leave()


@pytest.fixture(params=WIDTHS)
def width(request: pytest.FixtureRequest) -> int:
    return int(request.param)


@pytest.fixture
def person(browser: webdriver.Chrome, shop: Shop) -> Iterator[Person]:
    made = Person(browser, shop)
    made.hold(PHONE)
    yield made
    made.leave()
