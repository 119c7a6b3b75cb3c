"""What people say of parts: a surprising drain that was right, a part that was changed."""

from __future__ import annotations

from fastapi import APIRouter, Depends, Response

from api.keys import service_allowed, writes_allowed
from api.models import AcknowledgeIn, RecordedOut, SaltCheckIn, ServiceIn
from api.problems import ON_WRITING, Point, Problem, answered_by
from api.routes.running import TheDaemon
from api.routes.traps import described
from api.validation import moment_of
from daemon.journal import Confirm, SaltCheck, Service
from daemon.service_entries import why_not

router = APIRouter()


@router.post(
    "/traps/{trap}/confirm",
    tags=["traps"],
    status_code=201,
    summary="Say that a surprising volume was right",
    dependencies=[Depends(writes_allowed)],
    responses=answered_by("unknown-trap", "nothing-to-confirm", *ON_WRITING),
)
def confirm(trap: str, daemon: TheDaemon, body: AcknowledgeIn) -> RecordedOut:
    """The trap's last measured drain was far off what was expected: it is learned from now."""
    described(daemon, trap)
    if all(view.questioned_kg is None for view in daemon.traps() if view.trap == trap):
        raise Problem(
            "nothing-to-confirm",
            f"no measured volume of {trap} waits: the last one was as expected, is confirmed "
            "already, or was taken back",
        )
    return RecordedOut.of(daemon.record(Confirm(trap, body.by or "")).entry)


@router.post(
    "/stations/{station}/service",
    tags=["parts"],
    status_code=201,
    summary="Say that a part was changed or looked at",
    dependencies=[Depends(service_allowed)],
    responses={
        200: {"model": RecordedOut, "description": "The key was seen before: the first entry."},
        **answered_by("unknown-station", *ON_WRITING),
    },
)
def service(station: str, body: ServiceIn, daemon: TheDaemon, response: Response) -> RecordedOut:
    """What was learned of the old part is forgotten from then on.

    `element changed`: a filter's, a cartridge, or a bath's new ice. `drain seen working`: of a
    drain that empties itself. `sensor replaced`: `sensor` names it, one that speaks of this station
    or of none. `compressor serviced`: at the first station, where it breathes. What a station
    cannot have is refused, with what it takes.
    """
    stations = {each.id: each for each in daemon.site.line.stations}
    if station not in stations:
        known = ", ".join(stations)
        raise Problem(
            "unknown-station", f'there is no station "{station}"; those of this site are: {known}'
        )
    points: list[Point] = []
    at_us = moment_of(body.at, daemon.clock.now_us(), points)
    if reason := why_not(daemon.site, body.what, stations[station], body.sensor or ""):
        points.append(Point("body.what", body.what, reason))
    if points:
        raise Problem("invalid-request", points=points)
    of = (body.sensor or "") if body.what == "sensor replaced" else station
    recorded = daemon.record(Service(body.what, of, body.by or ""), at_us, body.key or "")
    if recorded.repeated:
        response.status_code = 200
    return RecordedOut.of(recorded.entry)


@router.post(
    "/sensors/{sensor}/salt-checks",
    tags=["parts"],
    status_code=201,
    summary="Say what a humidity sensor read over wet salt",
    dependencies=[Depends(service_allowed)],
    responses=answered_by("unknown-sensor", *ON_WRITING),
)
def salt_check(sensor: str, body: SaltCheckIn, daemon: TheDaemon) -> RecordedOut:
    """Its bias is known better from then on. `dripleg check --salt` does the reading as well."""
    humid = [c.sensor for c in daemon.site.channels.values() if c.quantity == "relative_humidity"]
    if sensor not in humid:
        known = ", ".join(humid) or "none"
        raise Problem("unknown-sensor", f'no humidity sensor has the id "{sensor}" ({known})')
    reads, true = (round(each / 100.0, 6) for each in (body.reads_percent, body.true_percent))
    check = SaltCheck(sensor, reads, true, body.by or "")
    return RecordedOut.of(daemon.record(check).entry)
