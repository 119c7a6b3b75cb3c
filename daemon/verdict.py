"""Whether it is dry enough: verdicts with their reasons and what would change them; pure.

Judged on the bad end of a 5-95 % interval, never on its median. Inputs that cannot be believed give
`unknown`, and only what somebody has seen (a blotter's stain) outranks them. Words are in the
site's units.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

from daemon.site.types import Units
from daemon.units import show_difference, show_percent, show_temperature
from daemon.views import Interval, Judgement, Verdict
from daemon.work import (
    HOLD_SURFACE_HUMIDITY,
    HOLD_SURFACE_MARGIN_K,
    LIQUID_KG_PER_M3,
    WAIT_BELOW_K,
    Profile,
)

_WORST_FIRST: tuple[Verdict, ...] = ("wait", "unknown", "care", "dry enough")
TOO_CLOSE = "Too close for these sensors: use your gauge."


def worst(verdicts: Iterable[Verdict]) -> Verdict:
    """The one that counts: wait before unknown before care before dry enough."""
    return min(verdicts, key=_WORST_FIRST.index, default="unknown")


@dataclass(slots=True)
class Findings:
    """What speaks for a verdict, gathered one after the other."""

    verdicts: list[Verdict] = field(default_factory=list)
    reasons: list[tuple[Verdict, str]] = field(default_factory=list)
    would_change: list[str] = field(default_factory=list)

    def add(self, verdict: Verdict, reason: str, would_change: str = "") -> None:
        """One finding, and what would change it."""
        self.verdicts.append(verdict)
        self.reasons.append((verdict, reason))
        if would_change and would_change not in self.would_change:
            self.would_change.append(would_change)

    def judgement(self) -> Judgement:
        """The worst finding decides; the reasons that made it so come first."""
        order = sorted(self.reasons, key=lambda found: _WORST_FIRST.index(found[0]))
        reasons = tuple(dict.fromkeys(reason for _, reason in order))
        return Judgement(worst(self.verdicts), reasons, tuple(self.would_change))


# ---- the air in the line ----


@dataclass(frozen=True, slots=True)
class LineFacts:
    """What is known of an outlet's air. None: not known."""

    margin_k: Interval | None
    dew_point_k: Interval | None
    carried_kg_per_m3: Interval | None
    coldest: str  # where the margin is least: "riser", "the hose", "the slab under the hose"
    wanted_k: float  # dry enough from here
    relieved: bool  # a dryer or a regulator stands before the outlet
    flooded: Sequence[str] = ()  # traps on the way that are full
    unusable: Sequence[str] = ()  # inputs that cannot be believed, in words
    oil_at: str = ""  # when a blotter showed oil, and no clean one since
    water_at: str = ""


def judge_line(units: Units, profile: Profile, facts: LineFacts) -> Judgement:
    """The verdict on the air in the line."""
    found = Findings()
    if facts.oil_at:
        found.add(
            "wait",
            f"The blotter showed oil ({facts.oil_at}): dripleg cannot see oil.",
            "Find where the oil comes from; then a clean blotter test.",
        )
    if facts.water_at:
        found.add(
            "wait",
            f"The blotter showed water ({facts.water_at}).",
            "Drain the traps, blow the hose out; then a clean blotter test.",
        )
    for reason in facts.unusable:
        found.add("unknown", f"{reason}.", "Look at its wiring and run `dripleg check`.")
    if facts.margin_k is None or facts.dew_point_k is None or facts.carried_kg_per_m3 is None:
        if not facts.unusable:
            found.add("unknown", "The air in the line is not known yet.")
        return found.judgement()
    _liquid(found, facts, facts.carried_kg_per_m3)
    _line_margin(found, units, facts, facts.margin_k)
    _pressure_dew_point(found, units, profile, facts.dew_point_k)
    return found.judgement()


