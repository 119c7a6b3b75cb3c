"""Forms that a browser sends without script, and why another site's page cannot send one.

The API takes JSON alone, which a form cannot send. The pages' own addresses take forms, under three
conditions: the guard has seen that the request comes from this API's own pages (Origin and
Sec-Fetch-Site), one of the two is really there, and the form carries this process's token, which
only somebody who can read our pages knows. Writing needs the same key as the API's.
"""

from __future__ import annotations

import math
import re
import secrets
from collections.abc import Mapping
from typing import Annotated
from urllib.parse import parse_qsl

from fastapi import Depends, Request
from pydantic import ValidationError

from api.keys import writes_allowed
from api.problems import Problem
from api.validation import points_of

TOKEN = secrets.token_urlsafe(16)  # of this process: a page from before a restart is out of date
MOST_FIELDS = 20
_FIGURE = re.compile(r"[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)")  # as the script has it
STALE = "Not recorded: this page was from before dripleg's last start. Look again, and tap again."


async def _fields(request: Request) -> dict[str, str]:
    """What a form says, by name. Problem when it comes from elsewhere or cannot be read."""
    if not ({"origin", "sec-fetch-site"} & set(request.headers)):
        raise Problem("cross-site-write", "the browser does not say which page it was sent from")
    await writes_allowed(request)
    try:
        text = (await request.body()).decode("utf-8")
        pairs = parse_qsl(text, keep_blank_values=True, max_num_fields=MOST_FIELDS, errors="strict")
    except ValueError as error:
        raise Problem("unreadable-request", f"the form cannot be read: {error}") from error
    return {name: value.strip() for name, value in pairs}


Fields = Annotated[dict[str, str], Depends(_fields)]


def is_fresh(fields: Mapping[str, str]) -> bool:
    """Whether a form was made by this process."""
    return secrets.compare_digest(fields.get("token", "").encode(), TOKEN.encode())


class NumberError(ValueError):
    """What was typed is not a number."""


def number(text: str) -> float:
    """A figure as people type it, with a point or a comma; NumberError says what to write."""
    figure = text.replace(",", ".")
    if not _FIGURE.fullmatch(figure) or not math.isfinite(float(figure)):
        raise NumberError(f'"{text[:40]}" is not a number. Write it like 380 or 12.5.')
    return float(figure)


def words_of(error: Exception) -> str:
    """What was wrong with what was typed, for whoever typed it."""
    if isinstance(error, ValidationError):
        points = points_of([dict(each) for each in error.errors()])
    elif isinstance(error, Problem):
        points = list(error.points)
    else:
        points = []
    said = [f"{point.value}: {point.remedy}" if point.value else point.remedy for point in points]
    words = " ".join(said) or (error.detail if isinstance(error, Problem) else str(error))
    return words[:1].upper() + words[1:]
