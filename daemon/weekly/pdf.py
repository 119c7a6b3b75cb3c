"""A weekly log as a PDF: text that can be read back, charts as vectors, fonts embedded.

The fonts are Bitstream Vera, which come with ReportLab; a letter that they lack is written without
its accent, or as a question mark. The same log gives the same bytes.
"""

from __future__ import annotations

import io
import unicodedata
from pathlib import Path
from typing import Any
from xml.sax.saxutils import escape

import reportlab
from reportlab.lib import colors
from reportlab.lib.pagesizes import A4, LETTER
from reportlab.lib.styles import ParagraphStyle
from reportlab.pdfbase import pdfmetrics
from reportlab.pdfbase.ttfonts import TTFont
from reportlab.platypus import (
    Flowable,
    KeepTogether,
    Paragraph,
    SimpleDocTemplate,
    Spacer,
)
from reportlab.platypus import Table as PdfTable

from daemon.weekly.charts import FILLS, Bar, Chart
from daemon.weekly.sheet import Section, Sheet, Table

BODY, BOLD = "dripleg-body", "dripleg-bold"
_MARGIN = 45.0
_HATCH = 4.0  # points between two lines
_CHART_SCALE = 0.85  # its letters are then as large as the text's


def pdf_of(sheet: Sheet, us_paper: bool) -> bytes:
    """The whole document, on A4 or on US letter."""
    _fonts()
    out = io.BytesIO()
    size = LETTER if us_paper else A4
    document = SimpleDocTemplate(
        out,
        pagesize=size,
        leftMargin=_MARGIN,
        rightMargin=_MARGIN,
        topMargin=_MARGIN,
        bottomMargin=_MARGIN,
        title=_fitting(f"{sheet.site}: moisture log, {sheet.title}"),
        author="dripleg",
        subject="Weekly moisture log: estimates, water only",
        invariant=1,
        lang="en",
    )
    width = size[0] - 2 * _MARGIN
    foot = _fitting(f"{sheet.site} - {sheet.title}")

    def number(canvas: Any, _: object) -> None:
        canvas.setFont(BODY, 7.5)
        canvas.setFillGray(0.3)
        canvas.drawString(_MARGIN, 28.0, foot)
        canvas.drawRightString(size[0] - _MARGIN, 28.0, f"page {canvas.getPageNumber()}")

    document.build(_story(sheet, width), onFirstPage=number, onLaterPages=number)
    return out.getvalue()


# ---- the text ----

_TEXT = {"fontName": BODY, "fontSize": 9.5, "leading": 13.0}
_PLAIN = ParagraphStyle("plain", **_TEXT)
_SMALL = ParagraphStyle("small", fontName=BODY, fontSize=8.0, leading=10.5)
_CELL = ParagraphStyle("cell", fontName=BODY, fontSize=8.5, leading=10.5)
_HEAD = ParagraphStyle("head", fontName=BOLD, fontSize=8.5, leading=10.5)
_CAPTION = ParagraphStyle(
    "caption", fontName=BOLD, fontSize=8.5, leading=11.0, spaceBefore=5.0, keepWithNext=1
)
_LEAD = ParagraphStyle("lead", fontName=BOLD, fontSize=11.0, leading=15.0, spaceAfter=4.0)
_TITLE = ParagraphStyle("title", fontName=BOLD, fontSize=17.0, leading=21.0)
_SECTION = ParagraphStyle(
    "section", fontName=BOLD, fontSize=12.0, leading=15.0, spaceBefore=11.0, spaceAfter=3.0
)


def _fonts() -> None:
    if BODY in pdfmetrics.getRegisteredFontNames():
        return
    folder = Path(reportlab.__file__).parent / "fonts"
    pdfmetrics.registerFont(TTFont(BODY, folder / "Vera.ttf"))
    pdfmetrics.registerFont(TTFont(BOLD, folder / "VeraBd.ttf"))


def _fitting(text: str) -> str:
    """The text in letters that the font has, with a degree sign where a terminal needs letters."""
    text = text.replace("degF", "°F").replace("degC", "°C")
    known = pdfmetrics.getFont(BODY).face.charToGlyph
    found = []
    for letter in text:
        plain = letter
        if ord(letter) not in known:
            plain = unicodedata.normalize("NFKD", letter)[0]
        found.append(plain if ord(plain) in known else "?")
    return "".join(found)


def _said(text: str, style: ParagraphStyle) -> Paragraph:
    return Paragraph(escape(_fitting(text)), style)


def _story(sheet: Sheet, width: float) -> list[Flowable]:
    story: list[Flowable] = [
        _said(sheet.site, _LEAD),
        _said(sheet.title, _TITLE),
        Spacer(1.0, 4.0),
        _said(sheet.lead, _LEAD),
        *(_said(line, _PLAIN) for line in sheet.known),
    ]
    for section in sheet.sections:
        story += _section(section, width)
    story.append(
        KeepTogether([_said("Mind", _SECTION), *(_said(each, _SMALL) for each in sheet.cautions)])
    )
    return story


