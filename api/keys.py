"""Keys at the API's door: who must have one, whose it is, and what it may do.

An API on a loopback address serves this machine alone and asks nobody. On any other address every
request needs a key, also one that comes over loopback: behind a program that passes requests on,
all of them would. Reading needs none where the site file says `open_reading = true`.

Programs send `Authorization: Bearer <key>`. A browser cannot put a header on a link that is
followed, so a paired phone has the key in a cookie: HttpOnly (no script can read it) and
SameSite=Strict (no other site's page can use it).
"""

from __future__ import annotations

import logging
from collections import OrderedDict, deque
from collections.abc import Awaitable, Callable
from http.cookies import CookieError, SimpleCookie
from ipaddress import IPv6Address

from anyio import to_thread
from fastapi import Request
from starlette.datastructures import Headers

from api.problems import Problem
from daemon.addresses import address_of, is_loopback
from daemon.clock import Clock, format_rfc3339
from daemon.keys import MEANING, ApiKey, Scope
from daemon.views import Running

READING = frozenset({"GET", "HEAD", "OPTIONS"})
PAIRING = "/api/v1/pairing"
# What anybody may do: say who they are. And what anybody may see: nothing of the shop is in it.
WHO = frozenset({"/pair", PAIRING, f"{PAIRING}/forget"})
OPEN = frozenset({"/api/v1/openapi.json"})
OPEN_BELOW = ("/problems/", "/static/")
OPEN_ENDINGS = (".css", ".js", ".ico")
WRONG_AT_MOST, WITHIN_S = 10, 60.0
MOST_ADDRESSES = 1000
log = logging.getLogger(__name__)


class Tries:
    """How often an address has sent a wrong key of late. Nobody guesses 192 bits; this keeps the
    log and the database quiet meanwhile."""

    def __init__(self, clock: Clock) -> None:
        self._clock = clock
        self._wrong: OrderedDict[str, deque[float]] = OrderedDict()

    def wait_s(self, address: str) -> float:
        """How long this address must wait; 0 when it need not."""
        wrong = self._wrong.get(_net(address))
        if wrong is None or len(wrong) < WRONG_AT_MOST:
            return 0.0
        return max(0.0, wrong[0] + WITHIN_S - self._clock.monotonic())

    def wrong(self, address: str) -> None:
        """Note a wrong key."""
        net = _net(address)
        wrong = self._wrong.setdefault(net, deque(maxlen=WRONG_AT_MOST))
        self._wrong.move_to_end(net)
        wrong.append(self._clock.monotonic())
        if len(wrong) == WRONG_AT_MOST and self.wait_s(address) > 0.0:
            log.warning("%s sent %d wrong keys within %g s", address, WRONG_AT_MOST, WITHIN_S)
        if len(self._wrong) > MOST_ADDRESSES:
            self._wrong.popitem(last=False)


def _net(address: str) -> str:
    """An IPv6 host has a whole /64 of addresses to send from; an IPv4 one may come in its dress."""
    found = address_of(address.partition("%")[0])
    if not isinstance(found, IPv6Address):
        return address
    if found.ipv4_mapped is not None:
        return str(found.ipv4_mapped)
    return f"{int(found) >> 64:x}::/64"


class Door:
    """Lets requests in, or says why not."""

    def __init__(self, running: Running) -> None:
        api = running.site.api
        self.closed = not is_loopback(api.host)
        self.open_reading = api.open_reading
        self.cookie = f"dripleg-{running.site.id}"
        self.no_cookie = f'{self.cookie}=""; HttpOnly; Max-Age=0; Path=/; SameSite=strict'
        self._running = running
        self._tries = Tries(running.clock)

    async def enter(
        self, method: str, path: str, headers: Headers, address: str
    ) -> tuple[ApiKey | None, Problem | None]:
        """The key that a request brings, if any, and why it may not go on, if it may not."""
        reading = method in READING
        if not self.closed or (reading and _is_open(path)):
            return None, None
        bearer, cookie = _bearer(headers), self._cookie(headers)
        free = path in WHO or (reading and self.open_reading)
        if not bearer and not cookie:
            return None, None if free else Problem("keys-needed", headers=_challenge())
        try:
            key = await self.identify(bearer or cookie, address)
        except Problem as problem:
            if bearer:
                return None, problem
            if problem.kind == "key-unknown":  # the browser need not send it again
                problem.headers["set-cookie"] = self.no_cookie
            # a phone whose key was revoked may still see what everybody sees
            return None, None if free else problem
        return key, None if free else _lacking(key, reading)

    async def identify(self, text: str, address: str) -> ApiKey:
        """The key of this text. Problem when it opens nothing, or too many were wrong."""
        wait_s = self._tries.wait_s(address)
        if wait_s > 0.0:
            raise Problem("too-many-tries", headers={"retry-after": str(int(wait_s) + 1)})
        key = await to_thread.run_sync(self._running.keys.find, text)
        if key is None:
            self._tries.wrong(address)
            raise Problem("key-unknown", headers=_challenge("invalid_token"))
        if key.revoked_us is not None:
            when = format_rfc3339(key.revoked_us)
            detail = f'the key {key.id}, for "{key.name}", was revoked at {when}'
            raise Problem("key-unknown", detail, headers=_challenge("invalid_token"))
        return key

    def _cookie(self, headers: Headers) -> str:
        for line in headers.getlist("cookie"):
            jar: SimpleCookie = SimpleCookie()
            try:
                jar.load(line)
            except CookieError:
                continue
            if self.cookie in jar:
                return jar[self.cookie].value
        return ""


def _bearer(headers: Headers) -> str:
    kind, _, text = headers.get("authorization", "").partition(" ")
    return text.strip() if kind.lower() == "bearer" else ""


def _is_open(path: str) -> bool:
    if path in OPEN:
        return True
    asset = path.endswith(OPEN_ENDINGS) and not path.startswith("/api/")
    return asset or path.startswith(OPEN_BELOW)


def _challenge(error: str = "") -> dict[str, str]:
    """RFC 6750, section 3."""
    end = f', error="{error}"' if error else ""
    return {"www-authenticate": f'Bearer realm="dripleg"{end}'}


def _lacking(key: ApiKey, reading: bool) -> Problem | None:
    """What a key lacks, as far as the method alone tells; routes ask for more (`may`)."""
    if reading and "read" not in key.may:
        return may_not(key, "read")
    if not reading and not key.may & {"record", "service"}:
        return may_not(key, "record")
    return None


def may_not(key: ApiKey, scope: Scope) -> Problem:
    """A key is good, but not for this."""
    may = ", ".join(sorted(key.may))
    return Problem(
        "key-may-not",
        f'the key {key.id}, for "{key.name}", may {may}; this needs {scope} ({MEANING[scope]})',
    )


def may(scope: Scope) -> Callable[[Request], Awaitable[None]]:
    """A dependency of every route that writes: refuses unless the request's key may do this."""

    async def check(request: Request) -> None:
        if not request.app.state.door.closed:
            return
        key: ApiKey | None = request.scope.get("dripleg.key")
        if key is None:
            raise Problem("keys-needed", headers=_challenge())
        if scope not in key.may:
            raise may_not(key, scope)

    return check


writes_allowed = may("record")
service_allowed = may("service")
