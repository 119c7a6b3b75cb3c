"""Keys at the door. The attacker meant is on the shop's network: he has no key, guesses, or has one
that was revoked or was made for less. Challenges after RFC 6750, section 3; cookies after RFC 6265.
"""

from __future__ import annotations

import re
from dataclasses import replace
from typing import Any

import pytest

from api.app import create_app
from api.keys import MOST_ADDRESSES, WITHIN_S, WRONG_AT_MOST, Tries
from api.pages.forms import TOKEN
from daemon.clock import HOUR_US, MINUTE_US
from daemon.keys import Scope, make
from tests.api.client import Client, client_of, problem_of
from tests.api.fake import NOW_US, FakeRunning, StillClock, a_site

TRAPS, DRAINS = "/api/v1/traps", "/api/v1/traps/tank/drains"
SERVICE, PAIRING = "/api/v1/stations/intake/service", "/api/v1/pairing"
HOST = "192.168.1.20:8080"


@pytest.fixture
def running() -> FakeRunning:
    return FakeRunning(site=a_site("0.0.0.0"))


@pytest.fixture
def client(running: FakeRunning) -> Client:
    return client_of(running, HOST)


def a_key(running: FakeRunning, *may: Scope, name: str = "booth tablet") -> str:
    key, digest, text = make(name, may or ("read", "record"), NOW_US - HOUR_US)
    running.kept_keys.keys[key.id] = (key, digest)
    return text


def revoke(running: FakeRunning, text: str) -> None:
    key, digest = running.kept_keys.keys[text.partition(".")[0]]
    running.kept_keys.keys[key.id] = (replace(key, revoked_us=NOW_US), digest)


def bearing(text: str) -> dict[str, str]:
    return {"authorization": f"Bearer {text}"}


def with_cookie(text: str) -> dict[str, str]:
    return {"cookie": f"other=1; dripleg-alder-yard={text}"}


# ---- who gets in ----


def test_a_key_reads_and_writes(running: FakeRunning, client: Client) -> None:
    headers = bearing(a_key(running))
    assert client.get(TRAPS, headers=headers).status_code == 200
    assert client.post(DRAINS, json={}, headers=headers).status_code == 201
    assert len(running.journal) == 1


def test_a_request_over_loopback_needs_a_key_too_where_others_can_come(
    running: FakeRunning,
) -> None:
    near = client_of(running, "127.0.0.1:8080")  # the test's client comes from 127.0.0.1
    problem_of(near.get(TRAPS), 401, "keys-needed")
    problem_of(near.post(DRAINS, json={}), 401, "keys-needed")


def test_an_api_for_this_machine_alone_asks_nobody() -> None:
    running = FakeRunning()
    client = client_of(running)
    assert client.get(TRAPS, headers=bearing("nonsense")).status_code == 200
    assert client.post(DRAINS, json={}).status_code == 201
    assert client.get(PAIRING).json()["may"] == ["read", "record", "service"]


def test_no_key_is_a_challenge(client: Client) -> None:
    answer = client.get(TRAPS)
    problem = problem_of(answer, 401, "keys-needed")
    assert answer.headers["www-authenticate"] == 'Bearer realm="dripleg"'
    assert "Authorization: Bearer <key>" in problem["detail"]


@pytest.mark.parametrize(
    "wrong",
    ["nonsense", "k7f3q2mz.", "k7f3q2mz.AAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAA", ".", "x" * 5000, "a.é"],
)
def test_what_nobody_made_opens_nothing(running: FakeRunning, client: Client, wrong: str) -> None:
    headers = {"authorization": f"Bearer {wrong}".encode("latin-1")}
    answer = client.request("POST", DRAINS, content=b"{}", headers={**headers, **AS_JSON})
    problem_of(answer, 401, "key-unknown")
    assert answer.headers["www-authenticate"].endswith('error="invalid_token"')
    assert running.journal == []


AS_JSON: dict[str, Any] = {"content-type": "application/json"}


def test_the_right_id_with_another_secret_opens_nothing(
    running: FakeRunning, client: Client
) -> None:
    mine, other = a_key(running), a_key(running)
    mixed = f"{mine.partition('.')[0]}.{other.partition('.')[2]}"
    problem_of(client.get(TRAPS, headers=bearing(mixed)), 401, "key-unknown")


def test_a_revoked_key_is_told_so_at_the_next_request(running: FakeRunning, client: Client) -> None:
    text = a_key(running)
    assert client.get(TRAPS, headers=bearing(text)).status_code == 200
    revoke(running, text)
    problem = problem_of(client.get(TRAPS, headers=bearing(text)), 401, "key-unknown")
    assert 'for "booth tablet", was revoked at 2026-12-01T09:00:00Z' in problem["detail"]


