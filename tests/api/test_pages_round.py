"""`/round`: the first line, the order, when and why, and forms that need no script."""

from __future__ import annotations

import re
from dataclasses import replace
from html import unescape

import pytest

from api.pages.levels import level_of
from api.pages.round_plan import plan, rough, vessel
from daemon.alarms import Alarm
from daemon.clock import DAY_US, HOUR_US, MINUTE_US, parse_rfc3339
from daemon.journal import Confirm, Drain, Undo
from daemon.site.types import Hours
from daemon.views import TrapView
from tests.api.client import Client, client_of
from tests.api.fake import NOW_US, FakeRunning, a_site, riser_view, tank_view

EVENING_US = parse_rfc3339("2026-12-01T20:00:00Z")
SITE = a_site()


def words_of(page: str) -> str:
    """What a page says, as one line."""
    page = re.sub(r"</?(strong|span|small)\b[^>]*>", "", page)
    return re.sub(r"[\s\xa0]+", " ", unescape(re.sub(r"<[^>]+>", " ", page)))


def line(*views: TrapView, now_us: int = NOW_US, flooded: tuple[str, ...] = ()) -> str:
    return plan(SITE, views, flooded, now_us).line


def due(view: TrapView) -> TrapView:
    return replace(view, due=True, because="volume")


def idle(view: TrapView, p50_us: int | None = None) -> TrapView:
    """Neither due nor to be so for a long time."""
    return replace(
        view, due=False, because=None, due_at_us=None, due_p05_us=None, due_p50_us=p50_us
    )


# ---- the first line ----


def test_the_first_line_says_how_many_which_last_when_and_how_much() -> None:
    bowl = replace(due(riser_view()), trap="bowl", p50_kg=0.06)
    tank = replace(due(tank_view()), p50_kg=0.2)
    riser = replace(due(riser_view()), p50_kg=0.14)
    assert line(tank, riser, bowl) == (
        "3 to drain, the tank last, before you leave: about 0.4 L, a mug"
    )


def test_the_tank_is_last_wherever_the_air_meets_it() -> None:
    made = plan(SITE, [tank_view(), riser_view()], (), NOW_US)
    assert [view.trap for view in made.drain] == ["riser", "tank"]


def test_one_trap_is_named() -> None:
    assert line(due(riser_view()), idle(tank_view())).startswith("1 to drain, riser, before you")


@pytest.mark.parametrize(
    ("now_us", "when"),
    [
        (NOW_US, "before you leave"),
        (parse_rfc3339("2026-12-01T12:30:00Z"), "before you leave"),  # a break is no shift's end
        (EVENING_US, "when work begins (tomorrow 08:00)"),
        (parse_rfc3339("2026-12-05T10:00:00Z"), "when work begins (Mon 08:00)"),  # a Saturday
    ],
)
def test_when_is_the_round_s_own_time(now_us: int, when: str) -> None:
    assert when in line(due(riser_view()), now_us=now_us)


def test_what_falls_due_before_the_shift_ends_belongs_to_the_round() -> None:
    soon = idle(riser_view(), NOW_US + 3 * HOUR_US)
    later = idle(riser_view(), NOW_US + 9 * HOUR_US)  # the shift ends at 17:30
    assert line(soon).startswith("1 to drain, riser")
    assert line(later) == "Nothing to drain before you leave. Next: riser, 18:00."


def test_the_first_line_gives_no_leave_to_wait_for_a_tank() -> None:
    thursday_us = NOW_US + 2 * DAY_US
    assert line(idle(tank_view(), thursday_us)) == "Nothing to drain before you leave."
    by_calendar = replace(idle(tank_view(), thursday_us), due_at_us=NOW_US + DAY_US)
    assert line(by_calendar).endswith("Next: tank, tomorrow 09:00.")


def test_a_full_trap_does_not_wait_for_the_shift_s_end() -> None:
    said = line(due(riser_view()), flooded=("riser",))
    assert said.startswith("1 to drain, riser, now (riser is full): about 0.2 L")


def test_without_an_estimate_it_says_so() -> None:
    assert line() == "No estimate yet: it comes with the first readings."


def test_a_shop_that_never_closes_has_a_day() -> None:
    site = replace(SITE, hours=Hours(((),) * 7, frozenset(), True))
    assert "1 to drain, riser, today:" in plan(site, [due(riser_view())], (), NOW_US).line


def test_a_shop_without_hours_is_told_now() -> None:
    site = replace(SITE, hours=Hours(((),) * 7, frozenset(), False))
    assert "1 to drain, riser, now:" in plan(site, [due(riser_view())], (), NOW_US).line


