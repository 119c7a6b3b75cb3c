"""`/week`: the weekly moisture log for the owner, with its PDF and CSV."""

from __future__ import annotations

from fastapi import APIRouter
from starlette.responses import HTMLResponse, Response

from api.pages.frame import page
from api.routes.running import TheDaemon
from api.routes.weekly import known_week
from daemon.views import Running
from daemon.weekly import files
from daemon.weekly.charts import FILLS
from daemon.weekly.csv_out import csv_text
from daemon.weekly.records import WeekLog
from daemon.weekly.sheet import sheet
from daemon.weekly.weeks import Week, last_full, week_at

router = APIRouter(include_in_schema=False)


@router.get("/week")
def last_week(daemon: TheDaemon) -> HTMLResponse:
    """The last week that is over, or this one while nothing is known of that."""
    timezone, now_us = daemon.site.timezone, daemon.clock.now_us()
    log = daemon.week(last_full(timezone, now_us))
    if log.empty and log.watched.of_s <= 0.0:
        log = daemon.week(week_at(timezone, now_us))
    return _shown(daemon, log)


@router.get("/week/{week}.pdf")
def week_pdf(week: str, daemon: TheDaemon) -> Response:
    """The same on paper."""
    log = daemon.week(known_week(daemon, week))
    return _file(daemon, log, files.pdf_bytes(daemon.site, log), "pdf", "application/pdf")


@router.get("/week/{week}.csv")
def week_csv(week: str, daemon: TheDaemon) -> Response:
    """The same for a spreadsheet."""
    log = daemon.week(known_week(daemon, week))
    return _file(daemon, log, csv_text(daemon.site, log).encode(), "csv", "text/csv; charset=utf-8")


@router.get("/week/{week}")
def one_week(week: str, daemon: TheDaemon) -> HTMLResponse:
    """One week."""
    return _shown(daemon, daemon.week(known_week(daemon, week)))


def _file(daemon: Running, log: WeekLog, content: bytes, ending: str, kind: str) -> Response:
    name = f"{daemon.site.id}-{log.week}.{ending}"
    headers = {"content-disposition": f'inline; filename="{name}"'}
    return Response(content, media_type=kind, headers=headers)


def _shown(daemon: Running, log: WeekLog) -> HTMLResponse:
    week = Week.read(log.week)
    told = sheet(daemon.site, log)
    now = week_at(daemon.site.timezone, daemon.clock.now_us())
    return page(
        daemon,
        "week.html",
        here="/week",
        title=told.title,
        sheet=told,
        week=str(week),
        before=str(week.before()),
        after=str(week.after()) if week < now else "",
        fills=sorted(FILLS),
    )