@pytest.mark.parametrize(
    ("may", "path", "body"),
    [
        (("read",), DRAINS, {}),
        (("read", "service"), DRAINS, {}),
        (("read", "record"), SERVICE, {"what": "compressor serviced"}),
        (("read",), "/api/v1/alarms/riser-drain-due/acknowledge", {}),
    ],
)
def test_a_key_does_only_what_it_was_made_for(
    running: FakeRunning, client: Client, may: tuple[Scope, ...], path: str, body: dict[str, str]
) -> None:
    answer = client.post(path, json=body, headers=bearing(a_key(running, *may)))
    problem = problem_of(answer, 403, "key-may-not")
    assert f"may {', '.join(sorted(may))}; this needs" in problem["detail"]
    assert running.journal == []


def test_a_key_for_service_records_service(running: FakeRunning, client: Client) -> None:
    headers = bearing(a_key(running, "service"))
    body = {"what": "compressor serviced", "by": "AM"}
    assert client.post(SERVICE, json=body, headers=headers).status_code == 201
    problem_of(client.get(TRAPS, headers=headers), 403, "key-may-not")


def test_reading_can_be_opened_and_writing_cannot() -> None:
    running = FakeRunning(site=a_site("0.0.0.0", open_reading=True))
    client = client_of(running, HOST)
    assert client.get(TRAPS).status_code == 200
    assert client.get("/").status_code == 200
    problem_of(client.post(DRAINS, json={}), 401, "keys-needed")
    # a phone whose key was revoked may still see what everybody sees; a program is told
    text = a_key(running)
    revoke(running, text)
    assert client.get(TRAPS, headers=with_cookie(text)).status_code == 200
    problem_of(client.get(TRAPS, headers=bearing(text)), 401, "key-unknown")
    problem_of(client.post(DRAINS, json={}, headers=with_cookie(text)), 401, "key-unknown")


def test_nothing_of_the_shop_is_seen_without_a_key(client: Client) -> None:
    for path in ("/", "/api/v1/health", "/api/v1/site", "/nope", "/round", "/api/v1/x.css"):
        assert client.get(path).status_code == 401, path
        assert client.request("HEAD", path).status_code == 401, path
    for path in ("/static/style.css", "/problems/keys-needed", "/api/v1/openapi.json", "/pair"):
        assert client.get(path).status_code == 200, path


def test_a_browser_without_a_key_gets_a_page(client: Client) -> None:
    answer = client.get("/", headers={"accept": "text/html"})
    assert answer.status_code == 401
    assert answer.headers["content-type"].startswith("text/html")
    assert "dripleg key SITE make" in answer.text
    assert answer.headers["www-authenticate"]


# ---- guessing ----


def test_after_ten_wrong_keys_an_address_waits(running: FakeRunning, client: Client) -> None:
    text = a_key(running)
    for _ in range(WRONG_AT_MOST):
        problem_of(client.get(TRAPS, headers=bearing("k7f3q2mz.guess")), 401, "key-unknown")
    answer = client.get(TRAPS, headers=bearing(text))
    problem_of(answer, 429, "too-many-tries")
    assert 0 < int(answer.headers["retry-after"]) <= WITHIN_S + 1
    problem_of(client.post(PAIRING, json={"key": text}), 429, "too-many-tries")
    running.clock.time_us += MINUTE_US
    assert client.get(TRAPS, headers=bearing(text)).status_code == 200


def test_another_address_need_not_wait_and_a_whole_ipv6_net_is_one() -> None:
    clock = StillClock()
    tries = Tries(clock)
    for number in range(WRONG_AT_MOST):
        tries.wrong("192.168.1.66")
        tries.wrong(f"2001:db8::{number:x}")
    assert tries.wait_s("192.168.1.66") == WITHIN_S
    assert tries.wait_s("192.168.1.67") == 0.0
    assert tries.wait_s("2001:db8::ffff") == WITHIN_S
    assert tries.wait_s("2001:db8:0:1::1") == 0.0
    assert tries.wait_s("::ffff:192.168.1.66") == WITHIN_S  # RFC 4291: the same host
    assert tries.wait_s("::ffff:192.168.1.67") == 0.0
    clock.time_us += round(WITHIN_S * 1e6)
    assert tries.wait_s("192.168.1.66") == 0.0


def test_who_comes_from_very_many_addresses_fills_no_memory() -> None:
    tries = Tries(StillClock())
    for number in range(MOST_ADDRESSES + 50):
        tries.wrong(f"10.0.{number // 256}.{number % 256}")
    assert len(tries._wrong) == MOST_ADDRESSES


# ---- the use ----