def _section(section: Section, width: float) -> list[Flowable]:
    """A title is never left alone at the foot of a page."""
    parts: list[Flowable] = [_said(line, _PLAIN) for line in section.lines]
    for table in section.tables:
        parts.append(_said(table.caption, _CAPTION))
        parts.append(_table(table, width))
    for chart in section.charts:
        drawn: list[Flowable] = [
            _said(chart.title, _CAPTION),
            _Drawn(chart, width),
            _said(chart.words, _SMALL),
        ]
        parts.append(KeepTogether(drawn))
    return [KeepTogether([_said(section.title, _SECTION), *parts[:1]]), *parts[1:]]


def _table(table: Table, width: float) -> Flowable:
    rows = [[_said(cell, _HEAD) for cell in table.head]]
    rows += [[_said(cell, _CELL) for cell in row] for row in table.rows]
    widest = [
        max(3.0, *(min(len(row[n]), 34) for row in (table.head, *table.rows)))
        for n in range(len(table.head))
    ]
    widths = [width * each / sum(widest) for each in widest]
    if len(table.rows) == 1 and len(table.head) <= 4:
        widths = [each * 0.6 for each in widths]
    made = PdfTable(rows, colWidths=widths, repeatRows=1, hAlign="LEFT")
    made.setStyle(
        [
            ("LINEBELOW", (0, 0), (-1, 0), 0.8, colors.black),
            ("LINEBELOW", (0, 1), (-1, -1), 0.25, colors.grey),
            ("VALIGN", (0, 0), (-1, -1), "TOP"),
            ("LEFTPADDING", (0, 0), (-1, -1), 0),
            ("TOPPADDING", (0, 0), (-1, -1), 2),
            ("BOTTOMPADDING", (0, 0), (-1, -1), 2),
        ]
    )
    return made


# ---- the charts ----


class _Drawn(Flowable):  # type: ignore[misc]  # ReportLab has no types
    """A chart on a page's width."""

    def __init__(self, chart: Chart, width: float) -> None:
        super().__init__()
        self._chart, self._scale = chart, min(width / chart.width, _CHART_SCALE)
        self.width, self.height = width, chart.height * self._scale

    def wrap(self, *_: float) -> tuple[float, float]:
        """What room it takes."""
        return self.width, self.height

    def draw(self) -> None:
        """Draw it; ReportLab's y goes up."""
        canvas, chart = self.canv, self._chart
        canvas.saveState()
        canvas.scale(self._scale, self._scale)
        for bar in chart.bars:
            _bar(canvas, bar, chart.height)
        for stroke in chart.strokes:
            wide, shade, dash = {
                "axis": (1.0, 0.0, None),
                "grid": (0.5, 0.75, None),
                "limit": (1.2, 0.0, (6, 4)),
                "curve": (1.6, 0.15, None),
            }[stroke.kind]
            canvas.setLineWidth(wide)
            canvas.setStrokeGray(shade)
            canvas.setDash(*(dash or ()))
            path = canvas.beginPath()
            path.moveTo(stroke.points[0][0], chart.height - stroke.points[0][1])
            for x, y in stroke.points[1:]:
                path.lineTo(x, chart.height - y)
            canvas.drawPath(path)
        canvas.setFillGray(0.0)
        canvas.setFont(BODY, 12.0)
        draws = {
            "start": canvas.drawString,
            "middle": canvas.drawCentredString,
            "end": canvas.drawRightString,
        }
        for label in chart.labels:
            draws[label.anchor](label.x, chart.height - label.y, _fitting(label.text))
        canvas.restoreState()


def _bar(canvas: Any, bar: Bar, height: float) -> None:
    shade, slant = FILLS[bar.kind]
    bottom = height - bar.y - bar.height
    canvas.saveState()
    canvas.setLineWidth(0.6)
    canvas.setStrokeGray(0.0)
    canvas.setFillGray(shade)
    canvas.rect(bar.x, bottom, bar.width, bar.height, fill=1)
    path = canvas.beginPath()
    path.rect(bar.x, bottom, bar.width, bar.height)
    canvas.clipPath(path, stroke=0)
    rises = {"/": (1.0,), "\\": (-1.0,), "x": (1.0, -1.0), "-": (0.0,), "|": ()}.get(slant)
    if slant == "|":
        _hatch_upright(canvas, bar, bottom)
    for rise in rises or ():
        _hatch(canvas, bar, bottom, rise)
    canvas.restoreState()


def _hatch(canvas: Any, bar: Bar, bottom: float, rise: float) -> None:
    at = bottom - (bar.width if rise > 0.0 else 0.0)
    top = bottom + bar.height + (bar.width if rise < 0.0 else 0.0)
    while at <= top:
        canvas.line(bar.x, at, bar.x + bar.width, at + rise * bar.width)
        at += _HATCH


def _hatch_upright(canvas: Any, bar: Bar, bottom: float) -> None:
    at = bar.x
    while at <= bar.x + bar.width:
        canvas.line(at, bottom, at, bottom + bar.height)
        at += _HATCH
