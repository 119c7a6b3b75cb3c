"""`/spray`: whether it is dry enough, per outlet; a surface or a gauge typed in, a blotter test."""

from __future__ import annotations

import secrets
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Annotated

from fastapi import APIRouter, Query
from pydantic import ValidationError
from starlette.responses import HTMLResponse, RedirectResponse, Response

from api.outlet_models import BlotterIn, GaugeIn
from api.outlet_reports import SURFACE_LIMITS_C
from api.pages.forms import STALE, Fields, NumberError, is_fresh, number, words_of
from api.pages.frame import page
from api.pages.spray_cards import OutletCard, card_of
from api.problems import Problem
from api.routes.outlets import post_blotter, post_gauge
from api.routes.running import TheDaemon
from daemon.clock import MINUTE_US
from daemon.errors import JournalError
from daemon.units import show_temperature, to_si
from daemon.views import Running

router = APIRouter(include_in_schema=False)
SPREAD = {"metric": ("spread_k", "K"), "us": ("spread_f", "degF")}
SURFACE_SPEAKS_US = 30 * MINUTE_US  # as long as a gauge's reading
TEMPERATURE = {"metric": "degC", "us": "degF"}


@dataclass(frozen=True, slots=True)
class Told:
    """What a form is answered, and on which outlet's card."""

    outlet: str = ""
    form: str = ""  # "surface", "gauge", "blotter"
    words: str = ""
    wrong: bool = False
    typed: Mapping[str, str] = field(default_factory=dict)


@router.get("/spray")
def show(
    daemon: TheDaemon,
    outlet: Annotated[str, Query(max_length=80)] = "",
    surface: Annotated[str, Query(max_length=40)] = "",
    at: Annotated[int, Query(ge=0, le=2**53, description="when it was typed, Unix time, ms")] = 0,
) -> HTMLResponse:
    """The verdicts as they are now, for a surface of a typed temperature if one was sent.

    The page's script adds `at` to the address, which a phone opens again days later.
    """
    if not surface.strip():
        return _page(daemon)
    if at and daemon.clock.now_us() - at * 1000 > SURFACE_SPEAKS_US:
        words = "The surface was measured more than 30 minutes ago: measure it again."
        return _page(daemon, Told(outlet, "surface", words))
    try:
        surface_k = _surface_k(daemon, surface.strip())
    except NumberError as error:
        told = Told(outlet, "surface", str(error), True, {"surface": surface})
        return _page(daemon, told, 422)
    return _page(daemon, Told(outlet, "surface", typed={"surface": surface}), surface_k=surface_k)


@router.get("/spray/{outlet}/{rest:path}")
def back(outlet: str, rest: str) -> RedirectResponse:
    """Where a form without script has been: a second look there is a look at the page."""
    return RedirectResponse("/spray", 303)


@router.post("/spray/{outlet}/gauge")
def gauge(outlet: str, fields: Fields, daemon: TheDaemon) -> HTMLResponse:
    """A gauge's reading, from a browser without script."""
    name, _ = SPREAD[daemon.site.units]
    if not is_fresh(fields):
        return _page(daemon, Told(outlet, "gauge", STALE, True, fields))
    try:
        said = {each: text for each in ("by", "key") if (text := fields.get(each))}
        body = GaugeIn.model_validate({**said, name: number(fields.get(name, ""))})
        post_gauge(outlet, body, daemon, Response())
    except (Problem, JournalError, ValidationError, NumberError) as error:
        told = Told(outlet, "gauge", f"Not recorded. {words_of(error)}", True, fields)
        return _page(daemon, told, 422)
    return _page(daemon, Told(outlet, "gauge", "Recorded; it speaks for 30 minutes."))


@router.post("/spray/{outlet}/blotter")
def blotter(outlet: str, fields: Fields, daemon: TheDaemon) -> HTMLResponse:
    """A blotter test, from a browser without script."""
    if not is_fresh(fields):
        return _page(daemon, Told(outlet, "blotter", STALE, True))
    try:
        said = {each: text for each in ("result", "by", "key") if (text := fields.get(each))}
        post_blotter(outlet, BlotterIn.model_validate(said), daemon, Response())
    except (Problem, JournalError, ValidationError) as error:
        told = Told(outlet, "blotter", f"Not recorded. {words_of(error)}", True)
        return _page(daemon, told, 422)
    return _page(daemon, Told(outlet, "blotter", "Recorded."))


def _surface_k(daemon: Running, text: str) -> float:
    """A typed temperature in K; NumberError says what to type."""
    units = daemon.site.units
    kelvin = to_si(number(text), TEMPERATURE[units], "temperature")
    least, most = (to_si(each, "degC", "temperature") for each in SURFACE_LIMITS_C)
    if not least <= kelvin <= most:
        raise NumberError(
            f"{text} {TEMPERATURE[units]} is no surface to be sprayed: type "
            f"{show_temperature(least, units)} to {show_temperature(most, units)}."
        )
    return kelvin


def _page(
    daemon: Running,
    told: Told | None = None,
    status: int = 200,
    surface_k: float | None = None,
) -> HTMLResponse:
    told = told or Told()
    cards = _cards(daemon, told, surface_k)
    name, unit = SPREAD[daemon.site.units]
    return page(
        daemon,
        "spray.html",
        here="/spray",
        title="Dry enough to spray?",
        status=status,
        cards=cards,
        names=[card.view.outlet for card in cards],
        told=told,
        spread_name=name,
        spread_unit=unit,
        temperature_unit=TEMPERATURE[daemon.site.units],
        new_key=lambda: f"form-{secrets.token_hex(8)}",
    )


def _cards(daemon: Running, told: Told, surface_k: float | None) -> list[OutletCard]:
    cards = []
    for view in daemon.outlets():
        shown, typed = view, ""
        if surface_k is not None and told.outlet in ("", view.outlet):
            shown = daemon.margin(view.outlet, surface_k) or view
            typed = f"{told.typed['surface'].strip()} {TEMPERATURE[daemon.site.units]}"
        cards.append(card_of(daemon.site, shown, typed))
    return cards
