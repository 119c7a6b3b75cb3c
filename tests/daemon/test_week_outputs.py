"""The week's outputs: the same figures as text, CSV and PDF, in both systems of units."""

from __future__ import annotations

import csv
import io
from dataclasses import replace
from typing import Any

import pytest
from pypdf import PdfReader

from daemon.clock import HOUR_US, MINUTE_US
from daemon.hour_figures import DrainCheck
from daemon.journal import Drain, Entry
from daemon.site.types import Costs, Site
from daemon.views import Interval
from daemon.weekly import files
from daemon.weekly.charts import FILLS
from daemon.weekly.compute import week_log
from daemon.weekly.csv_out import HEADER, csv_text
from daemon.weekly.records import WeekLog
from daemon.weekly.rows import read_rows
from daemon.weekly.sheet import CAUTIONS, sheet
from daemon.weekly.text import WIDTH, text_of
from daemon.weekly.weeks import Week
from daemon.weekly.words import Words
from tests.daemon.shops import SITE, site
from tests.daemon.week_rows import HeldRows, rows_of, transition

METRIC = replace(site(), costs=Costs(0.3, "EUR"))
US = replace(METRIC, units="us", name="Žuraw & Søn <finishing>", costs=Costs(0.15, "USD"))
WEEK = Week(2026, 10)
FROM_US, TO_US = WEEK.bounds_us("UTC")


def a_log(shop: Site) -> WeekLog:
    """A week with one measured, late drain and a leak."""
    rows = rows_of(shop, FROM_US, TO_US)
    at_us = FROM_US + 36 * HOUR_US
    rows.changes = [
        transition(at_us - 2 * HOUR_US, "tank-drain-due", "drain-due", "normal", "unacknowledged")
    ]
    rows.journal = [Entry(1, at_us, at_us, Drain("tank", "emptied", 0.5, "AM", "milky"))]
    rows.checks = [DrainCheck(1, at_us, "tank", 0.5, Interval(0.3, 0.4, 0.6), True)]
    return week_log(shop, read_rows(rows, WEEK, shop, TO_US))


def figures(shop: Site, log: WeekLog) -> dict[tuple[str, str, str], list[str]]:
    """The CSV's rows by section, item and quantity: low, median, high, unit."""
    head, *rows = csv.reader(io.StringIO(csv_text(shop, log)))
    assert tuple(head) == HEADER
    found = {(row[0], row[1], row[2]): row[3:] for row in rows}
    assert len(found) == len(rows)  # no figure stands twice
    return found


def pdf_words(content: bytes) -> str:
    """A PDF's text, read back."""
    return " ".join(" ".join(page.extract_text() for page in PdfReader(io.BytesIO(content)).pages)
                    .split())  # fmt: skip


# ---- CSV ----


def test_the_csv_is_tidy_and_metric() -> None:
    found = figures(METRIC, a_log(METRIC))
    assert found["traps", "tank", "shed"] == ["1377.6", "1680", "1982.4", "ml"]
    assert found["traps", "tank", "measured"] == ["", "500", "", "ml"]
    assert found["traps", "tank", "drains late"] == ["", "1", "", "1"]
    assert found["traps", "tank", "longest late"] == ["", "2", "", "h"]
    assert found["verdicts", "spray-gun", "wait"] == ["", "10.2", "", "h"]
    assert found["margins", "spray-gun", "least line margin"] == ["6", "8", "10", "K"]
    assert found["leakage", "", "flow"] == ["6", "12", "18", "L/min"]
    assert found["leakage", "", "cost a week"] == ["3", "6", "9", "EUR"]
    assert found["week", "2026-W10", "watched"] == ["", "168", "", "h"]
    assert found["week", "2026-W10", "ends"] == ["", "2026-03-09T00:00:00Z", "", "time"]
    assert found["honesty", "intervals", "held"] == ["", "1", "", "1"]


def test_the_csv_of_a_shop_with_us_units_has_them() -> None:
    """Factors by NIST SP 811: 29.57353 ml to the fluid ounce, 28.31685 L to the cubic foot."""
    found = figures(US, a_log(US))
    low, middle, high, unit = found["traps", "tank", "shed"]
    assert unit == "oz"
    assert float(middle) == pytest.approx(1680.0 / 29.57353, rel=1e-5)
    assert found["leakage", "", "flow"][3] == "cfm"
    assert float(found["leakage", "", "flow"][1]) == pytest.approx(12.0 / 28.31685, rel=1e-5)
    assert found["margins", "spray-gun", "least line margin"] == ["10.8", "14.4", "18", "degF"]
    assert float(low) < float(middle) < float(high)


