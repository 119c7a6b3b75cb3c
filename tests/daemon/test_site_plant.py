"""Limits of the plant, costs and reminders in a site file. All values are invented."""

from __future__ import annotations

import pytest

from daemon.errors import SiteError
from daemon.moisture.description import Fixed
from daemon.site.reader import parse_site
from daemon.site.types import REMINDER_TIMES, Costs, Limits, Site


def site(text: str) -> Site:
    return parse_site(text, "shop.toml")


def test_what_nobody_says_is_a_default_and_known_as_one() -> None:
    found = site("")
    assert found.limits == Limits(0.75, 0.10)
    assert found.costs == Costs(None, "", Fixed(6.5, 0.25 * 6.5))
    assert found.reminders == REMINDER_TIMES
    told = {(each.table, each.key): each.value for each in found.defaults}
    assert told["compressor", "duty_limit"] == "75 %"
    assert told["compressor", "leak_limit"] == "10 %"
    assert told["costs", "specific_power"] == "6.5 kW for a m3/min, give or take 25 %"
    assert told["reminders", "at"] == '"shift start", "break", "shift end"'


def test_limits_costs_and_reminders_are_read() -> None:
    found = site(
        '[compressor]\nduty_limit = "60 %"\nleak_limit = 0.2\n'
        '[costs]\nkwh_price = 0.31\ncurrency = "EUR"\n'
        'specific_power = { value = 8, give_or_take = "10 %" }\n'
        '[reminders]\nat = ["shift end", "break"]\n'
    )
    assert found.limits == Limits(0.6, 0.2)
    assert found.costs == Costs(0.31, "EUR", Fixed(8.0, 0.8))
    assert found.reminders == ("break", "shift end")
    keys = {each.key for each in found.defaults}
    assert not keys & {"duty_limit", "leak_limit", "specific_power", "at"}


def test_reminders_can_be_none_or_one() -> None:
    assert site("[reminders]\nat = []\n").reminders == ()
    assert site('[reminders]\nat = "shift end"\n').reminders == ("shift end",)


@pytest.mark.parametrize(
    ("text", "place", "words"),
    [
        ('[compressor]\nduty_limit = "2 %"', "[compressor] duty_limit", "from 5 to 100 %"),
        ("[compressor]\nleak_limit = 3", "[compressor] leak_limit", "from 1 to 100 %"),
        ("[costs]\nkwh_price = -1", "[costs] kwh_price", "what one costs, like 0.30"),
        ('[costs]\nkwh_price = "0.3 EUR"', "[costs] kwh_price", "a number without quotes"),
        ("[costs]\nkwh_price = true", "[costs] kwh_price", "a number without quotes"),
        ('[costs]\ncurrency = "EUR"', "[costs] currency", "write kwh_price as well"),
        (
            '[costs]\nkwh_price = 1\ncurrency = "shillings and pence"',
            "[costs] currency",
            'write it short, like "EUR"',
        ),
        ("[costs]\nspecific_power = 0.1", "[costs] specific_power", "from 1 to 50, like 6.5"),
        (
            '[costs]\nspecific_power = { give_or_take = "5 %" }',
            "[costs] specific_power",
            "says no value",
        ),
        (
            "[costs]\nspecific_power = { value = 7, give_or_take = 2 }",
            "[costs] specific_power.give_or_take",
            "a share of the value",
        ),
        ("[costs]\nprice = 0.3", "[costs] price", 'did you mean "kwh_price"?'),
        ('[reminders]\nat = ["lunch"]', "[reminders] at", "is no turn of the day; known: shift"),
        ("[reminders]\nat = 3", "[reminders] at", 'must be a list, like ["shift start"'),
        ("[reminder]\nat = []", "[reminder]", "did you mean [reminders]?"),
    ],
)
def test_a_mistake_is_told_with_its_place_and_what_to_write(
    text: str, place: str, words: str
) -> None:
    with pytest.raises(SiteError) as error:
        site(text)
    (problem,) = error.value.problems
    assert str(problem).startswith(place)
    assert words in str(problem)
