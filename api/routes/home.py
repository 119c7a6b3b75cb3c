"""A plain page for people at `/`, and a page for each kind of problem."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from zoneinfo import ZoneInfo

from fastapi import APIRouter
from jinja2 import Environment, FileSystemLoader, StrictUndefined
from starlette.responses import FileResponse, HTMLResponse, PlainTextResponse, Response

from api.problems import KINDS, Problem
from api.quantities import volume_words
from api.routes.running import TheDaemon
from daemon.clock import to_datetime
from daemon.site.types import Site
from daemon.views import Running, TrapView

router = APIRouter(include_in_schema=False)

_HERE = Path(__file__).resolve().parent.parent
_PAGES = Environment(
    loader=FileSystemLoader(_HERE / "templates"), autoescape=True, undefined=StrictUndefined
)


@dataclass(frozen=True, slots=True)
class TrapLines:
    """A trap as the page shows it."""

    name: str
    median: str
    low: str
    high: str
    levels: str
    due: bool
    when: str


@dataclass(frozen=True, slots=True)
class AlarmLines:
    """An alarm as the page shows it."""

    text: str
    state: str
    priority: str
    since: str


@router.get("/")
def home(daemon: TheDaemon) -> HTMLResponse:
    """The traps with their intervals, the alarms, and whether all is well."""
    health = daemon.health()
    page = _PAGES.get_template("home.html").render(
        name=daemon.site.name,
        now=_clock_words(health.at_us, daemon.site),
        ok=health.ok,
        problems=health.problems,
        alarms=_alarms(daemon),
        traps=[_trap(view, daemon.site) for view in daemon.traps()],
    )
    return HTMLResponse(page)


@router.get("/style.css")
async def style() -> FileResponse:
    return FileResponse(_HERE / "static" / "style.css", media_type="text/css")


@router.get("/problems/{kind}")
async def problem(kind: str) -> Response:
    """What a problem document's `type` points at."""
    if kind not in KINDS:
        raise Problem("not-found", f"there is no kind of problem {kind[:80]!r}")
    known = KINDS[kind]
    return PlainTextResponse(f"{known.title} ({known.status})\n\n{known.advice}\n")


def _alarms(daemon: Running) -> Sequence[AlarmLines]:
    return [
        AlarmLines(
            alarm.text,
            # on a page people read "seen" for acknowledged
            {
                "unacknowledged": "not seen by anybody yet",
                "acknowledged": "seen",
                "returned unacknowledged": "over, but not seen by anybody yet",
            }.get(alarm.state, alarm.state),
            alarm.priority,
            _clock_words(alarm.since_us, daemon.site),
        )
        for alarm in daemon.alarms()
        if alarm.state != "normal"
    ]


def _trap(view: TrapView, site: Site) -> TrapLines:
    def words(kg: float) -> str:
        # a figure and its unit stay on one line
        return volume_words(kg, site.units).replace(" ", "\N{NO-BREAK SPACE}")

    since = _clock_words(view.last_drain_us, site) if view.last_drain_us is not None else ""
    return TrapLines(
        name=view.trap,
        median=words(view.p50_kg),
        low=words(view.p05_kg),
        high=words(view.p95_kg),
        levels=f"Drain at {words(view.drain_at_kg)}; it holds {words(view.capacity_kg)}. "
        + (f"Last drained {since}." if since else "Counted since the start: not drained yet."),
        due=view.due,
        when=_when(view, site),
    )


def _when(view: TrapView, site: Site) -> str:
    if view.due:
        return {"volume": "Drain it: the water has reached its level.",
                "calendar": "Drain it: the calendar asks for it."}.get(
            view.because or "", "Drain it."
        )  # fmt: skip
    if view.due_at_us is not None:
        return f"Next by the calendar: {_clock_words(view.due_at_us, site)}, however little is in."
    return "Not due by volume."


def _clock_words(time_us: int, site: Site) -> str:
    """A time on the shop's wall: "Tue 1 Dec, 09:00"."""
    local = to_datetime(time_us).astimezone(ZoneInfo(site.timezone))
    return f"{local:%a} {local.day} {local:%b}, {local:%H:%M}"
