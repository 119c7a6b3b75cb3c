"""A problem for somebody who reads a page: the same words as the document that programs get."""

from __future__ import annotations

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
    start = f"/{request.url.path.lstrip('/').partition('/')[0]}"
    back = start if start in [address for address, _, _ in PAGES] else "/"
    return page(
        request.app.state.running,
        "problem.html",
        here=back,
        title=kind.title,
        status=kind.status,
        detail=problem.detail,
        advice=kind.advice,
    )
