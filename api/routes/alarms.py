"""Alarms, and seeing them."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Depends, Query, Response

from api.alarm_models import ShelveIn, ShelveOut, UnshelveIn, UnshelveOut, seconds_of
from api.keys import writes_allowed
from api.models import AcknowledgeIn, AcknowledgeOut, AlarmOut
from api.problems import ON_WRITING, Problem, answered_by
from api.routes.running import TheDaemon
from daemon.alarms import SHELVED_LEAST_US, SHELVED_URGENT_US, SHELVED_US, Alarm
from daemon.clock import SECOND_US
from daemon.journal import Acknowledge, Shelve, Unshelve
from daemon.views import Running

router = APIRouter(prefix="/alarms", tags=["alarms"])

_WRITES = ("unknown-alarm", *ON_WRITING)
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
    responses=answered_by("nothing-to-acknowledge", *_WRITES),
)
def acknowledge(alarm: str, daemon: TheDaemon, body: AcknowledgeIn) -> AcknowledgeOut:
    """Answers once it is committed; the alarm's state follows at the next tick."""
    standing = _find(daemon, alarm)
    if standing.state not in WAITING:
        raise Problem("nothing-to-acknowledge", f'the alarm "{alarm}" is {standing.state}')
    seen = Acknowledge(alarm, body.by or "")
    return AcknowledgeOut.of(daemon.record(seen).entry, seen)


@router.post(
    "/{alarm}/shelve",
    status_code=201,
    summary="Put an alarm off for a while",
    dependencies=[Depends(writes_allowed)],
    responses={
        200: {"model": ShelveOut, "description": "The key was seen before: the first entry."},
        **answered_by("cannot-be-shelved", *_WRITES),
    },
)
def shelve(alarm: str, body: ShelveIn, daemon: TheDaemon, response: Response) -> ShelveOut:
    """It is silent for that long, and then what it is: unacknowledged while its cause stands.

    What it watches goes on being watched, and other alarms of the same trap are not put off with
    it. Putting off again counts from now. A drain ends it for the trap's `drain-due`.
    """
    standing = _find(daemon, alarm)
    if standing.state in ("suppressed by design", "out of service"):
        raise Problem("cannot-be-shelved", f'the alarm "{alarm}" is {standing.state}')
    most_us = SHELVED_URGENT_US if standing.priority == "high" else SHELVED_US
    length_s = seconds_of(body, SHELVED_LEAST_US / SECOND_US, most_us / SECOND_US)
    told = Shelve(alarm, length_s, body.by or "")
    recorded = daemon.record(told, key=body.key or "")
    if recorded.repeated:
        response.status_code = 200
    return ShelveOut.of(recorded.entry, told)


@router.post(
    "/{alarm}/unshelve",
    status_code=201,
    summary="Put an alarm off no longer",
    dependencies=[Depends(writes_allowed)],
    responses={
        200: {"model": UnshelveOut, "description": "The key was seen before: the first entry."},
        **answered_by("not-shelved", *_WRITES),
    },
)
def unshelve(alarm: str, daemon: TheDaemon, response: Response, body: UnshelveIn) -> UnshelveOut:
    """Ends before its time what `shelve` began; the alarm's state follows at the next tick."""
    standing = _find(daemon, alarm)
    key = body.key or ""
    if standing.state != "shelved" and not key:
        raise Problem("not-shelved", f'the alarm "{alarm}" is {standing.state}')
    told = Unshelve(alarm, body.by or "")
    recorded = daemon.record(told, key=key)
    if recorded.repeated:
        response.status_code = 200
    return UnshelveOut.of(recorded.entry, told)


def _find(daemon: Running, alarm: str) -> Alarm:
    alarms = daemon.alarms()
    for standing in alarms:
        if standing.id == alarm:
            return standing
    known = ", ".join(each.id for each in alarms) or "none"
    raise Problem("unknown-alarm", f'there is no alarm "{alarm}"; those of this site are: {known}')
