"""A shop of twelve traps, with long names: the round stays light, short on paper, and complete."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from daemon.journal import Drain
from tests.browser.person import PHONE, Person
from tests.browser.shop import METRIC, Shop
from tests.browser.test_feel import LARGEST
from tests.browser.test_round import pages_of

LEGS = [f"drop-behind-the-second-workbench-{number:02}" for number in range(9)]
STATIONS = "".join(
    f'[[station]]\nid = "{name}"\nkind = "pipe"\nafter = "riser"\n'
    'trap = { capacity = "300 ml", drain_at = "150 ml" }\n\n'
    for name in LEGS
)
MANY = METRIC.replace("[[outlet]]", f"{STATIONS}[[outlet]]", 1)


@pytest.fixture
def shop(tmp_path: Path) -> Iterator[Shop]:
    made = Shop(tmp_path, MANY)
    assert len(made.site.traps) == 12
    yield made
    made.close()


def test_the_page_stays_light_and_fits(person: Person) -> None:
    person.hold(PHONE)
    person.open("/round")
    loaded = person.browser.execute_script(
        "return ['resource', 'navigation'].flatMap(kind => performance.getEntriesByType(kind))"
        ".reduce((sum, entry) => sum + entry.decodedBodySize, 0)"
    )
    assert 20_000 < loaded < LARGEST
    assert not person.is_wider_than_the_screen()
    assert person.serious_faults() == []


def test_a_trap_that_may_stay_gets_its_form_when_asked(person: Person, shop: Shop) -> None:
    person.hold(PHONE)
    person.open("/round")
    assert not person.sees(f"#drained-{LEGS[3]}")
    person.taps(f"#anyway-{LEGS[3]}")
    person.waits_for(lambda: person.sees(f"#drained-{LEGS[3]}"))
    person.types(f"#volume-{LEGS[3]}", "1")
    person.taps(f"#drained-{LEGS[3]}")
    person.waits_to_read(f"#said-{LEGS[3]}", "you measured 1 ml")
    assert [each.body for each in shop.entries()] == [Drain(LEGS[3], "emptied", 0.001)]
    person.waits_for(lambda: person.sees(f"#undo-button-{LEGS[3]}"))


def test_it_prints_on_one_sheet(person: Person) -> None:
    person.open("/round")
    options = {"paperWidth": 8.27, "paperHeight": 11.69}  # A4, in
    assert pages_of(person.browser.execute_cdp_cmd("Page.printToPDF", options)["data"]) == 1
