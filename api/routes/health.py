"""Health and the site as understood."""

from __future__ import annotations

from fastapi import APIRouter, Response

from api.models import HealthOut
from api.quantities import si_unit
from api.routes.running import TheDaemon
from api.site_model import SiteOut

router = APIRouter(tags=["site"])


@router.get(
    "/health",
    summary="Whether the daemon does its job",
    responses={
        503: {
            "model": HealthOut,
            "description": "Something is wrong; the same body says what, in words.",
        }
    },
)
def get_health(daemon: TheDaemon, response: Response) -> HealthOut:
    """200 when all is well, 503 with the same body when it is not."""
    health = daemon.health()
    units = {name: si_unit(channel.quantity) for name, channel in daemon.site.channels.items()}
    response.status_code = 200 if health.ok else 503
    return HealthOut.of(health, units)


@router.get("/site", summary="The site file as understood")
def get_site(daemon: TheDaemon) -> SiteOut:
    """Stations, sensors, traps and outlets, with every default filled in and named as one."""
    return SiteOut.of(daemon.site)