def _liquid(found: Findings, facts: LineFacts, carried: Interval) -> None:
    if carried.p95 <= LIQUID_KG_PER_M3:
        return
    limit = grams(LIQUID_KG_PER_M3)
    about = "about" if carried.p50 > LIQUID_KG_PER_M3 else "perhaps none, but up to"
    amount = carried.p50 if carried.p50 > LIQUID_KG_PER_M3 else carried.p95
    reason = f"Liquid water comes along: {about} {grams(amount)} g per m3 (limit {limit})."
    if facts.flooded:
        names = ", ".join(facts.flooded)
        change = f"Drain {names}, which is full and lets water go on; then blow the hose out."
    else:
        change = "A clean blotter test says more; a coalescer before the regulator keeps it back."
    found.add("wait", reason, change)


def _line_margin(found: Findings, units: Units, facts: LineFacts, margin: Interval) -> None:
    interval = differences(margin, units)
    where = f"At {facts.coldest} the air is {interval} above its dew point"
    wait, wanted = (show_difference(each, units) for each in (WAIT_BELOW_K, facts.wanted_k))
    wide = margin.p50 >= facts.wanted_k
    if margin.p05 < WAIT_BELOW_K:
        found.add("wait", f"{where}; below {wait} it may drop out.", _drier(facts, wide))
    elif margin.p05 < facts.wanted_k:
        found.add("care", f"{where}; dry enough begins at {wanted}.", _drier(facts, wide))
    else:
        found.add("dry enough", f"{where}; {wanted} are asked for.")


def _drier(facts: LineFacts, wide: bool) -> str:
    """What would change a line margin: know it better where that is all, else drier air."""
    if wide:
        return (
            f"Its middle would do, but it is not known well enough: a sensor at {facts.coldest} "
            "or on the tank's outlet narrows it."
        )
    if not facts.relieved:
        return (
            "Neither a dryer nor a regulator stands before this outlet: its air stays saturated. "
            "A dryer, or a lower pressure here, would change it."
        )
    return "A lower pressure here, a warmer hose off the floor, or a dryer would change it."


def _pressure_dew_point(
    found: Findings, units: Units, profile: Profile, dew_point: Interval
) -> None:
    limit = profile.pressure_dew_point_k
    if limit is None or dew_point.p95 <= limit:
        return
    shown = temperatures(dew_point, units)
    found.add(
        "care",
        f"The pressure dew point is {shown}; {profile.name} work asks for "
        f"{show_temperature(limit, units)} at most.",
        "A dryer would change it.",
    )


# ---- the surface and the air around it ----


@dataclass(frozen=True, slots=True)
class SurfaceFacts:
    """What is known of a surface and the air around it. None: not known."""

    air_k: Interval | None = None
    humidity: Interval | None = None  # 0-1
    surface_k: Interval | None = None
    margin_k: Interval | None = None
    humidity_at_surface: Interval | None = None
    wanted_k: float = 3.0
    by_gauge: bool = False  # a painter's gauge has spoken, and still does
    low_at: str = ""  # when, within the hours that count, the margin may fall below, "" never
    unusable: Sequence[str] = ()


def judge_surface(units: Units, profile: Profile, facts: SurfaceFacts) -> Judgement:
    """The verdict on the surface and on the air around it."""
    found = Findings()
    for reason in facts.unusable:
        found.add("unknown", f"{reason}.", "Look at its wiring and run `dripleg check`.")
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
    for reason in facts.unusable:
        found.add("unknown", f"{reason}.", "Look at its wiring and run `dripleg check`.")
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


# ---- intervals in words ----


def differences(interval: Interval, units: Units) -> str:
    """ "6 K (4.2 to 8.9 K)"."""
    return _interval([show_difference(each, units) for each in interval.values])


def temperatures(interval: Interval, units: Units) -> str:
    """ "6 degC (4.2 to 8.9 degC)"."""
    return _interval([show_temperature(each, units) for each in interval.values])


def percents(interval: Interval) -> str:
    """ "62 % (59 to 65 %)"."""
    return _interval([show_percent(round(each, 2)) for each in interval.values])


def grams(kg: float) -> str:
    """Two figures of a mass in g."""
    return f"{float(f'{kg * 1e3:.2g}'):g}"


def _interval(shown: Sequence[str]) -> str:
    low, middle, high = shown
    return f"{middle} ({low.split(' ', 1)[0]} to {high})"
