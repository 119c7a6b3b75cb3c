"""What people say of parts: a surprising drain that was right, a part that was changed."""

from __future__ import annotations

from fastapi import APIRouter, Depends

from api.guard import writes_allowed
from api.models import AcknowledgeIn, RecordedOut, ServiceIn
from api.problems import Problem, answered_by
from api.routes.running import TheDaemon
from daemon.journal import Confirm, Service

router = APIRouter()

ON_WRITING = (
    "unreadable-request",
    "cross-site-write",
    "keys-needed",
    "no-length",
    "too-large",
    "not-json",
    "invalid-request",
    "log-unavailable",
)


@router.post(
    "/traps/{trap}/confirm",
    tags=["traps"],
    status_code=201,
    summary="Say that a surprising volume was right",
    dependencies=[Depends(writes_allowed)],
    responses=answered_by("unknown-trap", *ON_WRITING),
)
def confirm(trap: str, daemon: TheDaemon, body: AcknowledgeIn | None = None) -> RecordedOut:
    """The trap's last measured drain was far off what was expected: it is learned from now."""
    if trap not in daemon.site.traps:
        known = ", ".join(daemon.site.traps) or "none"
        raise Problem("unknown-trap", f'there is no trap "{trap}"; those of this site are: {known}')
    return RecordedOut.of(daemon.record(Confirm(trap, (body.by if body else None) or "")).entry)


@router.post(
    "/stations/{station}/service",
    tags=["parts"],
    status_code=201,
    summary="Say that a part was changed or looked at",
    dependencies=[Depends(writes_allowed)],
    responses=answered_by("unknown-station", *ON_WRITING),
)
def service(station: str, body: ServiceIn, daemon: TheDaemon) -> RecordedOut:
    """What was learned of the old part is forgotten; `sensor` names the one that was replaced."""
    stations = [each.id for each in daemon.site.line.stations]
    if station not in stations:
        known = ", ".join(stations)
        raise Problem(
            "unknown-station", f'there is no station "{station}"; those of this site are: {known}'
        )
    of = (body.sensor or "") if body.what == "sensor replaced" else station
    return RecordedOut.of(daemon.record(Service(body.what, of, body.by or "")).entry)
