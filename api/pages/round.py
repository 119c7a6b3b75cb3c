"""`/round`: what to drain today, in walking order, and one tap to say that it is done."""

from __future__ import annotations

import secrets
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Annotated

from fastapi import APIRouter, Path, Query
from pydantic import ValidationError
from starlette.responses import HTMLResponse, RedirectResponse, Response

from api.models import AcknowledgeIn, DrainIn, UndoIn
from api.pages.forms import STALE, Fields, NumberError, is_fresh, number, words_of
from api.pages.frame import page
from api.pages.round_cards import cards_of
from api.pages.round_plan import RoundPlan, plan
from api.problems import Problem
from api.routes.parts import confirm
from api.routes.running import TheDaemon
from api.routes.traps import post_drain, undo_drain
from daemon.counted import notice_of
from daemon.errors import JournalError
from daemon.views import Running

router = APIRouter(include_in_schema=False)
UNITS = {"metric": ("ml", "L"), "us": ("oz", "gal")}
MANY = 8  # traps: with more, those that may stay get their form when somebody asks for it
LOOKS = ("clear", "milky", "oily", "rusty")


@dataclass(frozen=True, slots=True)
class Told:
    """What a form without script is answered: on which trap's card, and what had been typed."""

    trap: str = ""
    words: str = ""
    wrong: bool = False
    typed: Mapping[str, str] = field(default_factory=dict)


@router.get("/round")
def show(daemon: TheDaemon, trap: Annotated[str, Query(max_length=80)] = "") -> HTMLResponse:
    """The round as it is now, with the form of a trap that may stay if one is named."""
    return _page(daemon, asked=trap)


@router.get("/round/{trap}/{rest:path}")
def back(trap: str, rest: str) -> RedirectResponse:
    """Where a form without script has been: a second look there is a look at the round."""
    return RedirectResponse("/round", 303)


@router.post("/round/{trap}/drained")
def drained(trap: str, fields: Fields, daemon: TheDaemon) -> HTMLResponse:
    """A drain, from a browser without script."""
    if not is_fresh(fields):
        return _page(daemon, Told(trap, STALE, True, fields))
    try:
        recorded = post_drain(trap, _drain_in(fields), daemon, Response())
    except (Problem, JournalError, ValidationError, NumberError) as error:
        return _page(daemon, Told(trap, f"Not recorded. {words_of(error)}", True, fields), 422)
    return _page(daemon, Told(trap, recorded.said or "Recorded."))


@router.post("/round/{trap}/undo/{seq}")
def undo(
    trap: str, seq: Annotated[int, Path(ge=1, le=2**53)], fields: Fields, daemon: TheDaemon
) -> HTMLResponse:
    """A drain is taken back, from a browser without script."""
    if not is_fresh(fields):
        return _page(daemon, Told(trap, STALE, True))
    try:
        undo_drain(trap, seq, daemon, Response(), UndoIn(by=fields.get("by") or None))
    except (Problem, ValidationError) as error:
        return _page(daemon, Told(trap, f"Not taken back. {words_of(error)}", True), 422)
    return _page(daemon, Told(trap, "Taken back."))


@router.post("/round/{trap}/right")
def right(trap: str, fields: Fields, daemon: TheDaemon) -> HTMLResponse:
    """A surprising volume was right, from a browser without script."""
    if not is_fresh(fields):
        return _page(daemon, Told(trap, STALE, True))
    try:
        confirm(trap, daemon, AcknowledgeIn(by=fields.get("by") or None))
    except (Problem, JournalError, ValidationError) as error:
        return _page(daemon, Told(trap, f"Not recorded. {words_of(error)}", True), 422)
    return _page(daemon, Told(trap, "Learned from."))


def first_line(daemon: Running) -> str:
    """The round in one line, also for the start page."""
    return _plan(daemon).line


def _plan(daemon: Running) -> RoundPlan:
    flooded = [
        alarm.source
        for alarm in daemon.alarms()
        if alarm.kind == "trap-flooded" and alarm.state in ("unacknowledged", "acknowledged")
    ]
    return plan(daemon.site, daemon.traps(), flooded, daemon.clock.now_us())


def _page(
    daemon: Running, told: Told | None = None, status: int = 200, asked: str = ""
) -> HTMLResponse:
    made = _plan(daemon)
    cards = cards_of(daemon, [*made.drain, *made.leave])
    return page(
        daemon,
        "round.html",
        here="/round",
        title="Today's round",
        status=status,
        line=made.line,
        counted=notice_of(daemon.site, [*made.drain, *made.leave]),
        drain=[cards[view.trap] for view in made.drain],
        leave=[cards[view.trap] for view in made.leave],
        told=told or Told(),
        asked=asked,
        many=len(cards) > MANY,
        names=list(cards),
        units=UNITS[daemon.site.units],
        looks=LOOKS,
        new_key=lambda: f"form-{secrets.token_hex(8)}",
    )


def _drain_in(fields: Mapping[str, str]) -> DrainIn:
    said: dict[str, object] = {
        name: text for name in ("outcome", "by", "look", "key") if (text := fields.get(name))
    }
    if volume := fields.get("volume"):
        said |= {"volume": number(volume), "unit": fields.get("unit")}
    return DrainIn.model_validate(said)
