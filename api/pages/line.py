"""The line page: every station as it is now, what each value comes from, and parts that changed."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from fastapi import APIRouter, Depends
from starlette.responses import HTMLResponse, Response

from api.keys import service_allowed
from api.models import ServiceIn
from api.pages.forms import Fields, is_fresh
from api.pages.frame import page
from api.problems import Problem
from api.routes.parts import service
from api.routes.running import TheDaemon
from daemon.journal import Serviced
from daemon.service_entries import KIND_WORDS, entries_of, sensors_of
from daemon.site.fitting_words import station_words
from daemon.views import Interval, Running, StationView, TrapView

router = APIRouter(include_in_schema=False)

_OUT_OF_DATE = "This page was out of date, and nothing was recorded: tap again."
LEFT, RIGHT = 10.0, 310.0  # of the drawing, in its own units


@dataclass(frozen=True, slots=True)
class Drawn:
    """Places on a station's drawing: one scale of temperature for the whole line."""

    here: float
    dew_low: float
    dew_high: float
    dew: float


@dataclass(frozen=True, slots=True)
class StationCard:
    """One station as the page shows it."""

    view: StationView
    kind: str
    trap: TrapView | None
    drawn: Drawn
    wet: str  # what the air that leaves is like, in words
    fittings: tuple[tuple[str, str], ...]
    changes: tuple[Serviced, ...]  # what can be said of its parts
    iced: bool  # cooled by ice that is renewed
    sensors: tuple[str, ...]  # those that speak of this place
    outlets: tuple[str, ...]  # that hang on it

    @property
    def stands_in(self) -> bool:
        """Whether a rule stands in for a sensor that is not heard."""
        values = (self.view.temperature, self.view.pressure, self.view.relative_humidity)
        return any(
            each is not None and each.origin == "rule" and each.words.startswith("sensor ")
            for each in values
        )


@router.get("/line")
def line(daemon: TheDaemon) -> HTMLResponse:
    """The stations in the order in which the air meets them."""
    return _line(daemon)


@router.post("/line/{station}/service", dependencies=[Depends(service_allowed)])
def changed(station: str, fields: Fields, daemon: TheDaemon) -> HTMLResponse:
    """Somebody changed a part, and their browser runs no script."""
    if not is_fresh(fields):
        return _line(daemon, _OUT_OF_DATE)
    what = fields.get("what", "")
    sensor = fields.get("sensor") or None
    known = {each.id: each for each in daemon.site.line.stations}
    if station in known and what not in entries_of(daemon.site, known[station]):
        raise Problem("invalid-request", f'"{what[:40]}" cannot be said of "{station}"')
    body = ServiceIn(what=what, sensor=sensor, by=fields.get("by") or None)  # type: ignore[arg-type]  # checked above
    service(station, body, daemon, Response())
    return _line(daemon, f"Noted: {what}. What was learned of the old part is forgotten.")


def _line(daemon: Running, told: str = "") -> HTMLResponse:
    views = daemon.stations()
    cards = _cards(daemon, views)
    return page(daemon, "line.html", here="/line", title="The line now", told=told, cards=cards)


def _cards(daemon: Running, views: Sequence[StationView]) -> list[StationCard]:
    site = daemon.site
    stations = {each.id: each for each in site.line.stations}
    traps = {each.trap: each for each in daemon.traps()}
    scale = _scale(views)
    return [
        StationCard(
            view=view,
            kind=KIND_WORDS[view.kind],
            trap=traps.get(view.station),
            drawn=_drawn(view, *scale),
            wet=_wet(view),
            fittings=tuple(station_words(stations[view.station], site.units)),
            changes=entries_of(site, stations[view.station]),
            iced=stations[view.station].ice is not None,
            sensors=sensors_of(stations[view.station]),
            outlets=tuple(each.id for each in site.line.outlets if each.after == view.station),
        )
        for view in views
    ]


def _scale(views: Sequence[StationView]) -> tuple[float, float]:
    """The coldest and the warmest of all that is drawn, K."""
    ends = [
        end
        for view in views
        for shown in (view.temperature.value, view.dew_point_k)
        for end in (shown.p05, shown.p95)
    ]
    return (min(ends), max(ends)) if ends else (0.0, 1.0)


def _drawn(view: StationView, coldest_k: float, warmest_k: float) -> Drawn:
    def place(kelvin: float) -> float:
        span = max(warmest_k - coldest_k, 1.0)
        return round(LEFT + (kelvin - coldest_k) / span * (RIGHT - LEFT), 1)

    dew: Interval = view.dew_point_k
    return Drawn(place(view.temperature.value.p50), place(dew.p05), place(dew.p95), place(dew.p50))


def _wet(view: StationView) -> str:
    if view.saturated >= 0.9:
        return "The air can hold no more: what cools it drops out as water."
    if view.saturated > 0.1:
        return "The air may be holding all that it can."
    return "The air has room for more."