@pytest.mark.parametrize(
    ("kg", "metric", "us", "fills"),
    [
        (0.003, "3 ml", "0.1 oz", "a few drops"),
        (0.048, "50 ml", "1.6 oz", "an egg cup"),
        (0.41, "0.4 L", "14 oz", "a mug"),
        (0.96, "1.0 L", "32 oz", "a jug"),
        (3.0, "3.0 L", "0.8 gal", "a bucket"),
        (31.0, "31 L", "8.2 gal", "4 buckets"),
    ],
)
def test_volumes_are_said_as_people_say_them(kg: float, metric: str, us: str, fills: str) -> None:
    """US fluid ounces and gallons after NIST Handbook 44: 29.57353 ml, 3.785412 L."""
    assert rough(kg, SITE) == metric
    assert rough(kg, a_site(units="us")) == us
    assert vessel(kg) == fills


# ---- a card ----


def test_a_trap_shows_its_interval_its_mark_and_its_last_drain(client: Client) -> None:
    text = words_of(client.get("/round").text)
    assert "about 410 ml likely 300 to 560 ml: most of the way to its mark" in text
    assert "It holds 15 L; its mark is 600 ml. Drained last Mon 30 Nov, 17:00." in text
    assert "Due now, by volume: the water has reached its mark of 150 ml." in text
    assert "Counted since the start: not drained yet." in text
    assert "By the calendar 17:00: it is drained every working day, at the shift's end." in text


def test_an_interval_whose_ends_read_alike_is_one_figure() -> None:
    running = FakeRunning(standing={})
    empty = replace(riser_view(), p05_kg=0.0, p50_kg=0.0001, p95_kg=0.0003)
    running.traps = lambda: [tank_view(), empty]  # type: ignore[method-assign]
    text = words_of(client_of(running).get("/round").text)
    assert "about 0 ml likely 0 ml: as good as empty" in text


def test_a_us_shop_reads_us_units() -> None:
    text = words_of(client_of(FakeRunning(site=a_site(units="us"), standing={})).get("/round").text)
    assert "let the line down to about 15 psi" in text
    assert not re.search(r"\d (bar|ml|L|degC|K|mm|kg)\b", text)
    # NIST Handbook 44: 410 ml / 29.57353 = 13.9 oz, 15 L / 3.785412 = 3.96 gal
    assert "about 13.9 oz" in text
    assert "It holds 3.96 gal" in text
    assert not re.search(r"\d (ml|L)\b", text)


@pytest.mark.parametrize(
    "expected", ["due Thu 10:00 (Wed 12:00 to Fri)", "not expected within 10 days"]
)
@pytest.mark.parametrize("p95_kg", [0.05, 0.56])
@pytest.mark.parametrize("calendar", [True, False])
def test_a_steel_tank_is_never_given_leave_to_wait(
    running: FakeRunning, client: Client, expected: str, p95_kg: float, calendar: bool
) -> None:
    tank = replace(
        tank_view(), p95_kg=p95_kg, because="volume", expected=expected,
        due_at_us=NOW_US + 3 * DAY_US if calendar else None,
    )  # fmt: skip
    running.views[:] = [tank]
    text = words_of(client.get("/round").text)
    assert "rain daily against rust all the same" in text
    assert "not before" not in text


def test_a_calendar_drain_says_that_it_is_one(running: FakeRunning, client: Client) -> None:
    running.views[:] = [replace(tank_view(), due=True, because="calendar")]
    text = words_of(client.get("/round").text)
    assert "Due now, by the calendar: it is drained every working day" in text


def test_a_trap_that_is_counted_without_an_earlier_state_is_to_be_drained(
    running: FakeRunning, client: Client
) -> None:
    held = replace(idle(riser_view()), counted_from_us=NOW_US - HOUR_US)
    running.views[:] = [idle(tank_view()), held]
    text = words_of(client.get("/round").text)
    assert line(idle(tank_view()), held).startswith("1 to drain, riser, before you leave: how much")
    assert "before you leave: how much is not known" in text
    assert (
        "There may be more in riser than is shown. Drain it once, whatever the figure says." in text
    )
    assert "Counted from Tue 1 Dec, 08:00: earlier state could not be read." in text
    assert "not drained yet" not in text


def test_a_drain_that_empties_itself_is_to_be_looked_at(
    running: FakeRunning, client: Client
) -> None:
    running.views[:] = [replace(riser_view(), chance_stuck=0.024)]
    text = words_of(client.get("/round").text)
    assert "It empties itself; the chance that it is stuck is 2 %. Look that it does." in text


