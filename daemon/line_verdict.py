"""Whether the air in the line is dry enough; pure."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from daemon.site.types import Units
from daemon.units import show_difference, show_temperature
from daemon.verdict import Findings, differences, liquid, temperatures
from daemon.views import Interval, Judgement
from daemon.work import LIQUID_KG_PER_M3, WAIT_BELOW_K, Profile


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
    warm: str = ""  # the last trap on the way, where it stands clearly warmer than the hose
    warmer_k: float = 0.0  # by so much
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
    found.failed(facts.unusable)
    if facts.margin_k is None or facts.dew_point_k is None or facts.carried_kg_per_m3 is None:
        if not facts.unusable:
            found.add("unknown", "The air in the line is not known yet.")
        return found.judgement()
    _liquid(found, units, facts, facts.carried_kg_per_m3)
    _line_margin(found, units, facts, facts.margin_k)
    _pressure_dew_point(found, units, profile, facts.dew_point_k)
    return found.judgement()


def _liquid(found: Findings, units: Units, facts: LineFacts, carried: Interval) -> None:
    if carried.p95 <= LIQUID_KG_PER_M3:
        return
    about = "about" if carried.p50 > LIQUID_KG_PER_M3 else "perhaps none, but up to"
    amount = carried.p50 if carried.p50 > LIQUID_KG_PER_M3 else carried.p95
    (shown, unit), (limit, _) = liquid(amount, units), liquid(LIQUID_KG_PER_M3, units)
    reason = f"Liquid water comes along: {about} {shown} {unit} (limit {limit})."
    if facts.flooded:
        names = ", ".join(facts.flooded)
        change = f"Drain {names}, which is full and lets water go on; then blow the hose out."
    else:
        change = "A blotter test says more; a good coalescer as the last trap keeps it back."
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
        return
    if facts.warm:
        found.would_change.append(
            f"Let the line cool: {facts.warm} is {show_difference(facts.warmer_k, units)} warmer "
            "than the hose, so water goes past it as vapor and drops out later."
        )


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
