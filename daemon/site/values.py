"""Readers of plain values: words, whole numbers, ids. Each raises ValueError with what to write."""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence

from daemon.site.notes import suggestion
from daemon.unit_tables import Kind
from daemon.units import parse

_ID = re.compile(r"[a-z0-9]+(?:-[a-z0-9]+)*\Z")


def text(raw: object) -> str:
    """Any text that says something."""
    if not isinstance(raw, str):
        raise ValueError("must be text in quotes")
    if not raw.strip():
        raise ValueError("says nothing; write a text in quotes or leave the key out")
    return raw


def identifier(raw: object) -> str:
    """A name for topics, files and addresses: lower case, digits, hyphens."""
    found = text(raw)
    if not _ID.match(found) or len(found) > 60:
        tidy = re.sub(r"[^a-z0-9]+", "-", found.lower()).strip("-")[:60] or "tank"
        raise ValueError(
            f'an id has lower-case letters, digits and single hyphens between them; write "{tidy}"'
        )
    return found


def flag(raw: object) -> bool:
    """true or false."""
    if not isinstance(raw, bool):
        raise ValueError("write true or false, without quotes")
    return raw


def choice(known: Sequence[str], what: str) -> Callable[[object], str]:
    """One of a few words."""

    def read(raw: object) -> str:
        if isinstance(raw, str) and raw in known:
            return raw
        end = suggestion(raw, known) if isinstance(raw, str) else f"; known: {', '.join(known)}"
        raise ValueError(f"is no {what}{end}")

    return read


def whole(lowest: int, highest: int, example: int) -> Callable[[object], int]:
    """A whole number within limits."""

    def read(raw: object) -> int:
        if isinstance(raw, bool) or not isinstance(raw, int):
            raise ValueError(f"must be a whole number without quotes, like {example}")
        if not lowest <= raw <= highest:
            raise ValueError(f"must be from {lowest} to {highest}, like {example}")
        return raw

    return read


def quantity(
    kind: Kind, lowest: float, highest: float, limits: str, *, above: bool = False
) -> Callable[[object], float]:
    """A plain quantity in SI within limits, which `limits` says in words.

    With `above` the lowest value itself is refused.
    """

    def read(raw: object) -> float:
        value = parse(raw, kind)
        if not lowest <= value <= highest or (above and value == lowest):
            raise ValueError(f"is not possible here: {limits}")
        return value

    return read