def test_a_drawn_level_stands_between_its_ends_and_below_its_brim() -> None:
    level = level_of(riser_view())  # 170 ml (140-210), mark 150, holds 300
    assert level.p95 < level.p50 < level.p05 < 132.0
    assert level.p50 < level.mark < level.p05 + 20
    full = level_of(replace(riser_view(), p50_kg=0.3, p95_kg=0.3))
    assert full.brim is not None
    assert full.p50 == full.brim
    assert full.words == "full: more water goes on down the line"
    assert level_of(tank_view()).brim is None  # 15 L are far above 0.6


def test_names_are_escaped(running: FakeRunning) -> None:
    running.site = replace(running.site, name="<b>Yard</b> & Sons")
    page = client_of(running).get("/round").text
    assert "&lt;b&gt;Yard&lt;/b&gt; &amp; Sons" in page


def test_the_cautions_stand_beside_the_drained_control(client: Client) -> None:
    text = words_of(client.get("/round").text)
    assert text.count("Crack the valve slowly, eyes and ears protected") == 2  # one a trap
    assert "Condensate is oily: to a separator or a waste carrier, never to the drain." in text


# ---- forms without script ----

OURS = {"origin": "http://127.0.0.1:8080", "sec-fetch-site": "same-origin"}


def fields_of(page: str, form: str) -> dict[str, str]:
    """The hidden fields of a form of a page."""
    part = page[page.index(f'id="{form}"') :]
    part = part[: part.index("</form>")]
    return dict(re.findall(r'type="hidden" name="(\w+)" value="([^"]*)"', part))


def post(client: Client, path: str, fields: dict[str, str], **headers: str) -> str:
    answer = client.post(path, data=fields, headers={**OURS, **headers})
    assert answer.headers["content-type"].startswith("text/html")
    return words_of(answer.text)


def test_a_form_records_a_drain(running: FakeRunning, client: Client) -> None:
    running.said = "tank: you measured 380 ml, expected 410 ml (300 to 560 ml)."
    fields = fields_of(client.get("/round").text, "drain-tank")
    typed = {"volume": "0,38", "unit": "L", "look": "clear", "by": "AM", "outcome": "emptied"}
    text = post(client, "/round/tank/drained", {**fields, **typed})
    assert running.journal[0].body == Drain("tank", "emptied", 0.38, "AM", "clear")
    assert running.said in text


def test_the_same_form_twice_records_one_drain(running: FakeRunning, client: Client) -> None:
    fields = fields_of(client.get("/round").text, "drain-tank") | {"outcome": "emptied"}
    for _ in range(2):
        post(client, "/round/tank/drained", fields)
    assert len(running.journal) == 1


@pytest.mark.parametrize(
    ("typed", "words"),
    [
        ({"volume": "40", "unit": "L"}, 'more than twice what the trap "tank" holds (15 L)'),
        ({"volume": "a mug", "unit": "ml"}, '"a mug" is not a number. Write it like 380 or 12.5.'),
        ({"volume": "-3", "unit": "ml"}, "a volume is 0 or more"),
        ({"volume": "nan", "unit": "ml"}, '"nan" is not a number'),
        ({"volume": "1_0", "unit": "ml"}, '"1_0" is not a number'),
        ({"volume": "9" * 400, "unit": "ml"}, "is not a number"),
        ({"by": "A" * 41}, "at most 40 characters are kept here"),
        ({"look": "purple"}, "it must be one of 'clear', 'milky', 'oily' or 'rusty'"),
    ],
)
def test_what_cannot_be_is_refused_with_a_helpful_word(
    running: FakeRunning, client: Client, typed: dict[str, str], words: str
) -> None:
    fields = fields_of(client.get("/round").text, "drain-tank")
    answer = client.post(
        "/round/tank/drained", data={**fields, "outcome": "emptied", **typed}, headers=OURS
    )
    assert answer.status_code == 422
    assert "Not recorded. " in words_of(answer.text)
    assert words in words_of(answer.text)
    assert running.journal == []
    if "volume" in typed:  # what was typed is there to be corrected
        assert f'value="{typed["volume"]}"' in answer.text


def test_a_trap_that_is_not_there_is_said_on_the_page(client: Client) -> None:
    fields = fields_of(client.get("/round").text, "drain-tank")
    answer = client.post("/round/barrel/drained", data=fields, headers=OURS)
    assert answer.status_code == 422
    assert 'There is no trap "barrel"; those of this site are: tank, riser' in words_of(answer.text)


@pytest.mark.parametrize("seq", ["99999999999999999999", "-1", "x"])
def test_an_undo_of_no_number_is_a_page_too(client: Client, seq: str) -> None:
    fields = fields_of(client.get("/round").text, "drain-tank")
    answer = client.post(
        f"/round/tank/undo/{seq}", data=fields, headers={**OURS, "accept": "text/html"}
    )
    assert answer.status_code == 422
    assert "The request cannot be taken" in answer.text