def test_an_empty_week_s_csv_has_no_made_up_figures() -> None:
    log = week_log(METRIC, read_rows(HeldRows(), WEEK, METRIC, TO_US))
    found = figures(METRIC, log)
    assert found["week", "2026-W10", "watched"] == ["", "0", "", "h"]
    assert not any(section in ("water", "compressor", "leakage") for section, _, _ in found)


# ---- text ----


@pytest.mark.parametrize("shop", [METRIC, US], ids=["metric", "us"])
def test_the_text_fits_a_terminal_and_says_its_cautions(shop: Site) -> None:
    text = text_of(sheet(shop, a_log(shop)))
    assert max(len(line) for line in text.splitlines()) <= WIDTH
    joined = " ".join(text.split())
    for caution in CAUTIONS:
        assert caution in joined
    assert "Week 10 of 2026: Mon 2 Mar to Sun 8 Mar" in text
    assert ("1.68 L (1.38 to 1.98 L)" in text) == (shop is METRIC)
    assert ("0.444 gal (0.364 to 0.523 gal)" in text) == (shop is US)
    assert "1 (longest 2 h)" in text
    assert "milky, AM" in text


def test_a_long_table_becomes_a_list() -> None:
    log = a_log(METRIC)
    drains = tuple(replace(line, look="x" * 40, by="y" * 20) for line in log.drains)
    text = text_of(sheet(METRIC, replace(log, drains=drains)))
    assert max(len(line) for line in text.splitlines()) <= WIDTH
    assert "- Tue 3 Mar, 12:00: trap tank; came out 500 ml" in text


# ---- PDF ----


@pytest.mark.parametrize("shop", [METRIC, US], ids=["metric", "us"])
def test_the_pdf_opens_and_its_text_reads_back(shop: Site) -> None:
    content = files.pdf_bytes(shop, a_log(shop))
    words = pdf_words(content)
    told = sheet(shop, a_log(shop))
    assert told.title in words
    assert told.lead in words
    for section in told.sections:
        assert section.title in words
        for chart in section.charts:
            assert chart.title in words
    for caution in CAUTIONS:
        assert caution in words
    assert "page 1" in words
    reader = PdfReader(io.BytesIO(content))
    assert reader.metadata is not None
    assert told.title in str(reader.metadata.title)
    width = float(reader.pages[0].mediabox.width)
    assert width == pytest.approx(612.0 if shop is US else 595.28, abs=0.1)  # letter, A4


def test_the_pdf_s_fonts_are_embedded_and_its_charts_are_lines() -> None:
    reader = PdfReader(io.BytesIO(files.pdf_bytes(US, a_log(US))))
    for page in reader.pages:
        resources: Any = page["/Resources"]
        assert "/XObject" not in resources  # no picture anywhere
        for font in resources["/Font"].values():
            described = font.get_object()
            if described["/Subtype"] == "/TrueType":
                assert "/FontFile2" in described["/FontDescriptor"]
    words = pdf_words(files.pdf_bytes(US, a_log(US)))
    assert "Žuraw & Søn <finishing>" in words
    assert "14.4 °F (10.8 to 18 °F)" in words


def test_letters_that_the_font_lacks_do_not_stop_the_pdf() -> None:
    shop = replace(METRIC, name="Őr Цех 工場")
    assert "Or ??? ??" in pdf_words(files.pdf_bytes(shop, a_log(shop)))


def test_the_same_log_gives_the_same_bytes() -> None:
    assert files.pdf_bytes(METRIC, a_log(METRIC)) == files.pdf_bytes(METRIC, a_log(METRIC))


# ---- charts ----


