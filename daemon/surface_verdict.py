"""Whether a surface, and the air around it, are dry enough; pure."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from daemon.site.types import Units
from daemon.units import show_difference, show_percent, show_temperature
from daemon.verdict import Findings, differences, percents, temperatures
from daemon.views import Interval, Judgement
from daemon.work import HOLD_SURFACE_HUMIDITY, HOLD_SURFACE_MARGIN_K, SURFACE_MARGIN_K, Profile

TOO_CLOSE = "Too close for these sensors: use your gauge."


@dataclass(frozen=True, slots=True)
class SurfaceFacts:
    """What is known of a surface and the air around it. None: not known."""

    air_k: Interval | None = None
    humidity: Interval | None = None  # 0-1
    surface_k: Interval | None = None
    margin_k: Interval | None = None
    humidity_at_surface: Interval | None = None
    wanted_k: float = SURFACE_MARGIN_K
    by_gauge: bool = False  # a painter's gauge has spoken, and still does
    low_at: str = ""  # when, within the hours that count, the margin may fall below, "" never
    unusable: Sequence[str] = ()


def judge_surface(units: Units, profile: Profile, facts: SurfaceFacts) -> Judgement:
    """The verdict on the surface and on the air around it."""
    found = Findings()
    found.failed(facts.unusable)
    if facts.unusable:
        return found.judgement()
    if facts.air_k is not None and facts.humidity is not None:
        _air_around(found, units, profile, facts.air_k, facts.humidity)
    elif profile.name or not facts.by_gauge:
        found.add(
            "unknown",
            "Nobody measures the air around.",
            "Name the sensor in it as surroundings, or take your gauge's reading.",
        )
    if profile.surface_rule:
        _surface_margin(found, units, facts)
    return found.judgement()


def _air_around(
    found: Findings, units: Units, profile: Profile, air_k: Interval, humidity: Interval
) -> None:
    least_k, most_k = profile.air_k.least, profile.air_k.most
    if least_k is not None and air_k.p05 < least_k:
        limit = show_temperature(least_k, units)
        found.add(
            "wait", f"The air around is {temperatures(air_k, units)}; {limit} is the least.",
            _nearer(air_k.p50 >= least_k, "Warm the air."),
        )  # fmt: skip
    if most_k is not None and air_k.p95 > most_k:
        limit = show_temperature(most_k, units)
        found.add(
            "wait", f"The air around is {temperatures(air_k, units)}; {limit} is the most.",
            _nearer(air_k.p50 <= most_k, "Cool the air."),
        )  # fmt: skip
    shown = percents(humidity)
    least, most, care = profile.humidity.least, profile.humidity.most, profile.humidity_care
    if most is not None and humidity.p95 > most:
        found.add(
            "wait", f"The air around has {shown} RH; {show_percent(most)} is the most.",
            _nearer(humidity.p50 <= most, "Warm or dry the air; mind that gas heaters wet it."),
        )  # fmt: skip
    elif care is not None and humidity.p95 > care:
        found.add("care", f"The air around has {shown} RH; above {show_percent(care)} take care.")
    if least is not None and humidity.p05 < least:
        found.add(
            "care", f"The air around has {shown} RH; {show_percent(least)} is the least.",
            _nearer(humidity.p50 >= least, "Moisten the air."),
        )  # fmt: skip
    if not found.verdicts:
        found.add("dry enough", f"The air around is {temperatures(air_k, units)}, {shown} RH.")


def _nearer(median_would_do: bool, change: str) -> str:
    return TOO_CLOSE if median_would_do else change


def _surface_margin(found: Findings, units: Units, facts: SurfaceFacts) -> None:
    margin = facts.margin_k
    if margin is None:
        found.add(
            "unknown",
            "The surface's temperature is not known.",
            "Type it in, name an infrared sensor as surface, or take your gauge's reading.",
        )
        return
    limit = show_difference(facts.wanted_k, units)
    gauge = " by your gauge" if facts.by_gauge else ""
    where = f"The surface is {differences(margin, units)} above the dew point of the air{gauge}"
    if margin.p05 < facts.wanted_k:
        found.add("wait", f"{where}; {limit} are asked for.", _warmer(units, facts, margin))
    elif facts.low_at:
        found.add(
            "care",
            f"{where}, but it may fall below {limit} from {facts.low_at} on, before it is through.",
            "Keep the room warm, or begin when there is time enough.",
        )
    else:
        found.add("dry enough", f"{where}; {limit} are asked for.")


def _warmer(units: Units, facts: SurfaceFacts, margin: Interval) -> str:
    if margin.p50 >= facts.wanted_k and not facts.by_gauge:
        return TOO_CLOSE
    if facts.surface_k is None:
        return "Warm the surface, or dry the air around it."
    needed_k = facts.surface_k.p50 + facts.wanted_k - margin.p05
    return f"Warm the surface to {show_temperature(needed_k, units)}, or dry the air around it."


def judge_holding(units: Units, facts: SurfaceFacts) -> Judgement:
    """Whether blasted steel may be left bare: more spread, and a dry film of air at the steel."""
    found = Findings()
    found.failed(facts.unusable)
    margin, humidity = facts.margin_k, facts.humidity_at_surface
    if facts.unusable or margin is None or humidity is None:
        if not facts.unusable:
            found.add("unknown", "The surface or the air around it is not known.")
        return found.judgement()
    limit = show_difference(HOLD_SURFACE_MARGIN_K, units)
    most = show_percent(HOLD_SURFACE_HUMIDITY)
    enough = margin.p05 >= HOLD_SURFACE_MARGIN_K and humidity.p95 <= HOLD_SURFACE_HUMIDITY
    found.add(
        "dry enough" if enough else "wait",
        f"To hold a blast {limit} of spread and at most {most} RH at the surface are asked for: "
        f"there are {differences(margin, units)} and {percents(humidity)}.",
        "" if enough else "Coat it before it turns, or dry the air around it.",
    )
    return found.judgement()
