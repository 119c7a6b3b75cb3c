"""The week's log over the API and on its page."""

from __future__ import annotations

import csv
import io
import re
from xml.etree import ElementTree

import pytest
from pypdf import PdfReader

from daemon.clock import HOUR_US, parse_rfc3339
from daemon.hour_figures import DrainCheck
from daemon.journal import Blotter, Drain, Entry
from daemon.views import Interval
from daemon.weekly.charts import FILLS
from daemon.weekly.weeks import Week
from tests.api.client import Client, client_of, problem_of
from tests.api.fake import FakeRunning, a_site
from tests.daemon.week_rows import rows_of, transition

LAST = Week(2026, 48)  # the fake's now is Tuesday of week 49
MOST_BYTES = 60_000


@pytest.fixture
def kept(running: FakeRunning) -> FakeRunning:
    """A daemon that has watched last week and what has passed of this one."""
    from_us, _ = LAST.bounds_us(running.site.timezone)
    rows = rows_of(running.site, from_us, parse_rfc3339("2026-12-01T09:00:00Z"))
    at_us = from_us + 34 * HOUR_US
    rows.changes = [
        transition(at_us - 3 * HOUR_US, "tank-drain-due", "drain-due", "normal", "unacknowledged"),
        transition(at_us, "tank-drain-due", "drain-due", "unacknowledged", "acknowledged"),
    ]
    rows.journal = [
        Entry(1, at_us, at_us, Drain("tank", "emptied", 0.38, "AM", "clear")),
        Entry(2, at_us + 1, at_us + 1, Blotter("spray-gun", "clean", "JK")),
    ]
    running.log_rows = rows
    return running


def words_of(html: str) -> str:
    """The page's words, without its tags."""
    return re.sub(r"[\s\xa0]+", " ", re.sub(r"<[^>]+>", " ", html))


# ---- JSON ----


def test_a_week_as_json(kept: FakeRunning, client: Client) -> None:
    answer = client.get("/api/v1/weekly/2026-W48")
    assert answer.status_code == 200
    told = answer.json()
    assert told["week"] == "2026-W48"
    assert (told["begins"], told["ends"]) == ("2026-11-23T00:00:00Z", "2026-11-30T00:00:00Z")
    assert told["over"] is True
    assert told["until"] == told["ends"]
    assert told["watched"] == {
        "recorded_h": 168.0,
        "watched_h": 168.0,
        "open_h": 42.5,
        "open_watched_h": 42.5,
        "not_watched": [],
    }
    assert told["water_in_ml"] == {"p05": 6888.0, "p50": 8400.0, "p95": 9912.0}
    tank = told["traps"][0]
    assert tank["trap"] == "tank"
    assert tank["shed_ml"]["p50"] == 1680.0
    assert (tank["measured_ml"], tank["drains"], tank["drains_late"]) == (380.0, 1, 1)
    assert tank["longest_late_h"] == 3.0
    assert told["drains"][0]["late_h"] == 3.0
    (gun,) = told["outlets"]
    assert gun["unfit_h"] == gun["verdict_h"]["wait"] == 25.5
    assert gun["iso_8573_1_humidity_h"] == {"7": 42.5}
    assert gun["least_line_margin"]["margin_k"] == {"p05": 6.0, "p50": 8.0, "p95": 10.0}
    assert gun["blotter_tests"][0]["result"] == "clean"
    (alarm,) = told["alarms"]
    assert alarm == {
        "kind": "drain-due",
        "raised": 1,
        "acknowledged": 1,
        "median_min": 180.0,
        "longest_min": 180.0,
    }
    assert told["compressor"]["leak"]["flow_l_min"] == {"p05": 6.0, "p50": 12.0, "p95": 18.0}
    assert "breathing-air" in " ".join(told["cautions"])


def test_a_week_of_which_nothing_is_known_is_null(client: Client) -> None:
    told = client.get("/api/v1/weekly/2026-W47").json()
    assert told["water_in_ml"] is None
    assert told["watched"]["recorded_h"] == 0.0
    assert told["compressor"] == {
        "running_h": None,
        "duty_percent": None,
        "drawn_m3": None,
        "leak": None,
    }


def test_the_week_that_goes_on_is_not_over(kept: FakeRunning, client: Client) -> None:
    told = client.get("/api/v1/weekly/2026-W49").json()
    assert told["over"] is False
    assert told["until"] == "2026-12-01T09:00:00Z"
    assert told["watched"]["recorded_h"] == 33.0


@pytest.mark.parametrize(
    ("week", "said"),
    [
        ("2026-W60", "there is no week 60 in 2026"),
        ("yesterday", "is not a week: write it like 2026-W49"),
        ("2026-W50", "2026-W50 has not begun: this is 2026-W49"),
    ],
)
@pytest.mark.parametrize("address", ["/api/v1/weekly/{}", "/week/{}.pdf", "/week/{}.csv"])
def test_no_such_week(client: Client, week: str, said: str, address: str) -> None:
    problem = problem_of(client.get(address.format(week)), 404, "unknown-week")
    assert said in problem["detail"]


# ---- the page ----


def test_the_page_shows_the_last_full_week(kept: FakeRunning, client: Client) -> None:
    answer = client.get("/week")
    assert answer.status_code == 200
    words = words_of(answer.text)
    assert "Week 48 of 2026: Mon 23 Nov to Sun 29 Nov" in words
    assert "8.4 L (6.89 to 9.91 L) of water came in with the air" in words
    assert "1 drain, 1 of them late" in words
    assert "25.5 h unfit to spray" in words
    assert "All 168 h were watched." in words
    assert "Not all of this week is known" not in words
    assert "Blotter tests: Tue 24 Nov, 10:00 clean (JK)." in words
    for caution in ("no breathing-air test", "never to the drain", "never replace opening"):
        assert caution in words


