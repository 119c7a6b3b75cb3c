"""The outlets: whether it is dry enough there, and what gauges and blotters showed."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Depends, Query, Response

from api.keys import writes_allowed
from api.outlet_models import (
    BlotterIn,
    BlotterOut,
    GaugeIn,
    GaugeOut,
    OutletStateOut,
)
from api.outlet_reports import gauge_of, surface_of
from api.problems import ON_WRITING, Point, Problem, answered_by
from api.routes.running import TheDaemon
from api.validation import moment_of
from daemon.journal import Blotter
from daemon.views import OutletView, Running

router = APIRouter(prefix="/outlets", tags=["outlets"])

_WRITES = answered_by("unknown-outlet", *ON_WRITING)


@router.get("", summary="Whether it is dry enough", responses=answered_by("log-unavailable"))
def get_outlets(daemon: TheDaemon) -> list[OutletStateOut]:
    """Every outlet with its margins and its verdict; an empty list until the first tick."""
    return [OutletStateOut.of(view) for view in daemon.outlets()]


@router.get(
    "/{outlet}/margin",
    summary="Whether it is dry enough at one outlet",
    responses=answered_by(
        "unknown-outlet", "no-estimate-yet", "log-unavailable", "invalid-request"
    ),
)
def get_margin(
    outlet: str,
    daemon: TheDaemon,
    surface_c: Annotated[
        float | None,
        Query(
            allow_inf_nan=False,
            description="the surface's temperature as somebody measured it, degC",
            examples=[18.5],
        ),
    ] = None,
    surface_f: Annotated[
        float | None,
        Query(allow_inf_nan=False, description="instead of surface_c, degF", examples=[65.0]),
    ] = None,
) -> OutletStateOut:
    """The margins of line and surface, a verdict with its reasons, and what would change it.

    A surface temperature that is sent counts to 1 K, and before any sensor or gauge.
    """
    _known(daemon, outlet)
    surface_k = surface_of(surface_c, surface_f)
    view = _view(daemon, outlet) if surface_k is None else daemon.margin(outlet, surface_k)
    if view is None:
        retry_s = -(-daemon.site.sample_every_us // 1_000_000)
        raise Problem("no-estimate-yet", headers={"retry-after": str(retry_s)})
    return OutletStateOut.of(view)


@router.post(
    "/{outlet}/blotter",
    status_code=201,
    summary="Record a blotter test",
    dependencies=[Depends(writes_allowed)],
    responses={
        200: {"model": BlotterOut, "description": "The key was seen before: the first entry."},
        **_WRITES,
    },
)
def post_blotter(outlet: str, body: BlotterIn, daemon: TheDaemon, response: Response) -> BlotterOut:
    """Water or oil mean `wait` until a clean one. Answers once it is committed."""
    _known(daemon, outlet)
    points: list[Point] = []
    at_us = moment_of(body.at, daemon.clock.now_us(), points)
    if points:
        raise Problem("invalid-request", points=points)
    told = Blotter(outlet, body.result, body.by or "")
    recorded = daemon.record(told, at_us, body.key or "")
    if recorded.repeated:
        response.status_code = 200
    return BlotterOut.of(recorded.entry, told)


@router.post(
    "/{outlet}/gauge",
    status_code=201,
    summary="Record a painter's gauge reading",
    dependencies=[Depends(writes_allowed)],
    responses={
        200: {"model": GaugeOut, "description": "The key was seen before: the first entry."},
        **_WRITES,
    },
)
def post_gauge(outlet: str, body: GaugeIn, daemon: TheDaemon, response: Response) -> GaugeOut:
    """An observation of the surface margin, give or take 0.5 K, for as long as it is said to
    speak. Answers once it is committed."""
    _known(daemon, outlet)
    told, at_us = gauge_of(body, outlet, daemon.clock.now_us())
    recorded = daemon.record(told, at_us, body.key or "")
    if recorded.repeated:
        response.status_code = 200
    return GaugeOut.of(recorded.entry, told)


def _known(daemon: Running, name: str) -> None:
    known = [place.id for place in daemon.site.line.outlets]
    if name not in known:
        names = ", ".join(known) or "none"
        raise Problem(
            "unknown-outlet", f'there is no outlet "{name}"; those of this site are: {names}'
        )


def _view(daemon: Running, name: str) -> OutletView | None:
    return next((view for view in daemon.outlets() if view.outlet == name), None)
