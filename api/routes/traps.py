"""The traps, what they hold, and the drains that were recorded."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Depends, Path, Response

from api.drains import drain_of
from api.keys import writes_allowed
from api.models import DrainIn, DrainOut, TrapOut, UndoIn
from api.problems import ON_WRITING, Problem, answered_by
from api.quantities import EARLIEST_US, LATEST_US
from api.routes.running import TheDaemon
from api.routes.spans import FROM, TO, span
from daemon.accept import AHEAD_US
from daemon.errors import UndoError
from daemon.journal import Undo
from daemon.moisture.description import Trap
from daemon.views import Running

router = APIRouter(prefix="/traps", tags=["traps"])


@router.get(
    "",
    summary="What every trap holds",
    response_model_exclude_unset=True,
    responses=answered_by("log-unavailable"),
)
def get_traps(daemon: TheDaemon) -> list[TrapOut]:
    """In the order the air meets them; an empty list until the first tick."""
    return [TrapOut.of(view) for view in daemon.traps()]


@router.get(
    "/{trap}",
    summary="What one trap holds",
    response_model_exclude_unset=True,
    responses=answered_by("unknown-trap", "no-estimate-yet", "log-unavailable", "invalid-request"),
)
def get_trap(trap: str, daemon: TheDaemon) -> TrapOut:
    """A median with its 5 to 95 % interval, and whether a drain is due."""
    described(daemon, trap)
    for view in daemon.traps():
        if view.trap == trap:
            return TrapOut.of(view)
    retry_s = -(-daemon.site.sample_every_us // 1_000_000)
    raise Problem("no-estimate-yet", headers={"retry-after": str(retry_s)})


@router.post(
    "/{trap}/drains",
    status_code=201,
    summary="Record that a drain was opened",
    dependencies=[Depends(writes_allowed)],
    responses={
        200: {"model": DrainOut, "description": "The key was seen before: the first entry."},
        **answered_by("unknown-trap", *ON_WRITING),
    },
)
def post_drain(trap: str, body: DrainIn, daemon: TheDaemon, response: Response) -> DrainOut:
    """Answers once it is committed; the estimate follows at the next tick."""
    drain, at_us = drain_of(body, trap, described(daemon, trap), daemon.clock.now_us())
    recorded = daemon.record(drain, at_us, body.key or "")
    if recorded.repeated:
        response.status_code = 200
    return DrainOut.of(recorded.entry, recorded.said)


@router.get(
    "/{trap}/drains",
    summary="The drains recorded for a trap",
    responses=answered_by("unknown-trap", "invalid-request", "log-unavailable"),
)
def get_drains(
    trap: str,
    daemon: TheDaemon,
    from_: Annotated[str | None, FROM] = None,
    to: Annotated[str | None, TO] = None,
) -> list[DrainOut]:
    """All of them without from and to, as far as the log goes back."""
    described(daemon, trap)
    now_us = daemon.clock.now_us()
    # a drain may be dated a little ahead of this clock
    start_us, end_us = span(from_, to, now_us + AHEAD_US, now_us + AHEAD_US)
    undone = daemon.undoings()
    return [
        DrainOut.of(entry, undone=undone.get(entry.seq))
        for entry in daemon.drains(trap, start_us, end_us)
    ]


@router.post(
    "/{trap}/drains/{seq}/undo",
    status_code=201,
    summary="Take back a drain",
    dependencies=[Depends(writes_allowed)],
    responses={
        200: {"model": DrainOut, "description": "It had been taken back before."},
        **answered_by("unknown-trap", "cannot-be-undone", *ON_WRITING),
    },
)
def undo_drain(
    trap: str,
    seq: Annotated[int, Path(ge=1, le=2**53, description="the drain's number in the journal")],
    daemon: TheDaemon,
    response: Response,
    body: UndoIn,
) -> DrainOut:
    """For ten minutes after it was recorded, with the same initials. The estimate is then as if it
    had never been; what was announced stays, and corrections follow."""
    described(daemon, trap)
    try:
        recorded = daemon.record(Undo(trap, seq, body.by or ""))
    except UndoError as error:
        raise Problem("cannot-be-undone", str(error)) from error
    if recorded.repeated:
        response.status_code = 200
    drains = daemon.drains(trap, EARLIEST_US, LATEST_US)
    drain = next((entry for entry in drains if entry.seq == seq), None)
    if drain is None:  # taken back before, and of another trap
        raise Problem("cannot-be-undone", f"entry {seq} is no drain of {trap}")
    return DrainOut.of(drain, undone=recorded.entry)


def described(daemon: Running, name: str) -> Trap:
    """The trap of that name; Problem names those of the site."""
    for station in daemon.site.line.stations:
        if station.id == name and station.trap is not None:
            return station.trap
    known = ", ".join(daemon.site.traps) or "none"
    raise Problem("unknown-trap", f'there is no trap "{name}"; those of this site are: {known}')
