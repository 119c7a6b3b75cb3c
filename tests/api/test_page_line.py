"""The line page: every station, where each value comes from, and parts that were changed."""

from __future__ import annotations

import re
from dataclasses import replace

import pytest

from api.pages.forms import TOKEN
from daemon.journal import Service
from daemon.moisture.description import Fixed
from daemon.views import Interval, StationValue
from tests.api.client import Client
from tests.api.fake import FakeRunning, a_site
from tests.api.test_stations import INTAKE

TANK = replace(
    INTAKE,
    station="tank",
    kind="receiver",
    after="intake",
    temperature=StationValue(Interval(295.15, 300.15, 305.15), "default", "like intake + 20 K"),
    pressure=StationValue(
        Interval(8.0e5, 8.1e5, 8.2e5), "rule", "sensor tank-gauge.pressure is not heard since noon"
    ),
    relative_humidity=None,
    dew_point_k=Interval(295.15, 300.15, 305.15),
    saturated=1.0,
    trap=True,
)
ORIGIN = {"origin": "http://127.0.0.1:8080", "host": "127.0.0.1:8080"}


@pytest.fixture(autouse=True)
def stations(running: FakeRunning) -> None:
    running.shown_stations.extend([INTAKE, TANK])


def shown(client: Client) -> str:
    response = client.get("/line")
    assert response.status_code == 200
    return re.sub(r"\s+", " ", response.text.replace("\N{NO-BREAK SPACE}", " "))


def test_each_station_says_what_its_values_come_from(client: Client) -> None:
    page = shown(client)
    assert "By sensor intake-air.temperature." in page
    assert "Nobody said; taken to be 1013 hPa abs." in page
    assert "By a rule: sensor tank-gauge.pressure is not heard since noon." in page
    assert "20 \N{DEGREE SIGN}C" in page
    assert "degC" not in page
    assert page.index('id="at-intake"') < page.index('id="at-tank"')


def test_a_station_with_a_stand_in_stands_out(client: Client) -> None:
    page = shown(client)
    assert re.search(r'class="card warn"> <h2 class="tight" id="at-tank"', page)
    assert re.search(r'class="card"> <h2 class="tight" id="at-intake"', page)


def test_the_air_s_state_is_said_in_words(client: Client) -> None:
    page = shown(client)
    assert "The air has room for more." in page  # the intake's
    assert "The air can hold no more: what cools it drops out as water." in page
    assert "about 410 ml" in page  # what the tank's trap holds


def test_a_us_shop_reads_its_own_units(running: FakeRunning, client: Client) -> None:
    running.site = a_site(units="us")
    page = shown(client)
    assert "68 \N{DEGREE SIGN}F" in page
    assert "102.8 psi" in page  # 8.1 - 1.013 bar
    assert "29.91 inHg" in page


def test_before_the_first_tick_the_page_says_so(running: FakeRunning, client: Client) -> None:
    running.shown_stations.clear()
    assert "No estimate yet" in shown(client)


def test_a_changed_part_is_noted_without_script(running: FakeRunning, client: Client) -> None:
    answer = client.post(
        "/line/intake/service",
        data={"token": TOKEN, "what": "sensor replaced", "sensor": "intake-air", "by": "AM"},
        headers=ORIGIN,
    )
    assert answer.status_code == 200
    assert "Noted: sensor replaced." in answer.text
    assert running.journal[-1].body == Service("sensor replaced", "intake-air", "AM")


def test_a_page_of_before_a_restart_notes_nothing(running: FakeRunning, client: Client) -> None:
    answer = client.post(
        "/line/intake/service",
        data={"token": "old", "what": "compressor serviced"},
        headers=ORIGIN,
    )
    assert "out of date" in answer.text
    assert not running.journal


@pytest.mark.parametrize(
    ("station", "what", "status"),
    [("tank", "element changed", 422), ("attic", "element changed", 404), ("tank", "", 422)],
)
def test_what_cannot_be_said_of_a_station_is_refused(
    running: FakeRunning, client: Client, station: str, what: str, status: int
) -> None:
    answer = client.post(
        f"/line/{station}/service", data={"token": TOKEN, "what": what}, headers=ORIGIN
    )
    assert answer.status_code == status
    assert not running.journal


def test_only_parts_that_are_there_are_offered(client: Client) -> None:
    page = shown(client)
    tank = page[page.index('id="at-tank"') :]
    assert "element changed" not in tank  # a tank has none
    assert '<option value="tank-gauge">' in tank
    assert "compressor serviced" in page[: page.index('id="at-tank"')]


def test_a_bath_s_new_ice_can_be_noted(running: FakeRunning, client: Client) -> None:
    line = running.site.line
    iced = [replace(s, ice=Fixed(5.0, 0.5)) if s.id == "tank" else s for s in line.stations]
    running.site = replace(running.site, line=replace(line, stations=tuple(iced)))
    page = shown(client)
    tank = page[page.index('id="at-tank"') :]
    assert re.search(
        r'name="what" value="element changed"[^>]*> element changed: new ice</label>', tank
    )
