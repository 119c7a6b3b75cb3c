"""Somebody before a page: taps, types and reads, and waits as people do, with patience's end."""

from __future__ import annotations

from collections.abc import Callable
from importlib import resources
from typing import Any

from selenium import webdriver
from selenium.common.exceptions import (
    NoSuchElementException,
    StaleElementReferenceException,
    TimeoutException,
)
from selenium.webdriver.common.by import By
from selenium.webdriver.remote.command import Command
from selenium.webdriver.remote.webelement import WebElement
from selenium.webdriver.support.ui import WebDriverWait

from tests.browser.shop import Shop

PHONE, DESK = 390, 1280  # CSS pixels
WIDTHS = (PHONE, DESK)
PATIENCE_S = 12.0
AXE = resources.files("selenium_axe_python").joinpath("axe-core/axe.min.js")


class Person:
    """One person with one browser at one shop."""

    def __init__(self, browser: webdriver.Chrome, shop: Shop) -> None:
        self.browser, self.shop = browser, shop

    def hold(self, width: int, scheme: str = "light") -> None:
        """A screen of that width, in that colour scheme."""
        metrics = {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": width == PHONE}
        self.browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", metrics)
        media = {"features": [{"name": "prefers-color-scheme", "value": scheme}]}
        self.browser.execute_cdp_cmd("Emulation.setEmulatedMedia", media)

    def leave(self) -> None:
        """Nothing of this person stays in the browser."""
        self.browser.execute_cdp_cmd("Emulation.setScriptExecutionDisabled", {"value": False})
        self.browser.execute_script("try { localStorage.clear() } catch {}")
        self.browser.get("about:blank")
        self.complaints()

    def open(self, path: str) -> None:
        self.browser.get(self.shop.url + path)

    def without_script(self) -> None:
        """From the next page on."""
        self.browser.execute_cdp_cmd("Emulation.setScriptExecutionDisabled", {"value": True})

    # ---- reading ----

    def find(self, selector: str) -> WebElement:
        return self.browser.find_element(By.CSS_SELECTOR, selector)

    def sees(self, selector: str) -> bool:
        return bool(self.browser.find_elements(By.CSS_SELECTOR, selector))

    def read(self, selector: str) -> str:
        """What an element says, as one line."""
        return " ".join(self.find(selector).text.split())

    def waits_for(self, what: Callable[[], Any]) -> Any:
        """Until something is so; an element that was replaced meanwhile is looked for again."""
        passing = [StaleElementReferenceException, NoSuchElementException]
        waiting = WebDriverWait(self.browser, PATIENCE_S, 0.05, ignored_exceptions=passing)
        return waiting.until(lambda _: what())

    def waits_to_read(self, selector: str, words: str) -> str:
        said = ""

        def has_said() -> bool:
            nonlocal said
            said = self.read(selector)
            return words in said

        try:
            self.waits_for(has_said)
        except TimeoutException as error:
            raise AssertionError(f'{selector} says "{said}"') from error
        return said

    # ---- doing ----

    def types(self, selector: str, text: str) -> None:
        field = self.find(selector)
        field.clear()
        field.send_keys(text)

    def taps(self, selector: str) -> None:
        """Where it is hidden in a fold, unfold that first; again where it was just replaced."""
        self.waits_for(lambda: self._taps(selector))

    def _taps(self, selector: str) -> bool:
        element = self.find(selector)
        unfold = "arguments[0].closest('details')?.setAttribute('open', '')"
        self.browser.execute_script(unfold, element)
        self.browser.execute_script("arguments[0].scrollIntoView({block: 'center'})", element)
        element.click()
        return True

    def is_back_online(self) -> None:
        """What a browser tells a page when the network is there again."""
        self.browser.execute_script("dispatchEvent(new Event('online'))")

    def taps_plainly(self, selector: str) -> None:
        """Without script there is no scrolling for it but the browser's own."""
        was = self.find("html")
        self.find(selector).click()
        self.waits_for(lambda: _is_gone(was))

    # ---- judging the page ----

    def serious_faults(self) -> list[str]:
        """What axe-core finds serious or critical on the page as it is."""
        self.browser.execute_script(AXE.read_text(encoding="utf-8"))
        found = self.browser.execute_async_script(
            "const done = arguments[arguments.length - 1];"
            "axe.run(document, {resultTypes: ['violations']}).then(r => done(r.violations))"
        )
        return [
            f"{each['id']} ({each['impact']}): {node['html'][:120]} {node['failureSummary']}"
            for each in found
            if each["impact"] in ("serious", "critical")
            for node in each["nodes"]
        ]

    def complaints(self) -> list[str]:
        """What the browser logged: refused scripts, failed requests, errors of our own script."""
        logged = self.browser.execute(Command.GET_LOG, {"type": "browser"})["value"]
        return [entry["message"] for entry in logged]

    def is_wider_than_the_screen(self) -> bool:
        wide = "return document.documentElement.scrollWidth > document.documentElement.clientWidth"
        return bool(self.browser.execute_script(wide))


def _is_gone(element: WebElement) -> bool:
    try:
        element.is_enabled()
    except StaleElementReferenceException:
        return True
    return False
