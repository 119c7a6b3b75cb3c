"""Rows of a CSV file that people hand in: UTF-8, RFC 4180, every bad row named by its place.

A record stays on its line: no column here has room for a line break, so a quote that is not closed
spoils its own row and not the rest of the file.
"""

from __future__ import annotations

import csv
import math
import os
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import islice
from pathlib import Path

from daemon.errors import ReplayError

_NUMBER = re.compile(r"\s*[+-]?([0-9]+(\.[0-9]*)?|\.[0-9]+)([eE][+-]?[0-9]+)?\s*\Z")
_LONGEST_SHOWN = 60


@dataclass(frozen=True, slots=True)
class BadRow:
    """A row that cannot be used."""

    file: str
    line: int
    column: str
    problem: str

    def __str__(self) -> str:
        return f"{self.file}, line {self.line}, column {self.column}: {self.problem}"


class Rows:
    """The rows of one file under its header, with what to do about a bad one.

    Iterating gives the cells of each row; `line` is then that row's line, 1 for the header.
    """

    def __init__(self, path: Path, header: Sequence[str], skip_bad: bool) -> None:
        self.path, self.header, self.skip_bad = path, header, skip_bad
        self.bad: list[BadRow] = []
        self.line = 1
        self.share = 0.0  # of the file, read so far

    def __iter__(self) -> Iterator[list[str]]:
        for lines in self.chunks(1024):
            yield from self.cells(lines)

    def chunks(self, most: int) -> Iterator[list[str]]:
        """The lines under the header as they stand in the file, at most so many at once; `line`
        is then the line before the first of them."""
        try:
            # undecodable bytes are kept as such, so that their row can be named
            with self.path.open(encoding="utf-8-sig", errors="surrogateescape", newline="") as file:
                self._check_header(next(file, None))
                size = max(os.fstat(file.fileno()).st_size, 1)
                while lines := list(islice(file, most)):
                    self.share += sum(map(len, lines)) / size
                    yield lines
        except FileNotFoundError:
            raise ReplayError(f"{self.path}: there is no such file") from None
        except OSError as error:
            raise ReplayError(f"{self.path}: cannot be read ({error.strerror})") from None

    def cells(self, lines: Sequence[str]) -> Iterator[list[str]]:
        """The cells of each of these lines, one after the other, that is a row."""
        for text in lines:
            self.line += 1
            if row := self._cells(text.rstrip("\r\n")):
                yield row

    def refuse(self, column: str, problem: str) -> None:
        """Stop at a bad row, or note it and go on."""
        row = BadRow(str(self.path), self.line, column, problem)
        if not self.skip_bad:
            raise ReplayError(f"{row} (or leave bad rows out with --skip-bad)")
        self.bad.append(row)

    def _cells(self, text: str) -> list[str]:
        """The cells of a row; none of a blank line or a bad row."""
        if not text:
            return []
        if not text.isascii() and not self._is_utf8(text):
            return []
        try:
            cells = _split(text)
        except csv.Error as error:
            self.refuse(self._column_of_quote(text), f"{shown(text)} is not CSV ({error})")
            return []
        if len(cells) == len(self.header):
            return cells
        column = self.header[min(len(cells), len(self.header) - 1)]
        self.refuse(
            column,
            f"{shown(text)} has {_columns(len(cells))}; expected {len(self.header)}: "
            f"{','.join(self.header)}",
        )
        return []

    def _is_utf8(self, text: str) -> bool:
        try:
            text.encode()
        except UnicodeEncodeError as error:
            byte = ord(text[error.start]) & 0xFF
            column = self._column(text.count(",", 0, error.start))
            self.refuse(
                column,
                f"{shown(text)} is not UTF-8 (byte 0x{byte:02x}); save the file as UTF-8",
            )
            return False
        return True

    def _column_of_quote(self, text: str) -> str:
        """The column of the first cell with a quote."""
        return self._column(text.count(",", 0, max(text.find('"'), 0)))

    def _column(self, number: int) -> str:
        return self.header[min(number, len(self.header) - 1)]

    def _check_header(self, text: str | None) -> None:
        expected = ",".join(self.header)
        if text is None:
            raise ReplayError(f"{self.path}: empty; expected the header {expected}")
        text = text.rstrip("\r\n")
        try:
            found = [cell.strip() for cell in _split(text)]
        except csv.Error:
            found = []
        if found != list(self.header):
            raise ReplayError(
                f"{self.path}, line 1: the header is {shown(text)}; expected {expected}"
            )


def number(text: str) -> float | None:
    """A finite number in plain decimals, or None."""
    if _NUMBER.match(text) is None:  # float() also takes "1_000", other scripts' digits, "nan"
        return None
    value = float(text)
    return value if math.isfinite(value) else None


def shown(text: str) -> str:
    """A cell or row as a message shows it: in quotes, not too long, printable."""
    text = "".join(each if each.isprintable() else "\N{REPLACEMENT CHARACTER}" for each in text)
    return f'"{text}"' if len(text) <= _LONGEST_SHOWN else f'"{text[: _LONGEST_SHOWN - 3]}..."'


def _split(text: str) -> list[str]:
    if '"' not in text:
        return text.split(",")
    return next(csv.reader((text,), strict=True))


def _columns(count: int) -> str:
    return "1 column" if count == 1 else f"{count} columns"
