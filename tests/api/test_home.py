"""The plain page at `/`."""

from __future__ import annotations

import re
from dataclasses import replace

import pytest

from tests.api.client import Client, client_of
from tests.api.fake import FakeRunning, a_site


def text_of(client: Client) -> str:
    """The page's words, without its tags."""
    response = client.get("/")
    assert response.status_code == 200
    assert response.headers["content-type"] == "text/html; charset=utf-8"
    return re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", response.text))


def test_the_page_shows_each_trap_with_its_interval(client: Client) -> None:
    text = text_of(client)
    assert "Alder Yard Finishing" in text
    assert "about 410 ml" in text
    assert "Nine times in ten between 300 ml and 560 ml" in text
    assert "Drain at 600 ml; it holds 15 L." in text
    # Lisbon keeps UTC in winter (IANA time zone database)
    assert "Last drained Mon 30 Nov, 17:00." in text
    assert "Next by the calendar: Tue 1 Dec, 17:00, however little is in." in text
    assert "Drain it: the water has reached its level." in text
    assert "Counted since the start: not drained yet." in text


def test_the_page_speaks_us_units_to_a_us_shop() -> None:
    text = text_of(client_of(FakeRunning(site=a_site(units="us"), standing={})))
    # NIST Handbook 44: 410 ml / 29.57353 = 13.9 oz, 15 L / 3.785412 = 3.96 gal
    assert "about 13.9 oz" in text
    assert "it holds 3.96 gal" in text
    assert " ml" not in text


def test_the_page_shows_alarms_that_are_not_normal_in_words(client: Client) -> None:
    text = text_of(client)
    assert "riser: about 170 ml (140-210 ml); drain it" in text
    assert "Medium priority, since Tue 1 Dec, 08:55: not seen by anybody yet." in text
    assert "Low priority, since Tue 1 Dec, 08:00: seen." in text
    assert "High priority, since Tue 1 Dec, 08:00: over, but not seen by anybody yet." in text


def test_the_page_says_when_all_is_well_and_when_not(running: FakeRunning, client: Client) -> None:
    assert "All is well" in text_of(client)
    running.problems = ("tank-gauge gives no answer: look at its plug",)
    text = text_of(client)
    assert "Not all is well" in text
    assert "tank-gauge gives no answer: look at its plug" in text
    assert "All is well" not in text


def test_the_page_is_there_before_the_first_tick(running: FakeRunning, client: Client) -> None:
    running.views.clear()
    running.standing.clear()
    text = text_of(client)
    assert "No estimate yet" in text
    assert "Alarms None." in text


def test_a_calendar_reminder_says_that_it_is_one(running: FakeRunning, client: Client) -> None:
    running.views[0] = replace(running.views[0], due=True)
    assert "Drain it: the calendar asks for it." in text_of(client)


def test_a_trap_without_a_calendar_that_is_not_due_says_so(
    running: FakeRunning, client: Client
) -> None:
    running.views[1] = replace(running.views[1], due=False, because=None)
    assert "Not due by volume." in text_of(client)


def test_the_page_cautions_where_the_act_happens(client: Client) -> None:
    text = text_of(client)
    assert "Crack a drain valve slowly" in text
    assert "Estimates advise; they never replace opening the drain" in text
    assert "Condensate is oily: to a separator or a waste carrier, never to the drain." in text


def test_names_and_texts_are_escaped(running: FakeRunning) -> None:
    running.site = replace(running.site, name="<b>Yard</b> & Sons")
    running.problems = ('<script>alert("x")</script>',)
    page = client_of(running).get("/").text
    assert "&lt;b&gt;Yard&lt;/b&gt; &amp; Sons" in page
    assert "<script" not in page


@pytest.mark.parametrize("path", ["/", "/style.css"])
def test_nothing_is_fetched_from_another_host(client: Client, path: str) -> None:
    page = client.get(path).text
    assert "//" not in page
    assert "<script" not in page
    assert "@import" not in page


def test_the_style_is_the_page_s_own_for_light_and_dark(client: Client) -> None:
    assert 'href="/style.css"' in client.get("/").text
    response = client.get("/style.css")
    assert response.headers["content-type"].startswith("text/css")
    assert "prefers-color-scheme: dark" in response.text


@pytest.mark.parametrize("path", ["/docs", "/redoc", "/docs/oauth2-redirect"])
def test_documentation_pages_that_load_from_elsewhere_are_off(client: Client, path: str) -> None:
    assert client.get(path).status_code == 404
