"""This phone: a key that comes in the link's fragment is kept on it, and can be forgotten again.

A fragment never leaves the browser, so that the key stands in no log and no history of requests.
The script (`api/static/pair.js`) sends it once, in a body, and takes it out of the address bar.
"""

from __future__ import annotations

from fastapi import APIRouter, Request
from starlette.responses import HTMLResponse

from api.keys import Door
from api.pages.frame import page
from api.routes.pairing import may_of
from api.routes.running import TheDaemon
from daemon.keys import MEANING, ApiKey

router = APIRouter(include_in_schema=False)


@router.get("/pair")
async def pair(daemon: TheDaemon, request: Request) -> HTMLResponse:
    """Whether this phone is paired, what it may do, and how to change that."""
    door: Door = request.app.state.door
    key: ApiKey | None = request.scope.get("dripleg.key")
    return page(
        daemon,
        "pair.html",
        here="/pair",
        title="This phone",
        closed=door.closed,
        name=None if key is None else key.name,
        may=[MEANING[scope] for scope in may_of(door, key)],
        meaning=dict(MEANING),
    )
