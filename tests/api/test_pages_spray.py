"""`/spray`: the verdict first, one reason, one remedy, and all the rest below."""

from __future__ import annotations

import re
from dataclasses import replace

import pytest

from api.pages.scales import LEFT, RIGHT, scale_of
from daemon.clock import MINUTE_US, SECOND_US
from daemon.journal import Blotter, Gauge
from daemon.views import Interval, Judgement, OutletView, Verdict
from tests.api.client import Client, client_of
from tests.api.fake import NOW_US, FakeRunning, a_site
from tests.api.outlet_views import gun_view
from tests.api.test_pages_round import OURS, fields_of, post, words_of


def judged(view: OutletView, air: Verdict, surface: Verdict, verdict: Verdict) -> OutletView:
    """The view with these verdicts, and a reason and two remedies for each."""
    return replace(
        view,
        verdict=verdict,
        air=replace(
            view.air, judgement=Judgement(air, ("Air reason.", "Another."), ("Dry it.", "Or wait."))
        ),
        surface=replace(
            view.surface, judgement=Judgement(surface, ("Surface reason.",), ("Warm it.",))
        ),
    )


def spray(running: FakeRunning, view: OutletView) -> str:
    running.shown_outlets[:] = [view]
    return words_of(client_of(running).get("/spray").text)


@pytest.mark.parametrize(
    ("air", "surface", "verdict", "said"),
    [
        ("wait", "dry enough", "wait", "Wait Air reason. Do: Dry it."),
        ("dry enough", "wait", "wait", "Wait Surface reason. Do: Warm it."),
        ("care", "unknown", "unknown", "Unknown Surface reason. Do: Warm it."),
        ("dry enough", "dry enough", "dry enough", "Dry enough (water only) Air reason."),
    ],
)
def test_the_verdict_comes_first_with_the_reason_that_made_it_so(
    running: FakeRunning, air: Verdict, surface: Verdict, verdict: Verdict, said: str
) -> None:
    text = spray(running, judged(gun_view(), air, surface, verdict))
    assert f"spray-gun solvent-borne work {said}" in text
    assert text.index(said) < text.index("The air in the line")


def test_what_would_make_it_dry_enough_is_listed_beside_water_only(running: FakeRunning) -> None:
    text = spray(running, judged(gun_view(), "wait", "care", "wait"))
    assert "What would make it dry enough (water only) Dry it. Or wait. Warm it." in text


def test_where_it_is_dry_enough_nothing_is_asked_for(running: FakeRunning) -> None:
    text = spray(running, judged(gun_view(), "dry enough", "dry enough", "dry enough"))
    assert "What would make it" not in text


def test_the_margins_the_inputs_age_and_the_blotter_are_below(running: FakeRunning) -> None:
    view = replace(gun_view(291.65), inputs_us=NOW_US - 12 * SECOND_US)
    text = spray(running, view)
    assert "The oldest of its inputs was heard 12 s ago." in text
    assert "Last blotter test: clean, today 08:00." in text
    assert "4.2 K above the dew point, likely 3.6 to 6 K; 5 K are asked for." in text
    assert "7 K above the dew point, likely 5 to 9 K; 3 K are asked for." in text
    assert "Your gauge speaks until 09:20." in text
    assert "It stands at 3 bar." in text
    assert "in the range of class 7 (estimate, humidity only)" in text


def test_old_inputs_are_seen_to_be_old(running: FakeRunning) -> None:
    text = spray(running, replace(gun_view(), inputs_us=NOW_US - 47 * MINUTE_US))
    assert "was heard 47 min ago" in text


def test_holding_a_blast_stands_beside_blasting(running: FakeRunning) -> None:
    view = judged(gun_view(), "dry enough", "dry enough", "dry enough")
    held = Judgement("wait", ("To hold a blast 10 K are asked for.",), ("Coat it.",))
    text = spray(running, replace(view, work="blasting", holding=held))
    assert "Blast now Dry enough (water only) Air reason." in text
    assert "Hold the blast Wait To hold a blast 10 K are asked for. Do: Coat it." in text


def test_the_page_is_to_be_read_outside_the_booth(client: Client) -> None:
    text = words_of(client.get("/spray").text)
    assert "Read this outside the booth, and leave the phone out there." in text
    assert "water only: not of oil, dust, ventilation or anyone's lungs" in text
    assert "29 CFR 1910.107" not in text
    us = words_of(client_of(FakeRunning(site=a_site(units="us"))).get("/spray").text)
    assert "29 CFR 1910.107" in us


def test_the_blotter_test_is_explained(client: Client) -> None:
    text = words_of(client.get("/spray").text)
    # ASTM D4285 as the trade quotes it: within 24 in, a minute, any stain rejects
    assert "60 cm from the end at most, for a minute at least" in text
    assert "any stain of oil or water rejects the air" in text
    us = words_of(client_of(FakeRunning(site=a_site(units="us"))).get("/spray").text)
    assert "24 in from the end at most" in us


