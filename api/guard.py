"""Who may ask, and how: the checks before any route. Keys are checked in `api/keys.py`.

A browser on this machine can be made to send requests here by any page it visits. Three checks stop
that: the Host header must name this machine (a name that an attacker points at 127.0.0.1 does not),
a write must come from this API's own pages or from no page at all (Origin, Sec-Fetch-Site), and
a write must say that it is JSON, which a form cannot. No answer ever grants another origin access.
"""

from __future__ import annotations

import logging
from urllib.parse import urlsplit

from starlette.datastructures import Headers, MutableHeaders
from starlette.requests import Request
from starlette.responses import Response
from starlette.routing import Match
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from api.keys import READING, Door
from api.pages.problem_page import failure_page, problem_page, wants_page
from api.problems import Problem, problem_response
from daemon.addresses import address_of, is_loopback
from daemon.errors import StoreError

LARGEST_BODY = 16 * 1024  # bytes; a drain is under 300
FORM = "application/x-www-form-urlencoded"
# Names that the internet's name servers never hand out, so that nobody else can own them:
# RFC 6762 (local), RFC 8375 (home.arpa), ICANN 2024 (internal), common practice (lan).
_LOCAL_ENDINGS = (".local", ".home.arpa", ".internal", ".lan")
_SECURITY_HEADERS = {
    "x-content-type-options": "nosniff",
    "cross-origin-resource-policy": "same-origin",
    # our own pages' forms must say where they come from; nobody else is told
    "referrer-policy": "same-origin",
    "content-security-policy": (
        "default-src 'none'; style-src 'self'; script-src 'self'; connect-src 'self'; "
        "img-src 'self'; form-action 'self'; base-uri 'none'; frame-ancestors 'none'"
    ),
    "cache-control": "no-store",
}
ABOUT_KEYS = frozenset({"keys-needed", "key-unknown", "key-may-not", "too-many-tries"})
ABOUT_BODIES = frozenset({"no-length", "too-large", "not-json", "not-a-form"})
log = logging.getLogger(__name__)


def host_is_ours(header: str, bound_to: str) -> bool:
    """Whether a Host header names this machine, for an API bound to that address."""
    try:
        name = urlsplit(f"//{header}").hostname or ""
    except ValueError:
        return False
    name = name.rstrip(".")
    if name == bound_to.lower() or is_loopback(name):
        return True
    if is_loopback(bound_to) or not name:
        return False
    # On the shop's network: an address, a name without a dot, or a name of a local zone. None
    # of them can be somebody else's domain that was made to point here.
    return address_of(name) is not None or "." not in name or name.endswith(_LOCAL_ENDINGS)


def origin_is_ours(headers: Headers) -> bool:
    """Whether a write comes from this API's own pages, or from no page at all."""
    if headers.get("sec-fetch-site", "none") not in ("same-origin", "none"):
        return False
    origin = headers.get("origin")
    return origin is None or origin.lower() in (
        f"http://{headers['host'].lower()}",
        f"https://{headers['host'].lower()}",
    )


def refusal(method: str, headers: Headers, bound_to: str, path: str = "/api/") -> Problem | None:
    """Why a request must not reach its route; None when it may."""
    host = headers.get("host", "")
    if not host_is_ours(host, bound_to):
        return Problem("wrong-host", f'the Host header says "{host[:80]}"')
    if method in READING:
        return None
    if not origin_is_ours(headers):
        sender = headers.get("origin", headers.get("sec-fetch-site", ""))
        return Problem("cross-site-write", f'the request was sent by a page of "{sender[:80]}"')
    return _unfit_body(method, headers, path)


def _unfit_body(method: str, headers: Headers, path: str) -> Problem | None:
    if "transfer-encoding" in headers:
        return Problem("no-length")
    length = headers.get("content-length", "0")
    if not length.isdecimal() or int(length[:20]) > LARGEST_BODY:
        return Problem("too-large", f"it has {length[:20]} bytes, and {LARGEST_BODY} are taken")
    media_type = headers.get("content-type", "").partition(";")[0].strip().lower()
    # the pages' own addresses take forms, which carry a token (`api/pages/forms.py`)
    wanted, refused = (
        ("application/json", "not-json") if path.startswith("/api/") else (FORM, "not-a-form")
    )
    if method == "POST" and media_type != wanted:
        said = f'content-type is "{media_type[:80]}"' if media_type else "no content-type is said"
        return Problem(refused, said)
    return None


class Guard:
    """ASGI middleware: the checks, the headers of every answer, and the last catch for errors."""

    def __init__(self, app: ASGIApp, bound_to: str, door: Door) -> None:
        self._app = app
        self._bound_to = bound_to
        self._door = door

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        started = False

        async def send_with_headers(message: Message) -> None:
            nonlocal started
            if message["type"] == "http.response.start":
                started = True
                headers = MutableHeaders(scope=message)
                for name, value in _SECURITY_HEADERS.items():
                    headers.setdefault(name, value)
            await send(message)

        try:
            problem = await self._refusal(scope)
            if problem is not None:
                await _answer(scope, problem)(scope, receive, send_with_headers)
                return
            await self._app(scope, receive, send_with_headers)
        except Exception:
            # The client learns nothing of the inside; the log learns everything, once.
            log.exception("%s %r failed", scope["method"], scope["path"])
            if started:
                raise
            await _failure(scope)(scope, receive, send_with_headers)

    async def _refusal(self, scope: Scope) -> Problem | None:
        method, path, headers = scope["method"], scope["path"], Headers(scope=scope)
        problem = refusal(method, headers, self._bound_to, path)
        if problem is not None and problem.kind in ABOUT_BODIES and not _takes(scope):
            problem = None  # the router says what is wrong: 404, or 405
        if problem is not None:
            return problem
        address = scope["client"][0] if scope.get("client") else ""
        try:
            key, problem = await self._door.enter(method, path, headers, address)
        except StoreError as error:
            log.error("%s %r: %s", method, path, error)
            return Problem("log-unavailable", str(error))
        scope["dripleg.key"] = key
        return problem


def _takes(scope: Scope) -> bool:
    """Whether there is a route that reads such a request."""
    routes = scope["app"].router.routes if "app" in scope else ()
    return any(route.matches(scope)[0] is Match.FULL for route in routes)


def _failure(scope: Scope) -> Response:
    """What is answered after an error that nobody foresaw, which may lie in the pages too."""
    problem = Problem("unexpected")
    try:
        if wants_page(request := Request(scope)):
            return failure_page(request)
    except Exception:
        log.exception("the page that says so failed too")
    return problem_response(problem, scope["path"])


def _answer(scope: Scope, problem: Problem) -> Response:
    """The problem: a page for a browser, except where the request itself is an attack."""
    request = Request(scope)
    if problem.kind in ABOUT_KEYS and wants_page(request):
        page = problem_page(request, problem)
        page.headers.update(problem.headers)
        return page
    return problem_response(problem, scope["path"])
