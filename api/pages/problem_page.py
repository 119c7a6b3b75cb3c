"""A problem for somebody who reads a page: the same words as the document that programs get."""

from __future__ import annotations

from urllib.parse import quote

from starlette.requests import Request
from starlette.responses import Response

from api.pages.frame import PAGES, page
from api.problems import KINDS, Problem


def wants_page(request: Request) -> bool:
    """Whether it was a browser that asked for a page or sent a form."""
    return not request.url.path.startswith("/api/") and "text/html" in request.headers.get(
        "accept", ""
    )


def problem_page(request: Request, problem: Problem) -> Response:
    """The problem as a page, with the way back."""
    kind = KINDS[problem.kind]
    return page(
        request.app.state.running,
        "problem.html",
        here=_below(request),
        title=kind.title,
        status=kind.status,
        detail=problem.detail,
        advice=kind.advice,
    )


def failure_page(request: Request) -> Response:
    """An error that nobody foresaw: nothing of the inside, and what somebody in the shop can do."""
    kind = KINDS["unexpected"]
    writes = request.method == "POST"
    again = _below(request) if writes else quote(f"/{request.url.path.lstrip('/')}")
    if request.url.query and not writes:
        again = f"{again}?{request.url.query}"
    return page(
        request.app.state.running,
        "failure.html",
        here=_below(request),
        title=kind.title,
        status=kind.status,
        again=again,
        writes=writes,
    )


def _below(request: Request) -> str:
    """The page in the navigation that an address belongs to, "/" for none."""
    start = f"/{request.url.path.lstrip('/').partition('/')[0]}"
    return start if start in [address for address, _, _ in PAGES] else "/"