def test_the_last_use_is_kept_to_the_hour_and_written_once_an_hour(
    running: FakeRunning, client: Client
) -> None:
    headers = bearing(a_key(running))
    for _ in range(5):
        client.get(TRAPS, headers=headers)
    ((key, _),) = running.kept_keys.keys.values()
    assert key.used_us == NOW_US
    assert running.kept_keys.writes == 1
    running.clock.time_us += HOUR_US + 7 * MINUTE_US
    client.get(TRAPS, headers=headers)
    ((key, _),) = running.kept_keys.keys.values()
    assert key.used_us == NOW_US + HOUR_US
    assert running.kept_keys.writes == 2


# ---- phones ----


def test_a_phone_is_paired_by_a_cookie_that_no_script_and_no_other_site_can_use(
    running: FakeRunning, client: Client
) -> None:
    text = a_key(running)
    answer = client.post(PAIRING, json={"key": text})
    assert answer.json() == {
        "asked": True,
        "open_reading": False,
        "id": text.partition(".")[0],
        "name": "booth tablet",
        "may": ["read", "record"],
    }
    name_value, *attributes = answer.headers["set-cookie"].split("; ")
    assert name_value == f"dripleg-alder-yard={text}"
    assert {"HttpOnly", "SameSite=strict", "Path=/"} <= set(attributes)
    headers = {"cookie": name_value}
    assert client.get("/", headers=headers).status_code == 200
    assert client.post(DRAINS, json={}, headers=headers).status_code == 201
    assert client.get(PAIRING, headers=headers).json()["name"] == "booth tablet"


def test_a_wrong_key_pairs_nothing(client: Client) -> None:
    answer = client.post(PAIRING, json={"key": "k7f3q2mz.wrong"})
    problem_of(answer, 401, "key-unknown")
    assert "set-cookie" not in answer.headers


def test_a_cookie_does_not_help_a_page_from_elsewhere(running: FakeRunning, client: Client) -> None:
    headers = {**with_cookie(a_key(running)), "origin": "http://192.168.1.20:9000"}
    problem_of(client.post(DRAINS, json={}, headers=headers), 403, "cross-site-write")
    assert running.journal == []


def test_a_phone_can_forget_its_key(client: Client) -> None:
    answer = client.post(f"{PAIRING}/forget", json={})
    assert answer.status_code == 204
    cookie = answer.headers["set-cookie"]
    assert cookie.startswith('dripleg-alder-yard=""')
    assert "Max-Age=0" in cookie


def test_who_asks_without_a_key_may_nothing(client: Client) -> None:
    assert client.get(PAIRING).json() == {
        "asked": True,
        "open_reading": False,
        "id": None,
        "name": None,
        "may": [],
    }


def test_a_phone_whose_key_was_revoked_is_told_once_and_can_be_paired_anew(
    running: FakeRunning, client: Client
) -> None:
    text = a_key(running)
    revoke(running, text)
    for _ in range(2 * WRONG_AT_MOST):  # nobody guesses here: pages and their parts are asked for
        answer = client.get("/round", headers=with_cookie(text))
        problem_of(answer, 401, "key-unknown")
        assert answer.headers["set-cookie"].startswith('dripleg-alder-yard=""')
        assert client.get("/static/style.css", headers=with_cookie("a.b")).status_code == 200
    assert client.post(PAIRING, json={"key": a_key(running)}).status_code == 200


# ---- the pages' own forms ----


def test_a_form_asks_for_the_same_as_the_api(running: FakeRunning, client: Client) -> None:
    """Without script a browser sends forms: what a key may not do, it may not do that way."""
    form = {
        **with_cookie(a_key(running)),
        "origin": f"http://{HOST}",
        "content-type": "application/x-www-form-urlencoded",
    }
    fields = f"token={TOKEN}&what=element+changed&by=AM"
    answer = client.post("/line/tank/service", content=fields, headers=form)
    problem_of(answer, 403, "key-may-not")
    assert running.journal == []


def test_every_form_is_refused_without_a_key(running: FakeRunning) -> None:
    app = create_app(running)
    client = Client(app, HOST)
    form = {
        "origin": f"http://{HOST}",
        "content-type": "application/x-www-form-urlencoded",
        "accept": "text/html",
    }
    found = 0
    for route in app.router.routes:
        for each in getattr(getattr(route, "original_router", route), "routes", [route]):
            path = getattr(each, "path", "/api/")
            if "POST" not in (getattr(each, "methods", None) or ()) or path.startswith("/api/"):
                continue
            found += 1
            path = re.sub(r"\{[^}]*\}", "tank", path)
            answer = client.post(path, content=f"token={TOKEN}", headers=form)
            assert answer.status_code == 401, path
    assert found >= 4
    assert running.journal == []
