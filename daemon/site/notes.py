"""What reading a site file collects besides values: problems, defaults, keys without effect."""

from __future__ import annotations

import datetime
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from difflib import get_close_matches

from daemon.errors import Problem
from daemon.site.types import DefaultUsed, Units


class Told(ValueError):
    """A value that cannot be used because of a problem that is on the list already."""


class Unknown(Told):
    """A name that nothing in the file has. Told at the end, unless a table without a right id
    of its own explains it."""

    def __init__(self, what: str, name: str, remedy: str, asked: str = "") -> None:
        self.what, self.name, self.remedy = what, name, remedy
        self.asked = asked  # the quantity that was asked of a sensor
        super().__init__(remedy)


Explains = Callable[[set[str], set[str]], bool]


@dataclass(frozen=True, slots=True)
class _Reference:
    problem: Problem
    asked: str


@dataclass(frozen=True, slots=True)
class _Unnamed:
    what: str
    found: str
    explains: Explains


@dataclass(slots=True)
class Notes:
    """Everything found on the way. One mistake of a person becomes one problem."""

    units: Units = "metric"
    problems: list[Problem] = field(default_factory=list)
    defaults: list[DefaultUsed] = field(default_factory=list)
    without_effect: list[str] = field(default_factory=list)
    # the keys of all tables, to know a group of keys that lost its header
    elsewhere: dict[str, Sequence[str]] = field(default_factory=dict)
    _unknown: dict[tuple[str, str], list[_Reference]] = field(default_factory=dict)
    _unnamed: list[_Unnamed] = field(default_factory=list)

    def problem(self, table: str, key: str, value: object, remedy: str) -> None:
        """Put a problem on the list; `value` is what TOML gave, None when nothing was found."""
        self.problems.append(Problem(table, key, written(value, key), remedy))

    def unknown(self, error: Unknown, table: str, key: str, value: object) -> None:
        """Keep an unknown name and where it was met."""
        problem = Problem(table, key, written(value, key), error.remedy)
        self._unknown.setdefault((error.what, error.name), []).append(
            _Reference(problem, error.asked)
        )

    def unnamed(self, what: str, found: object, explains: Explains) -> None:
        """Keep that a table has no id, or not a right one, or another one's: others may mean it.

        `explains` says of a name's references (tables, quantities asked) whether they could.
        """
        self._unnamed.append(_Unnamed(what, found if isinstance(found, str) else "", explains))

    def lost(self, found: object) -> None:
        """Keep the id of a table that cannot be read as what it is."""
        for what in ("sensor", "station"):
            self.unnamed(what, found, lambda tables, asked: False)

    def settle_unknown(self, known: Mapping[str, Iterable[str]]) -> None:
        """Tell the unknown names, but for one for each table without a right id that explains it.

        A name that is a letter or two off a known one (of sensors, of stations) is always told.
        """
        for table in self._unnamed:
            names = sorted(name for what, name in self._unknown if what == table.what)
            meant = nearest(table.found, names) if table.found else ""
            far = (name for name in names if not _close(name, known[table.what], 0.8))
            for name in [meant] if meant else far:
                references = self._unknown[table.what, name]
                tables = {each.problem.table for each in references}
                asked = {each.asked for each in references if each.asked}
                if meant or table.explains(tables, asked):
                    del self._unknown[table.what, name]
                    break
        self.problems.extend(references[0].problem for references in self._unknown.values())

    def shape_known(self) -> bool:
        """Whether no station has a problem with its place in the line, and none is lost."""
        keys = ("id", "after", "kind", "")
        placed = not any(p.table.startswith("station") and p.key in keys for p in self.problems)
        return placed and not self._unnamed

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
    if name != "password_file" and _close(name, ["password"], 0.65):
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
    close = same or _close(name, known, 0.65)
    return close[0] if close else ""


def _close(name: str, known: Iterable[str], cutoff: float) -> list[str]:
    return get_close_matches(name.lower(), list(known), n=1, cutoff=cutoff)


def suggestion(name: str, known: Iterable[str], nothing: str = "") -> str:
    """' did you mean "tank"?' or a list of what is known, for the end of a message."""
    known = list(known)
    close = nearest(name, known)
    if close:
        return f'; did you mean "{close}"?'
    if not known:
        return nothing
    return f"; known: {', '.join(known)}"