def test_the_page_leads_to_other_weeks_and_files(kept: FakeRunning, client: Client) -> None:
    links = re.findall(r'href="(/week/[^"]+)"', client.get("/week").text)
    assert links == [
        "/week/2026-W47",
        "/week/2026-W49",
        "/week/2026-W48.pdf",
        "/week/2026-W48.csv",
    ]
    assert all(client.get(link).status_code == 200 for link in links)
    assert "/week/2026-W50" not in client.get("/week/2026-W49").text


def test_a_shop_that_has_just_begun_sees_this_week(running: FakeRunning, client: Client) -> None:
    begun_us = parse_rfc3339("2026-12-01T06:00:00Z")
    running.log_rows = rows_of(running.site, begun_us, begun_us + 3 * HOUR_US)
    words = words_of(client.get("/week").text)
    assert "Week 49 of 2026" in words
    assert "This week is not over: it is told as far as Tue 1 Dec, 09:00." in words
    assert "The record begins on Tue 1 Dec, 06:00" in words


def test_missing_data_is_said_before_anything_else(kept: FakeRunning, client: Client) -> None:
    gone = kept.log_rows.hours[50:60]
    kept.log_rows.hours = [each for each in kept.log_rows.hours if each not in gone]
    words = words_of(client.get("/week").text)
    assert words.index("Not all of this week is known.") < words.index("Water in with the air")
    assert "Not watched: Wed 25 Nov, 02:00 to 12:00 (10 h)" in words


def test_a_shop_with_us_units_reads_them(kept: FakeRunning) -> None:
    kept.site = a_site(units="us")
    words = words_of(client_of(kept).get("/week").text)
    assert "2.22 gal (1.82 to 2.62 gal)" in words
    assert "0.444 gal (0.364 to 0.523 gal)" in words
    assert "14.4 °F (10.8 to 18 °F)" in words
    assert " ml" not in words


def test_the_page_is_small_and_asks_no_other_host(kept: FakeRunning, client: Client) -> None:
    page = client.get("/week").text
    assert total_bytes(client, page) < MOST_BYTES
    assert not re.findall(r"(?:src|href|action)=\"(?:https?:)?//", page)
    assert "style=" not in page  # the pages' policy
    assert "<script>" not in page


def test_a_week_of_many_drains_stays_small_and_leaves_none_out(
    kept: FakeRunning, client: Client
) -> None:
    """Three measured drains, twice a day."""
    from_us, _ = LAST.bounds_us(kept.site.timezone)
    rows = kept.log_rows
    rows.journal = []
    for number in range(1, 37):
        at_us, trap = from_us + (2 + number * 4) * HOUR_US, ("tank", "riser")[number % 2]
        drain = Drain(trap, "emptied", 0.38, "AM", "clear")
        rows.journal.append(Entry(number, at_us, at_us, drain))
        rows.checks.append(DrainCheck(number, at_us, trap, 0.38, Interval(0.3, 0.4, 0.6), True))
    page = client.get("/week").text
    assert page.count("<td>380 ml</td>") == 36
    assert total_bytes(client, page) < MOST_BYTES


def total_bytes(client: Client, page: str) -> int:
    """A page with its style and its scripts, as they are sent."""
    names = re.findall(r'(?:href|src)="(/static/[\w.]+(?:css|js))"', page)
    assert len(names) == 3
    return len(page.encode()) + sum(len(client.get(name).content) for name in names)


def test_every_chart_has_words_and_no_pattern_is_missing(kept: FakeRunning, client: Client) -> None:
    page = client.get("/week").text
    charts = re.findall(r"<svg viewBox.*?</svg>", page, re.DOTALL)
    assert len(charts) == 4
    for chart in charts:
        drawn = ElementTree.fromstring(chart)
        title, words = str(drawn.get("aria-labelledby")).split()
        assert re.search(rf'<figcaption id="{title}">[^<]', page)
        assert re.search(rf'<p id="{words}">[^<]', page)
    patterns = set(re.findall(r'<pattern id="(\w+)"', page))
    assert patterns == set(FILLS)
    assert set(re.findall(r"url\(#(\w+)\)", page)) <= patterns
    ids = re.findall(r'\bid="([^"]+)"', page)
    assert len(ids) == len(set(ids))


# ---- files ----


def test_the_pdf_opens_and_reads_back(kept: FakeRunning, client: Client) -> None:
    answer = client.get("/week/2026-W48.pdf")
    assert answer.headers["content-type"] == "application/pdf"
    assert 'filename="alder-yard-2026-W48.pdf"' in answer.headers["content-disposition"]
    text = " ".join(p.extract_text() for p in PdfReader(io.BytesIO(answer.content)).pages)
    assert "Alder Yard Finishing" in text
    assert "Week 48 of 2026" in text


def test_the_csv_has_the_page_s_figures(kept: FakeRunning, client: Client) -> None:
    answer = client.get("/week/2026-W48.csv")
    assert answer.headers["content-type"] == "text/csv; charset=utf-8"
    rows = list(csv.reader(io.StringIO(answer.text)))
    assert ["traps", "tank", "shed", "1377.6", "1680", "1982.4", "ml"] in rows


@pytest.mark.bench
def test_bench_the_week_s_page(kept: FakeRunning, client: Client) -> None:
    from time import perf_counter  # noqa: PLC0415  # by hand alone

    client.get("/week")
    took = []
    for _ in range(20):
        begun = perf_counter()
        client.get("/week")
        took.append(perf_counter() - begun)
    print(f"\nthe week's page: {sorted(took)[10] * 1e3:.1f} ms median")
