"""The start page at `/`."""

from __future__ import annotations

import re
from dataclasses import replace

import pytest

from daemon.clock import HOUR_US
from tests.api.client import Client, client_of
from tests.api.fake import NOW_US, FakeRunning


def text_of(client: Client) -> str:
    """The page's words, without its tags."""
    response = client.get("/")
    assert response.status_code == 200
    assert response.headers["content-type"] == "text/html; charset=utf-8"
    return re.sub(r"[\s\xa0]+", " ", re.sub(r"<[^>]+>", " ", response.text))


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


def test_the_start_says_what_is_counted_without_an_earlier_state(
    running: FakeRunning, client: Client
) -> None:
    assert "earlier state" not in text_of(client)
    running.views[:] = [replace(v, counted_from_us=NOW_US - HOUR_US) for v in running.views]
    assert (
        "Contents counted from Tue 1 Dec, 08:00: earlier state could not be read. There may be "
        "more in tank and riser than is shown. Drain each once, whatever the figure says."
    ) in text_of(client)


def test_the_page_is_there_before_the_first_tick(running: FakeRunning, client: Client) -> None:
    running.views.clear()
    running.standing.clear()
    assert "Alarms None." in text_of(client)


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
    assert "<script>" not in page


def test_the_start_leads_to_every_page(client: Client) -> None:
    page = client.get("/").text
    for address in ("/round", "/spray", "/week", "/line"):
        assert page.count(f'href="{address}"') == 2  # in the navigation, and with its question


@pytest.mark.parametrize("path", ["/docs", "/redoc", "/docs/oauth2-redirect"])
def test_documentation_pages_that_load_from_elsewhere_are_off(client: Client, path: str) -> None:
    assert client.get(path).status_code == 404


def test_a_shop_without_sensors_is_not_told_that_they_answer(running: FakeRunning) -> None:
    assert "every sensor answers" in client_of(running).get("/").text
    running.site = replace(running.site, channels={})
    text = client_of(running).get("/").text
    assert "every sensor answers" not in text
    assert "the site file names no sensor, so all of this rests on defaults" in text


def test_an_alarm_that_is_put_off_before_it_was_raised_has_a_name(running: FakeRunning) -> None:
    normal = running.standing["tank-drain-due"]
    until_us = NOW_US + HOUR_US
    running.standing[normal.id] = replace(
        normal, state="shelved", text="", shelved_until_us=until_us
    )
    text = text_of(client_of(running))
    assert "tank: drain due Medium priority" in text
    assert "put off until Tue 1 Dec, 10:00" in text
