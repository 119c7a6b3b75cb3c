"""What reading a site file collects besides values: problems, defaults, keys without effect."""

from __future__ import annotations

import datetime
from collections.abc import Iterable
from dataclasses import dataclass, field
from difflib import get_close_matches

from daemon.errors import Problem
from daemon.site.types import DefaultUsed, Units


class Told(ValueError):
    """A value that cannot be used because of a problem that is on the list already."""


@dataclass(slots=True)
class Notes:
    """Everything found on the way. One mistake of a person becomes one problem."""

    units: Units = "metric"
    problems: list[Problem] = field(default_factory=list)
    defaults: list[DefaultUsed] = field(default_factory=list)
    without_effect: list[str] = field(default_factory=list)

    def problem(self, table: str, key: str, value: object, remedy: str) -> None:
        """Put a problem on the list; `value` is what TOML gave, None when nothing was found."""
        self.problems.append(Problem(table, key, written(value, key), remedy))

    def default(self, table: str, key: str, value: str, because: str) -> None:
        """Remember a value that nobody said."""
        self.defaults.append(DefaultUsed(table, key, value, because))

    def no_effect(self, sentence: str) -> None:
        """Remember a key that is checked but changes nothing yet; the same sentence once."""
        if sentence not in self.without_effect:
            self.without_effect.append(sentence)


def written(value: object, key: str = "") -> str:
    """A TOML value as a person would have written it; addresses in hexadecimal; "" for None."""
    name = key.rsplit(".", 1)[-1]
    if value is None:
        return ""
    if name.startswith("pass") and name != "password_file":
        return '"..."'  # never shown again
    if isinstance(value, dict):
        inside = ", ".join(f"{name} = {written(each, name)}" for name, each in value.items())
        return _shortened(f"{{ {inside} }}" if inside else "{}")
    if isinstance(value, list):
        return _shortened(f"[{', '.join(written(each) for each in value)}]")
    if name == "address" and isinstance(value, int) and not isinstance(value, bool):
        return f"{value:#04x}"
    return _plain(value)


def _plain(value: object) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return f'"{value}"'
    if isinstance(value, datetime.date | datetime.time):
        return value.isoformat()
    return str(value)


def _shortened(text: str, most: int = 80) -> str:
    return text if len(text) <= most else f"{text[: most - 4]} ..."


def nearest(name: str, known: Iterable[str]) -> str:
    """The known name that somebody who wrote `name` most likely meant, "" if none is near."""
    known = list(known)
    same = [each for each in known if each.lower() == name.lower().replace("_", "-")]
    close = same or get_close_matches(name.lower(), known, n=1, cutoff=0.6)
    return close[0] if close else ""


def suggestion(name: str, known: Iterable[str], nothing: str = "") -> str:
    """' did you mean "tank"?' or a list of what is known, for the end of a message."""
    known = list(known)
    close = nearest(name, known)
    if close:
        return f'; did you mean "{close}"?'
    if not known:
        return nothing
    return f"; known: {', '.join(known)}"
