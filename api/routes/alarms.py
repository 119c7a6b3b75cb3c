"""Alarms, and seeing them."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Depends, Query

from api.keys import writes_allowed
from api.models import AcknowledgeIn, AcknowledgeOut, AlarmOut
from api.problems import Problem, answered_by
from api.routes.running import TheDaemon
from daemon.alarms import Alarm
from daemon.journal import Acknowledge
from daemon.views import Running

router = APIRouter(prefix="/alarms", tags=["alarms"])

WAITING = ("unacknowledged", "returned unacknowledged")


@router.get(
    "",
    summary="The alarms that are not normal",
    responses=answered_by("invalid-request", "log-unavailable"),
)
def get_alarms(
    daemon: TheDaemon,
    every: Annotated[bool, Query(alias="all", description="true: the normal ones too")] = False,
) -> list[AlarmOut]:
    """Those that want somebody's eye; with `?all=true` every alarm that the site can raise."""
    return [AlarmOut.of(alarm) for alarm in daemon.alarms() if every or alarm.state != "normal"]


@router.post(
    "/{alarm}/acknowledge",
    status_code=201,
    summary="Say that an alarm has been seen",
    dependencies=[Depends(writes_allowed)],
    responses=answered_by(
        "unreadable-request",
        "cross-site-write",
        "keys-needed",
        "unknown-alarm",
        "nothing-to-acknowledge",
        "no-length",
        "too-large",
        "not-json",
        "invalid-request",
        "log-unavailable",
    ),
)
def acknowledge(alarm: str, daemon: TheDaemon, body: AcknowledgeIn | None = None) -> AcknowledgeOut:
    """Answers once it is committed; the alarm's state follows at the next tick."""
    standing = _find(daemon, alarm)
    if standing.state not in WAITING:
        raise Problem("nothing-to-acknowledge", f'the alarm "{alarm}" is {standing.state}')
    seen = Acknowledge(alarm, (body.by if body else None) or "")
    return AcknowledgeOut.of(daemon.record(seen).entry, seen)


def _find(daemon: Running, alarm: str) -> Alarm:
    alarms = daemon.alarms()
    for standing in alarms:
        if standing.id == alarm:
            return standing
    known = ", ".join(each.id for each in alarms) or "none"
    raise Problem("unknown-alarm", f'there is no alarm "{alarm}"; those of this site are: {known}')