def test_every_chart_says_in_words_what_it_draws() -> None:
    told = sheet(METRIC, a_log(METRIC))
    charts = [chart for section in told.sections for chart in section.charts]
    assert len(charts) == 4
    assert len({chart.name for chart in charts}) == 4
    for chart in charts:
        assert chart.words
        assert all(bar.kind in FILLS for bar in chart.bars)
        ends = [bar.x + bar.width for bar in chart.bars]
        ends += [x for stroke in chart.strokes for x, _ in stroke.points]
        assert all(0.0 <= x <= chart.width for x in ends)
        lows = [bar.y + bar.height for bar in chart.bars] + [label.y for label in chart.labels]
        assert all(0.0 <= y <= chart.height for y in lows)
    water = charts[0]
    first_day = [bar for bar in water.bars if bar.y == water.bars[0].y]
    assert [round(bar.width / first_day[0].width, 6) for bar in first_day] == [1.0, 1.0, 1.0]
    assert "Mon 720 ml" in water.words


def test_an_interval_whose_ends_read_alike_is_one_figure() -> None:
    assert Words(METRIC).waters(Interval(0.0, 0.0001, 0.0002)) == "0 ml"
    assert Words(METRIC).waters(Interval(0.3, 0.41, 0.56)) == "410 ml (300 to 560 ml)"
    assert Words(US).differences(3.0, 3.01, 3.02) == "5.4 degF"


def test_in_its_first_hour_a_record_is_not_told_as_far_as_before_it_began() -> None:
    rows = HeldRows(begun_us=FROM_US + 100 * MINUTE_US)
    at_us = FROM_US + 110 * MINUTE_US
    known = sheet(METRIC, week_log(METRIC, read_rows(rows, WEEK, METRIC, at_us))).known
    assert known[0] == "This week is not over, nor is the first full hour of the record."


def test_words_at_the_end_of_a_bar_stay_within_the_chart() -> None:
    """8.0 points a letter of the page's bold sans, as the tests' browser draws it."""
    log = a_log(METRIC)
    short = [replace(day, verdict_s={"spray-gun": {"wait": 960.0}}) for day in log.days]
    for shop, days in ((METRIC, log.days), (METRIC, short), (US, log.days)):
        told = sheet(shop, replace(log, days=tuple(days)))
        drawn = [c for section in told.sections for c in section.charts if c.bars]
        assert drawn
        for chart in drawn:
            for label in chart.labels:
                if label.anchor == "start":
                    assert label.x + 8.0 * len(label.text) <= chart.width, label


def test_a_chart_of_many_traps_tells_them_apart_and_leaves_none_out() -> None:
    long_name = "the-drip-leg-behind-the-second-spray-booth-of-hall-number"
    names = [f"{long_name}-{number:02}" for number in range(11)]
    legs = "".join(
        f'\n[[station]]\nid = "{name}"\nkind = "pipe"\nafter = "riser"\ntrap = {{}}\n'
        for name in names
    )
    shop = site(SITE.replace("\n[[outlet]]", f"{legs}\n[[outlet]]", 1))
    assert len(shop.traps) > 12
    told = sheet(shop, a_log(shop))
    (water,) = (c for section in told.sections for c in section.charts if c.name == "water")
    total_px = sum(bar.width for bar in water.bars if bar.y == water.bars[0].y)
    one_px = water.bars[0].width
    assert total_px == pytest.approx(len(shop.traps) * one_px)  # each sheds as much, here
    legend = [bar.kind for bar in water.bars if bar.width == 16.0 and bar.height == 12.0]
    assert len(legend) == len(set(legend)) == 6
    named = [label.text for label in water.labels if label.text.startswith("the ")]
    assert named == [f"the other {len(shop.traps) - 5}"]
    for label in water.labels:
        if label.anchor == "start":
            assert label.x + 8.0 * len(label.text) <= water.width, label


def test_a_week_of_which_only_an_alarm_is_known_makes_up_no_figures() -> None:
    rows = HeldRows(begun_us=FROM_US)
    rows.changes = [
        transition(FROM_US + 1, "tank-drain-due", "drain-due", "normal", "unacknowledged")
    ]
    told = sheet(METRIC, week_log(METRIC, read_rows(rows, WEEK, METRIC, FROM_US + HOUR_US)))
    assert told.lead == (
        "How much water came in is not known; 0 drains, none late; still due: tank; "
        "no open hour was watched."
    )
    words = text_of(told)
    assert "Unfit to spray (wait): not known: no open hour was watched." in words
    assert "Air drawn in: not known." in words
