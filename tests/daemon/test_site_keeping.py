"""`[store]` in a site file. All values are invented."""

from __future__ import annotations

import pytest

from daemon.errors import SiteError
from daemon.site.keeping import kept_words
from daemon.site.reader import parse_site
from daemon.site.types import Keeping

DAY_S = 86400.0


@pytest.mark.parametrize(
    ("written", "seconds", "words"),
    [
        ('"1 year"', 365.25 * DAY_S, "1 year"),
        ('"5 years"', 5 * 365.25 * DAY_S, "5 years"),
        ('"90 days"', 90 * DAY_S, "90 days"),
        ('"for ever"', None, "for ever"),
    ],
)
def test_how_long_readings_are_kept_is_read(
    written: str, seconds: float | None, words: str
) -> None:
    site = parse_site(f"[store]\nkeep_readings = {written}\n", "shop.toml")
    assert site.keeping == Keeping(seconds)
    assert kept_words(site.keeping) == words
    assert "keep_readings" not in {each.key for each in site.defaults}


def test_two_years_are_kept_when_nobody_says() -> None:
    site = parse_site("", "shop.toml")
    assert site.keeping == Keeping(2 * 365.25 * DAY_S)
    (told,) = [each for each in site.defaults if each.table == "store"]
    assert (told.key, told.value) == ("keep_readings", "2 years")


@pytest.mark.parametrize(
    ("text", "place", "words"),
    [
        ('[store]\nkeep_readings = "1 day"', "[store] keep_readings", 'from "30 days"'),
        ('[store]\nkeep_readings = "500 years"', "[store] keep_readings", '"for ever"'),
        ("[store]\nkeep_readings = 2", "[store] keep_readings", "unit"),
        ('[store]\nkeep_reading = "1 year"', "[store]", 'did you mean "keep_readings"?'),
        ('[store]\nkeep_drains = "1 year"', "[store]", "keep_readings"),
        ("store = 3", "[store] = 3", "write a table [store]"),
    ],
)
def test_a_mistake_is_told_with_its_place_and_what_to_write(
    text: str, place: str, words: str
) -> None:
    with pytest.raises(SiteError) as error:
        parse_site(text, "shop.toml")
    (problem,) = error.value.problems
    assert str(problem).startswith(place)
    assert words in str(problem)
