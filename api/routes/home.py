"""The start page at `/`, and a page for each kind of problem."""

from __future__ import annotations

from fastapi import APIRouter
from starlette.responses import HTMLResponse, PlainTextResponse, Response

from api.models import AcknowledgeIn
from api.pages.alarm_cards import alarm_cards
from api.pages.forms import Fields, is_fresh
from api.pages.frame import page
from api.problems import KINDS, Problem
from api.routes.alarms import acknowledge
from api.routes.running import TheDaemon
from daemon.views import Running

router = APIRouter(include_in_schema=False)


@router.get("/")
def home(daemon: TheDaemon) -> HTMLResponse:
    """Where to go, the alarms, and whether all is well."""
    return _home(daemon)


@router.post("/alarms/{alarm}/seen")
def seen(alarm: str, fields: Fields, daemon: TheDaemon) -> HTMLResponse:
    """Somebody has seen an alarm, and their browser runs no script."""
    if not is_fresh(fields):
        return _home(daemon, "This page was out of date, and nothing was recorded: tap again.")
    acknowledge(alarm, daemon, AcknowledgeIn(by=fields.get("by") or None))
    return _home(daemon, "Noted as seen; it shows within a few seconds.")


@router.get("/problems/{kind}")
async def problem(kind: str) -> Response:
    """What a problem document's `type` points at."""
    if kind not in KINDS:
        raise Problem("not-found", f"there is no kind of problem {kind[:80]!r}")
    known = KINDS[kind]
    return PlainTextResponse(f"{known.title} ({known.status})\n\n{known.advice}\n")


def _home(daemon: Running, told: str = "") -> HTMLResponse:
    health = daemon.health()
    return page(
        daemon,
        "home.html",
        here="/",
        title="Water in the air line",
        told=told,
        ok=health.ok,
        problems=health.problems,
        alarms=alarm_cards(daemon),
    )
