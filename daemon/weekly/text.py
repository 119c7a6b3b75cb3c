"""A weekly log as plain text, readable on a shop's terminal and on paper. Pure."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator, Sequence

from daemon.weekly.sheet import Section, Sheet, Table

WIDTH = 96
_GAP = "  "


def text_of(sheet: Sheet) -> str:
    """The whole log."""
    return "\n".join(_lines(sheet)) + "\n"


def _lines(sheet: Sheet) -> Iterator[str]:
    yield f"{sheet.site}: moisture log"
    yield sheet.title
    yield "=" * min(len(sheet.title), WIDTH)
    yield from _wrapped(sheet.lead)
    yield ""
    for line in sheet.known:
        yield from _wrapped(line)
    for section in sheet.sections:
        yield ""
        yield from _section(section)
    yield ""
    yield "Mind"
    yield "-" * len("Mind")
    for caution in sheet.cautions:
        yield from _wrapped(caution, "- ")


def _section(section: Section) -> Iterator[str]:
    yield section.title
    yield "-" * min(len(section.title), WIDTH)
    for line in section.lines:
        yield from _wrapped(line)
    for number, table in enumerate(section.tables):
        if section.lines or number:
            yield ""
        if len(section.tables) > 1:
            yield from _wrapped(f"{table.caption}:")
        yield from _table(table)
    for chart in section.charts:
        yield ""
        yield from _wrapped(f"{chart.title}: {chart.words}")


def _table(table: Table) -> Iterator[str]:
    rows = [table.head, *table.rows]
    widths = [max(len(row[n]) for row in rows) for n in range(len(table.head))]
    if sum(widths) + len(_GAP) * (len(widths) - 1) > WIDTH:
        yield from _listed(table)
        return
    for row in rows:
        cells = [cell.ljust(width) for cell, width in zip(row, widths, strict=True)]
        yield _GAP.join(cells).rstrip()


def _listed(table: Table) -> Iterator[str]:
    """A table too wide for a line: a row as words."""
    for row in table.rows:
        told: Sequence[str] = [
            f"{head.lower()} {cell}"
            for head, cell in zip(table.head[1:], row[1:], strict=True)
            if cell != "-"
        ]
        yield from _wrapped(f"{row[0]}: {'; '.join(told)}", "- ")


def _wrapped(text: str, mark: str = "") -> list[str]:
    return textwrap.wrap(
        text, WIDTH, initial_indent=mark, subsequent_indent=" " * len(mark), break_long_words=False
    )
