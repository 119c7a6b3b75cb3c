"""Confirming a surprising drain, and parts that were changed."""

from __future__ import annotations

from dataclasses import replace

import pytest

from daemon import accept
from daemon.errors import JournalError
from daemon.journal import Confirm, SaltCheck, Service, Serviced
from daemon.moisture.description import Fixed, Share, Trap
from daemon.site.types import Site
from tests.api.client import Client, problem_of
from tests.api.fake import NOW_US, FakeRunning, tank_view


def with_more_stations(site: Site) -> Site:
    """An invented filter whose drain empties itself, and a coil in a bath of ice."""
    *first, regulator = site.line.stations
    bowl = replace(
        first[-1], id="bowl", kind="coalescer", after="riser",
        trap=Trap("float", Fixed(0.2, 0.02), 0.1, Share(0.97, 0.03)),
    )  # fmt: skip
    coil = replace(first[-1], id="ice-coil", kind="cooler", after="bowl", ice=Fixed(5.0, 0.5))
    line = replace(site.line, stations=(*first, bowl, coil, replace(regulator, after="ice-coil")))
    return replace(site, line=line)


def test_a_volume_that_surprised_nobody_is_not_confirmed(
    running: FakeRunning, client: Client
) -> None:
    running.views[:] = [tank_view(), replace(tank_view(), trap="riser", questioned_kg=0.2)]
    answer = client.post("/api/v1/traps/tank/confirm", json={"by": "AM"})
    problem = problem_of(answer, 409, "nothing-to-confirm")
    assert "no measured volume of tank waits" in problem["detail"]
    assert not running.journal


def test_a_surprising_volume_is_confirmed(running: FakeRunning, client: Client) -> None:
    running.views[:] = [replace(tank_view(), questioned_kg=3.8)]
    response = client.post("/api/v1/traps/tank/confirm", json={"by": "AM"})
    assert response.status_code == 201
    assert response.json() == {"seq": 1, "at": "2026-12-01T09:00:00Z"}
    assert running.journal[0].body == Confirm("tank", "AM")


@pytest.mark.parametrize(
    ("path", "body", "entry"),
    [
        ("bowl", {"what": "element changed"}, Service("element changed", "bowl")),
        ("ice-coil", {"what": "element changed"}, Service("element changed", "ice-coil")),
        ("intake", {"what": "compressor serviced"}, Service("compressor serviced", "intake")),
        (
            "intake",
            {"what": "sensor replaced", "sensor": "intake-air", "by": "AM"},
            Service("sensor replaced", "intake-air", "AM"),
        ),
        # it speaks of no station
        (
            "tank",
            {"what": "sensor replaced", "sensor": "motor"},
            Service("sensor replaced", "motor"),
        ),
        ("bowl", {"what": "drain seen working"}, Service("drain seen working", "bowl")),
    ],
)
def test_a_changed_part_is_recorded(
    running: FakeRunning, client: Client, path: str, body: dict[str, str], entry: Service
) -> None:
    running.site = with_more_stations(running.site)
    accept.check(running.site, entry, NOW_US, NOW_US, 0)
    response = client.post(f"/api/v1/stations/{path}/service", json=body)
    assert response.status_code == 201
    assert running.journal[0].body == entry