def test_a_drain_is_taken_back_with_a_form(running: FakeRunning, client: Client) -> None:
    client.post("/api/v1/traps/tank/drains", json={"by": "AM"})
    page = client.get("/round").text
    assert "Recorded 09:00 by AM: drained." in words_of(page)
    fields = fields_of(page, "undo-tank")
    refused = post(client, "/round/tank/undo/1", {**fields, "by": "BK"})
    assert 'Not taken back. It was recorded with "AM"' in refused
    text = post(client, "/round/tank/undo/1", {**fields, "by": "AM"})
    assert running.journal[-1].body == Undo("tank", 1, "AM")
    assert "Recorded 09:00 by AM: drained. Taken back 09:00." in text


def test_undo_is_offered_for_ten_minutes(running: FakeRunning, client: Client) -> None:
    client.post("/api/v1/traps/tank/drains", json={"by": "AM"})
    running.clock.time_us += 10 * MINUTE_US
    assert "Until 09:10, with the same initials." in words_of(client.get("/round").text)
    running.clock.time_us += 1
    assert 'id="undo-tank"' not in client.get("/round").text


def test_a_questioned_volume_is_confirmed_with_a_form(running: FakeRunning, client: Client) -> None:
    running.views[:] = [replace(tank_view(), questioned_kg=3.8)]
    page = client.get("/round").text
    assert "Is 3.8 L right?" in words_of(page)
    post(client, "/round/tank/right", {**fields_of(page, "right-tank"), "by": "AM"})
    assert running.journal[0].body == Confirm("tank", "AM")


# ---- who may send a form ----


def refused(client: Client, fields: dict[str, str], headers: dict[str, str]) -> int:
    return client.post("/round/tank/drained", data=fields, headers=headers).status_code


def test_another_site_s_page_cannot_send_a_form(running: FakeRunning, client: Client) -> None:
    fields = fields_of(client.get("/round").text, "drain-tank") | {"outcome": "emptied"}
    for headers in (
        {"origin": "http://evil.example"},
        {"origin": "null"},
        {"origin": "http://127.0.0.1:9999"},
        {"sec-fetch-site": "cross-site"},
        {"sec-fetch-site": "same-site", "origin": "http://127.0.0.1:8080"},
        {},  # a browser that says nothing of where it comes from
    ):
        assert refused(client, fields, headers) == 403
    assert running.journal == []


@pytest.mark.parametrize("token", ["", "guessed", "é"])
def test_a_form_without_this_process_s_token_records_nothing(
    running: FakeRunning, client: Client, token: str
) -> None:
    text = post(client, "/round/tank/drained", {"token": token, "volume": "380", "unit": "ml"})
    assert "Not recorded: this page was from before dripleg's last start." in text
    assert running.journal == []


def test_the_api_takes_no_form_and_a_page_no_json(running: FakeRunning, client: Client) -> None:
    fields = fields_of(client.get("/round").text, "drain-tank")
    assert client.post("/api/v1/traps/tank/drains", data=fields, headers=OURS).status_code == 415
    assert client.post("/round/tank/drained", json=fields, headers=OURS).status_code == 415
    assert running.journal == []


def test_where_a_form_has_been_is_the_way_back(client: Client) -> None:
    answer = client.get("/round/tank/drained")
    assert (answer.status_code, answer.headers["location"]) == (303, "/round")


def test_an_alarm_is_seen_and_put_off_with_a_form(running: FakeRunning, client: Client) -> None:
    fields = fields_of(client.get("/").text, "seen-riser-drain-due")
    post(client, "/alarms/riser-drain-due/seen", {**fields, "by": "AM"})
    fields = fields_of(client.get("/").text, "off-riser-drain-due")
    post(client, "/alarms/riser-drain-due/put-off", {**fields, "for": "30 min", "by": "AM"})
    kinds = [type(entry.body).__name__ for entry in running.journal]
    assert kinds == ["Acknowledge", "Shelve"]
    running.standing["riser-drain-due"] = replace(
        running.standing["riser-drain-due"], state="shelved", shelved_until_us=NOW_US + HOUR_US
    )
    page = client.get("/").text
    assert "put off until Tue 1 Dec, 10:00" in words_of(page)
    post(client, "/alarms/riser-drain-due/no-longer", fields_of(page, "on-riser-drain-due"))
    assert type(running.journal[-1].body).__name__ == "Unshelve"


def test_the_flooded_are_named_first(running: FakeRunning, client: Client) -> None:
    running.standing["riser-flooded"] = Alarm(
        "riser-flooded", "trap-flooded", "riser", "unacknowledged", "high", NOW_US, "riser is full"
    )
    assert "now (riser is full)" in words_of(client.get("/round").text)
