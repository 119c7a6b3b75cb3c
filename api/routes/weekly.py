"""The weekly moisture log as JSON."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Path

from api.problems import Problem, answered_by
from api.routes.running import TheDaemon
from api.week_models import WeekOut
from daemon.errors import WeekError
from daemon.views import Running
from daemon.weekly.weeks import Week, week_at

router = APIRouter(prefix="/weekly", tags=["weekly"])


@router.get(
    "/{week}",
    summary="The moisture log of a week",
    responses=answered_by("unknown-week", "log-unavailable", "invalid-request"),
)
def get_week(
    week: Annotated[
        str, Path(description="an ISO week in the shop's time zone", examples=["2026-W49"])
    ],
    daemon: TheDaemon,
) -> WeekOut:
    """What a week was like; of the week that goes on, what is known so far.

    What a week has no record of is null, and `watched` says how much of it is known at all.
    """
    return WeekOut.of(daemon.site, daemon.week(known_week(daemon, week)))


def known_week(daemon: Running, text: str) -> Week:
    """The week of an address; Problem when there is none, or it has not begun."""
    try:
        week = Week.read(text)
    except WeekError as error:
        raise Problem("unknown-week", str(error)) from error
    if week > (now := week_at(daemon.site.timezone, daemon.clock.now_us())):
        raise Problem("unknown-week", f"{week} has not begun: this is {now}")
    return week