@pytest.mark.parametrize(
    ("path", "what", "sensor", "words"),
    [
        ("tank", "element changed", None,
         'tank is a tank, and has no element, cartridge or ice to change. It takes "sensor '
         'replaced"'),
        ("riser", "element changed", None,
         "riser is a pipe with a drip leg, and has no element, cartridge or ice to change. "
         "It takes no such entry"),
        ("intake", "element changed", None,
         "intake is where the compressor breathes, and has no element, cartridge or ice to change. "
         'It takes "compressor serviced" and "sensor replaced"'),
        ("tank", "drain seen working", None,
         "tank is a tank, and its drain does not empty itself: record a drain when you open it. "
         'It takes "sensor replaced"'),
        ("gun-regulator", "drain seen working", None,
         "gun-regulator is a regulator, and has no drain. It takes no such entry"),
        ("bowl", "compressor serviced", None,
         "bowl is a coalescing filter, and not where the compressor stands: say it of intake. "
         'It takes "element changed" and "drain seen working"'),
        ("intake", "sensor replaced", "tank-gauge",
         "intake is where the compressor breathes, and tank-gauge does not speak of it (of tank it "
         'does). It takes "compressor serviced" and "sensor replaced"'),
        ("intake", "sensor replaced", "attic",
         'no sensor has the id "attic" (known: intake-air, tank-gauge, motor)'),
        ("intake", "sensor replaced", None,
         "say which sensor (known: intake-air, tank-gauge, motor)"),
    ],
)  # fmt: skip
def test_what_a_part_cannot_have_is_refused_with_what_it_takes(
    running: FakeRunning,
    client: Client,
    path: str,
    what: Serviced,
    sensor: str | None,
    words: str,
) -> None:
    running.site = with_more_stations(running.site)
    body = {"what": what, "sensor": sensor} if sensor else {"what": what}
    response = client.post(f"/api/v1/stations/{path}/service", json=body)
    problem = problem_of(response, 422, "invalid-request")
    assert problem["detail"] == f"body.what = {what}: {words}. Correct it and send it again."
    assert not running.journal


def test_the_journal_itself_takes_no_entry_that_a_part_cannot_have(running: FakeRunning) -> None:
    with pytest.raises(JournalError, match='"element changed" cannot be said of tank: tank is a'):
        accept.check(running.site, Service("element changed", "tank"), NOW_US, NOW_US, 0)
    with pytest.raises(JournalError, match="say it of intake"):
        accept.check(running.site, Service("compressor serviced", "tank"), NOW_US, NOW_US, 0)
    accept.check(running.site, Service("compressor serviced"), NOW_US, NOW_US, 0)


def test_a_salt_check_is_recorded(running: FakeRunning, client: Client) -> None:
    said = {"reads_percent": 77.1, "true_percent": 75.4, "by": "AM"}
    response = client.post("/api/v1/sensors/intake-air/salt-checks", json=said)
    assert response.status_code == 201
    check = running.journal[0].body
    assert isinstance(check, SaltCheck)
    assert (check.sensor, check.by) == ("intake-air", "AM")
    assert check.reads == pytest.approx(0.771)
    assert check.true == pytest.approx(0.754)


@pytest.mark.parametrize(
    ("path", "body", "status", "words"),
    [
        (
            "sensors/motor/salt-checks",
            {"reads_percent": 77.1, "true_percent": 75.4},
            404,
            "intake-air",
        ),
        ("sensors/intake-air/salt-checks", {"reads_percent": 771, "true_percent": 75}, 422, "100"),
        ("traps/tnak/confirm", {}, 404, "those of this site are: tank, riser"),
        ("stations/nowhere/service", {"what": "element changed"}, 404, "intake, tank"),
        ("stations/tank/service", {"what": "painted blue"}, 422, "element changed"),
        ("stations/tank/service", {"what": "element changed", "price": 3}, 422, "price"),
    ],
)
def test_what_cannot_be_is_refused_in_words(
    running: FakeRunning,
    client: Client,
    path: str,
    body: dict[str, object],
    status: int,
    words: str,
) -> None:
    response = client.post(f"/api/v1/{path}", json=body)
    assert response.status_code == status
    assert words in response.text
    assert not running.journal


def test_a_part_changed_yesterday_is_recorded_once_and_in_its_time(
    running: FakeRunning, client: Client
) -> None:
    body = {"what": "compressor serviced", "at": "2026-11-30T17:00:00Z", "by": "AM", "key": "v1"}
    first = client.post("/api/v1/stations/intake/service", json=body)
    assert (first.status_code, first.json()["at"]) == (201, "2026-11-30T17:00:00Z")
    again = client.post("/api/v1/stations/intake/service", json=body)
    assert (again.status_code, again.json()) == (200, first.json())
    assert len(running.journal) == 1


@pytest.mark.parametrize(
    ("at", "words"), [("noon", "noon"), ("2026-12-02T09:00:00Z", "ahead of this machine's clock")]
)
def test_a_part_is_not_changed_at_a_time_that_cannot_be(
    running: FakeRunning, client: Client, at: str, words: str
) -> None:
    body = {"what": "compressor serviced", "at": at}
    response = client.post("/api/v1/stations/intake/service", json=body)
    assert response.status_code == 422
    assert words in response.text
    assert running.journal == []