def test_a_typed_surface_is_asked_of_that_outlet_alone(running: FakeRunning) -> None:
    asked: list[tuple[str, float]] = []

    def margin(outlet: str, surface_k: float) -> OutletView:
        asked.append((outlet, surface_k))
        return replace(gun_view(surface_k), outlet=outlet)

    running.margin = margin  # type: ignore[method-assign]
    page = client_of(running).get("/spray?outlet=spray-gun&surface=18%2C5").text
    ((outlet, surface_k),) = asked
    assert outlet == "spray-gun"
    assert surface_k == pytest.approx(291.65)  # 18.5 degC
    assert "With the surface at 18,5 °C, as you typed it" in words_of(page)
    assert 'value="18,5"' in page


@pytest.mark.parametrize(("minutes", "counts"), [(29, True), (31, False)])
def test_a_surface_that_was_typed_long_ago_counts_no_more(
    running: FakeRunning, minutes: int, counts: bool
) -> None:
    """A phone opens the same address again days later; the panel has another temperature then."""
    running.margin = lambda outlet, surface_k: gun_view(surface_k)  # type: ignore[method-assign]
    typed_ms = (NOW_US - minutes * MINUTE_US) // 1000
    page = client_of(running).get(f"/spray?outlet=spray-gun&surface=18.5&at={typed_ms}")
    assert page.status_code == 200
    assert ("as you typed it" in page.text) is counts
    old = "The surface was measured more than 30 minutes ago: measure it again."
    assert (old in words_of(page.text)) is not counts


def test_a_us_shop_types_fahrenheit(running: FakeRunning) -> None:
    running.site = a_site(units="us")
    known = judged(gun_view(291.65), "care", "care", "care")
    running.margin = lambda outlet, surface_k: known  # type: ignore[method-assign]
    text = words_of(client_of(running).get("/spray?outlet=spray-gun&surface=65.3").text)
    assert "With the surface at 65.3 °F" in text
    assert "give or take 1.8 °F" in text
    assert not re.search(r"\d (K|°C|bar)\b", text)


@pytest.mark.parametrize(
    ("query", "words"),
    [
        ("surface=181", "181 °C is no surface to be sprayed: type -40 °C to 80 °C."),
        ("surface=warm", '"warm" is not a number.'),
        ("surface=nan", '"nan" is not a number.'),
        ("surface=" + "9" * 40, "is no surface to be sprayed"),
    ],
)
def test_what_is_no_surface_is_refused(client: Client, query: str, words: str) -> None:
    answer = client.get(f"/spray?outlet=spray-gun&{query}")
    assert answer.status_code == 422
    assert words in words_of(answer.text)


def test_without_outlets_or_estimates_it_says_so(running: FakeRunning) -> None:
    running.shown_outlets.clear()
    assert "No estimate yet" in words_of(client_of(running).get("/spray").text)
    running.site = replace(running.site, outlets=())
    assert "names no outlet" in words_of(client_of(running).get("/spray").text)


def test_a_gauge_and_a_blotter_are_recorded_with_forms(
    running: FakeRunning, client: Client
) -> None:
    page = client.get("/spray").text
    fields = fields_of(page, "gauge-spray-gun")
    said = post(client, "/spray/spray-gun/gauge", {**fields, "spread_k": "4,2", "by": "PK"})
    assert "Recorded; it speaks for 30 minutes." in said
    fields = fields_of(page, "blotter-spray-gun")
    post(client, "/spray/spray-gun/blotter", {**fields, "result": "water", "by": "PK"})
    assert [entry.body for entry in running.journal] == [
        Gauge("spray-gun", 4.2, 1800.0, "PK"),
        Blotter("spray-gun", "water", "PK"),
    ]


@pytest.mark.parametrize(
    ("path", "typed", "words"),
    [
        ("gauge", {"spread_k": "400"}, "a spread is the surface's temperature less"),
        ("gauge", {"spread_k": ""}, '"" is not a number'),
        ("blotter", {"result": "mud"}, "it must be one of 'clean', 'water' or 'oil'"),
        ("blotter", {}, "It is missing; it must be sent"),
    ],
)
def test_what_cannot_be_is_refused(
    running: FakeRunning, client: Client, path: str, typed: dict[str, str], words: str
) -> None:
    fields = fields_of(client.get("/spray").text, f"{path}-spray-gun")
    answer = client.post(f"/spray/spray-gun/{path}", data={**fields, **typed}, headers=OURS)
    assert answer.status_code == 422
    assert words in words_of(answer.text)
    assert running.journal == []


def test_an_unknown_outlet_is_said_on_a_page(client: Client) -> None:
    fields = fields_of(client.get("/spray").text, "blotter-spray-gun")
    answer = client.post("/spray/barrel/blotter", data={**fields, "result": "clean"}, headers=OURS)
    assert answer.status_code == 422
    assert 'There is no outlet "barrel"; those of this site are: spray-gun' in words_of(answer.text)


# ---- the drawing ----


def test_a_scale_keeps_order_and_its_ends() -> None:
    scale = scale_of(Interval(3.6, 4.2, 6.0), 3.0, 5.0)
    assert LEFT < scale.low < scale.middle < scale.high < RIGHT
    assert [zone.word for zone in scale.zones] == ["wait", "care", "dry enough"]
    assert scale.zones[0].end == scale.zones[1].start
    assert not scale.below
    wild = scale_of(Interval(-9.0, 4.0, 60.0), 3.0, 3.0)
    assert (wild.low, wild.high) == (LEFT, RIGHT)
    assert wild.below
    assert wild.above
    assert [zone.word for zone in wild.zones] == ["wait", "dry enough"]
