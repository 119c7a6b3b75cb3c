"""Every error that dripleg raises on purpose, one branch per area under one root.

A message says what is wrong, where, the value that was found, and what to do about it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


class DriplegError(Exception):
    """Root of all errors that dripleg raises on purpose."""


class UnitError(DriplegError, ValueError):
    """A quantity that cannot be read, or has the wrong unit for its place."""


class RangeError(DriplegError, ValueError):
    """A number outside the range in which a formula holds."""


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing wrong in a site file: where, what was found, and what to write instead."""

    table: str  # as the person would look for it: 'station "tank"', "compressor"
    key: str  # the key in that table, "" when the table itself is the problem
    value: str  # the value found, as written
    remedy: str  # what is wrong and what to write instead

    def __str__(self) -> str:
        where = f"[{self.table}]" + (f" {self.key}" if self.key else "")
        found = f" = {self.value}" if self.value else ""
        return f"{where}{found}: {self.remedy}"


class SiteError(DriplegError, ValueError):
    """A site file that cannot be used. Carries every problem found, not only the first."""

    def __init__(self, path: str, problems: Sequence[Problem]) -> None:
        self.path = path
        self.problems = tuple(problems)
        noun = "problem" if len(self.problems) == 1 else "problems"
        lines = [f"{path}: {len(self.problems)} {noun}; nothing was started."]
        lines += [f"  {number}. {problem}" for number, problem in enumerate(self.problems, 1)]
        super().__init__("\n".join(lines))


class ReplayError(DriplegError, ValueError):
    """A recorded row that cannot be read: file, line, column, the value, what was expected."""


class WeekError(DriplegError, ValueError):
    """A week that does not exist, or whose log cannot be made."""


class JournalError(DriplegError, ValueError):
    """A journal entry that cannot be taken: an unknown trap, an impossible volume, a time ahead."""


class UndoError(JournalError):
    """A drain that cannot be taken back: too late, by somebody else, or not there."""


class KeyReusedError(JournalError):
    """An idempotency key that came before with another content."""


class StoreError(DriplegError):
    """The database cannot be opened, read or written as it must be."""


class InUseError(StoreError):
    """Another process has the database."""


class BrokerError(DriplegError):
    """The MQTT broker cannot be reached or refuses us."""


class BalanceError(DriplegError, ArithmeticError):
    """Water came from nowhere or went nowhere: an internal fault, never a user's mistake."""
