"""The start page at `/`, and a page for each kind of problem."""

from __future__ import annotations

from typing import Literal

from fastapi import APIRouter
from pydantic import ValidationError
from starlette.responses import HTMLResponse, PlainTextResponse, RedirectResponse, Response

from api.alarm_models import ShelveIn, UnshelveIn
from api.models import AcknowledgeIn
from api.pages.alarm_cards import alarm_cards
from api.pages.forms import STALE, Fields, is_fresh, words_of
from api.pages.frame import page
from api.pages.round import first_line
from api.problems import KINDS, Problem
from api.routes.alarms import acknowledge, shelve, unshelve
from api.routes.running import TheDaemon
from daemon.counted import notice_of
from daemon.errors import JournalError
from daemon.views import Running

router = APIRouter(include_in_schema=False)


@router.get("/")
def home(daemon: TheDaemon) -> HTMLResponse:
    """Where to go, the alarms, and whether all is well."""
    return _home(daemon)


@router.get("/alarms/{alarm}/{rest:path}")
def back(alarm: str, rest: str) -> RedirectResponse:
    """Where a form without script has been."""
    return RedirectResponse("/", 303)


@router.post("/alarms/{alarm}/{what}")
def act(
    alarm: str, what: Literal["seen", "put-off", "no-longer"], fields: Fields, daemon: TheDaemon
) -> HTMLResponse:
    """What somebody does about an alarm, whose browser runs no script."""
    if not is_fresh(fields):
        return _home(daemon, STALE)
    by = fields.get("by") or None
    try:
        if what == "seen":
            acknowledge(alarm, daemon, AcknowledgeIn(by=by))
        elif what == "put-off":
            body = ShelveIn.model_validate({"for": fields.get("for", ""), "by": by})
            shelve(alarm, body, daemon, Response())
        else:
            unshelve(alarm, daemon, Response(), UnshelveIn(by=by))
    except (Problem, JournalError, ValidationError) as error:
        return _home(daemon, f"Not recorded. {words_of(error)}", 422)
    return _home(daemon, "Recorded; it shows within a few seconds.")


@router.get("/problems/{kind}")
async def problem(kind: str) -> Response:
    """What a problem document's `type` points at."""
    if kind not in KINDS:
        raise Problem("not-found", f"there is no kind of problem {kind[:80]!r}")
    known = KINDS[kind]
    return PlainTextResponse(f"{known.title} ({known.status})\n\n{known.advice}\n")


def _home(daemon: Running, told: str = "", status: int = 200) -> HTMLResponse:
    health = daemon.health()
    answers = {
        "/round": first_line(daemon),
        "/spray": "; ".join(f"{view.outlet}: {view.verdict}" for view in daemon.outlets()),
    }
    return page(
        daemon,
        "home.html",
        here="/",
        title="Water in the air line",
        status=status,
        answers=answers,
        told=told,
        ok=health.ok,
        problems=health.problems,
        counted=notice_of(daemon.site, daemon.traps()),
        alarms=alarm_cards(daemon),
    )
