"""What holds for every page, its style and its script."""

from __future__ import annotations

import re

import pytest

from api.pages import frame
from api.pages.assets import ASSETS
from tests.api.client import Client

FILES = sorted(ASSETS)
PAGES = ("/", "/round", "/spray", "/spray?outlet=spray-gun&surface=18.5")


@pytest.mark.parametrize("path", [*PAGES, *(f"/static/{name}" for name in FILES)])
def test_nothing_is_fetched_from_another_host(client: Client, path: str) -> None:
    text = client.get(path).text.replace("http://www.w3.org/2000/svg", "")  # a name, not an address
    assert not re.search(r"https?:|url\(|@import|[\"']//", text)


def test_a_page_may_load_only_its_own_files(client: Client) -> None:
    policy = client.get("/").headers["content-security-policy"]
    kinds = dict(part.strip().split(" ", 1) for part in policy.split(";"))
    assert kinds.pop("default-src") == "'none'"
    assert set(kinds.values()) == {"'self'", "'none'"}


@pytest.mark.parametrize("path", PAGES)
def test_no_page_has_script_or_style_in_it_that_the_policy_refuses(
    client: Client, path: str
) -> None:
    page = client.get(path).text
    assert re.findall(r"<script[^>]*>", page) == ['<script type="module" src="/static/page.js">']
    assert "style=" not in page
    assert not re.search(r"\son\w+=", page)


@pytest.mark.parametrize("name", FILES)
def test_a_file_that_has_not_changed_is_not_sent_again(client: Client, name: str) -> None:
    first = client.get(f"/static/{name}")
    again = client.get(f"/static/{name}", headers={"if-none-match": first.headers["etag"]})
    assert (first.status_code, again.status_code, again.content) == (200, 304, b"")
    assert first.headers["cache-control"] == again.headers["cache-control"] == "no-cache"


def test_an_update_beside_a_running_daemon_does_not_reach_its_pages(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """New templates with the old program would be a page that fails."""
    made = frame._environment()

    def refuse(*arguments: object, **more: object) -> object:
        raise AssertionError(f"{arguments[0]!r} was opened")

    monkeypatch.setattr("builtins.open", refuse)
    for path in frame.TEMPLATES.iterdir():
        assert made.get_template(path.name).name == path.name


def test_the_style_is_for_light_and_dark_and_for_paper(client: Client) -> None:
    assert 'href="/static/style.css"' in client.get("/").text
    style = client.get("/static/style.css")
    assert style.headers["content-type"].startswith("text/css")
    assert "prefers-color-scheme: dark" in style.text
    assert "@media print" in style.text


def test_a_browser_is_told_of_a_problem_on_a_page(client: Client) -> None:
    answer = client.get("/nowhere", headers={"accept": "text/html,*/*;q=0.8"})
    assert answer.status_code == 404
    assert answer.headers["content-type"].startswith("text/html")
    assert "Nothing at this address" in answer.text


def test_a_program_is_told_of_a_problem_in_json(client: Client) -> None:
    assert client.get("/nowhere").headers["content-type"] == "application/problem+json"
    answer = client.get("/api/v1/nowhere", headers={"accept": "text/html"})
    assert answer.headers["content-type"] == "application/problem+json"


@pytest.mark.parametrize("path", PAGES)
def test_a_page_has_no_id_twice_and_a_label_for_every_field(client: Client, path: str) -> None:
    page = client.get(path).text
    ids = re.findall(r'\sid="([^"]+)"', page)
    assert len(ids) == len(set(ids))
    labelled = set(re.findall(r'<label for="([^"]+)"', page))
    fields = re.findall(r"<(?:input|select)\b[^>]*>", page)
    shown = [field for field in fields if 'type="hidden"' not in field]
    for field in shown:
        found = re.search(r'\sid="([^"]+)"', field)
        assert found is not None, field
        assert found[1] in labelled


@pytest.mark.parametrize("path", PAGES)
def test_a_page_with_its_style_and_script_is_small(client: Client, path: str) -> None:
    files = ("style.css", "page.js", "send.js")
    size = len(client.get(path).content)
    size += sum(len(client.get(f"/static/{name}").content) for name in files)
    assert size < 60_000
