"""The plant: what leaks, what the compressor gives, and what it was time to do."""

from __future__ import annotations

from fastapi import APIRouter

from api.plant_models import PlantOut, ReminderOut, ScoreOut
from api.problems import Problem, answered_by
from api.routes.running import TheDaemon

router = APIRouter(tags=["plant"])


@router.get(
    "/plant",
    summary="What leaks, and what the compressor gives",
    responses=answered_by("no-estimate-yet", "log-unavailable"),
)
def get_plant(daemon: TheDaemon) -> PlantOut:
    """Measured while the shop is closed; what was not measured yet is null."""
    view = daemon.plant()
    if view is None:
        retry_s = -(-daemon.site.sample_every_us // 1_000_000)
        raise Problem("no-estimate-yet", headers={"retry-after": str(retry_s)})
    return PlantOut.of(view)


@router.get(
    "/reminders",
    summary="The last reminders",
    responses=answered_by("log-unavailable"),
)
def get_reminders(daemon: TheDaemon) -> list[ReminderOut]:
    """The last ten at most, oldest first: rounds, and lists for opening up."""
    return [ReminderOut.of(each) for each in daemon.reminders()]


@router.get(
    "/forecasts",
    summary="How the last forecasts held",
    responses=answered_by("log-unavailable"),
)
def get_forecasts(daemon: TheDaemon) -> list[ScoreOut]:
    """Each level that was reached beside what had been foreseen at least a day before."""
    return [ScoreOut.of(each) for each in daemon.forecast_scores()]
