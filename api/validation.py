"""What pydantic finds wrong in a request, in words for whoever sent it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from api.problems import Point
from api.quantities import time_us
from daemon.accept import AHEAD_US
from daemon.clock import format_rfc3339

LONGEST_ECHO = 80  # characters of a sent value that an answer repeats

_REMEDIES = {
    "json_invalid": "this is not JSON ({error}); send one JSON object",
    "missing": "it is missing; it must be sent",
    "extra_forbidden": "there is no such field here; leave it out, or correct its name",
    "model_attributes_type": "send a JSON object",
    "model_type": "send a JSON object",
    "literal_error": "it must be one of {expected}",
    "float_type": "it must be an ordinary number, without quotes",
    "finite_number": "it must be a finite number",
    "string_type": "it must be text, in quotes",
    "string_too_long": "at most {max_length} characters are kept here",
    "string_too_short": "it is empty; leave it out, or say something",
    "string_pattern_mismatch": "it has characters that cannot be kept (control characters)",
    "string_unicode": "it is not valid Unicode text",
    "bool_parsing": "it must be true or false",
}


def shown(value: object) -> str:
    """A sent value, short enough to repeat; nothing for a whole object."""
    if isinstance(value, dict | list) or value is None:
        return ""
    text = value if isinstance(value, str) else str(value)
    text = "".join(char if char.isprintable() else "\N{REPLACEMENT CHARACTER}" for char in text)
    if len(text) > LONGEST_ECHO:
        text = text[: LONGEST_ECHO - 3] + "..."
    return f'"{text}"' if isinstance(value, str) else text


def points_of(errors: Sequence[Mapping[str, Any]]) -> list[Point]:
    """The points of a RequestValidationError."""
    return [_point(error) for error in errors]


def _point(error: Mapping[str, Any]) -> Point:
    parts = [shown(part).strip('"') for part in error["loc"]]
    template = _REMEDIES.get(error["type"])
    context = error.get("ctx", {})
    if error["type"] == "json_invalid":  # its last part is a position, not a field
        context = {"error": f"{context['error']}, at character {int(parts.pop()) + 1}"}
    remedy = template.format_map(context) if template else str(error["msg"])
    return Point(".".join(parts), shown(error.get("input")), remedy)


def moment_of(text: str | None, now_us: int, points: list[Point], what: str = "it") -> int | None:
    """When something was, None: now. What is wrong goes to the points."""
    if text is None:
        return None
    try:
        at_us = time_us(text)
    except ValueError as error:
        points.append(Point("body.at", shown(text), str(error)))
        return None
    if at_us > now_us + AHEAD_US:
        remedy = (
            f"it is ahead of this machine's clock ({format_rfc3339(now_us)}); record {what} "
            "after it has happened, and check the clocks"
        )
        points.append(Point("body.at", shown(text), remedy))
    return at_us
