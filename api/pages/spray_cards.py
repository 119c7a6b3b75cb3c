"""One card an outlet: the verdict first, one reason, one remedy; then the margins and the rest."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from api.pages.scales import Scale, scale_of
from daemon.moisture.purity import class_words
from daemon.outlet_air import TYPED_GIVE_OR_TAKE_K
from daemon.site.types import Site
from daemon.units import show_difference
from daemon.verdict import liquid
from daemon.views import Interval, Judgement, OutletView, Verdict
from daemon.work import WAIT_BELOW_K


@dataclass(frozen=True, slots=True)
class Answer:
    """A verdict with the one reason and the one remedy that count most."""

    question: str  # "" where there is only one
    verdict: Verdict
    reason: str
    remedy: str


@dataclass(frozen=True, slots=True)
class Margin:
    """One of the two margins."""

    title: str
    interval: Interval | None
    wanted_k: float
    scale: Scale | None
    reasons: tuple[str, ...]
    note: str

    def told_by_reasons(self, shown: str) -> bool:
        """Whether the reasons beside the one that is shown above say how far it is."""
        return any("above" in reason for reason in self.reasons if reason != shown)


@dataclass(frozen=True, slots=True)
class OutletCard:
    """An outlet as the page shows it."""

    view: OutletView
    answers: tuple[Answer, ...]
    margins: tuple[Margin, ...]
    changes: tuple[str, ...]  # what would turn it into dry enough
    sensed: str  # the surface's infrared sensor, "" without one
    humidity_class: str
    carried: str  # of liquid, at most, with its unit; "" not known


def card_of(site: Site, view: OutletView, typed: str) -> OutletCard:
    """`typed` is the surface's temperature as somebody typed it, with its unit; "" none."""
    counts = _judgements(view)
    return OutletCard(
        view=view,
        answers=tuple(_answers(view, counts)),
        margins=(_air(view), _surface(site, view, typed)),
        changes=tuple(dict.fromkeys(c for judged in counts for c in judged.would_change)),
        sensed=surface_sensor(site, view.outlet),
        humidity_class=class_words(view.air.humidity_class),
        carried="" if (c := view.air.carried_kg_per_m3) is None else _liquid(c.p95, site),
    )


def _liquid(kg_per_m3: float, site: Site) -> str:
    return " ".join(liquid(kg_per_m3, site.units))


def surface_sensor(site: Site, outlet: str) -> str:
    """The sensor that an outlet's surface is measured by."""
    place = next(each for each in site.line.outlets if each.id == outlet)
    return place.surface.channel.rpartition(".")[0] if place.surface is not None else ""


def _judgements(view: OutletView) -> list[Judgement]:
    """Those that count for the verdict, the one that decides first."""
    both = [view.air.judgement, view.surface.judgement]
    deciding = [judged for judged in both if judged.verdict == view.verdict]
    return deciding + [judged for judged in both if judged not in deciding]


def _answers(view: OutletView, counts: Sequence[Judgement]) -> list[Answer]:
    first = counts[0]
    question = "" if view.holding is None else "Blast now"
    found = [Answer(question, view.verdict, _first(first.reasons), _first(first.would_change))]
    if view.holding is not None:
        held = view.holding
        found.append(
            Answer("Hold the blast", held.verdict, _first(held.reasons), _first(held.would_change))
        )
    return found


def _first(texts: Sequence[str]) -> str:
    return texts[0] if texts else ""


def _air(view: OutletView) -> Margin:
    air = view.air
    scale = None
    if air.line_margin_k is not None:
        scale = scale_of(air.line_margin_k, WAIT_BELOW_K, air.wanted_k)
    return Margin(
        "The air in the line", air.line_margin_k, air.wanted_k, scale, air.judgement.reasons, ""
    )


def _surface(site: Site, view: OutletView, typed: str) -> Margin:
    surface = view.surface
    scale = None
    if surface.surface_margin_k is not None:
        scale = scale_of(surface.surface_margin_k, surface.wanted_k, surface.wanted_k)
    sensor = surface_sensor(site, view.outlet)
    if typed:
        width = show_difference(TYPED_GIVE_OR_TAKE_K, site.units)
        note = f"With the surface at {typed}, as you typed it; give or take {width}."
    elif surface.by_gauge_until_us is not None:
        note = "By your gauge."
    elif sensor and surface.surface_k is not None:
        note = f"The surface as {sensor} sees it."
    else:
        note = ""
    return Margin(
        "The surface",
        surface.surface_margin_k,
        surface.wanted_k,
        scale,
        surface.judgement.reasons,
        note,
    )
