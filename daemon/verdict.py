"""Verdicts: how findings become one, with its reasons and what would change it; pure.

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

# NIST Handbook 44, appendix C
KG_PER_GRAIN, M3_PER_FT3 = 64.798_91e-6, 0.028_316_846_592
_GRAMS = ("g per m3", 1e-3, 1.0)
_WORST_FIRST: tuple[Verdict, ...] = ("wait", "unknown", "care", "dry enough")


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

    def failed(self, inputs: Iterable[str]) -> None:
        """Inputs that cannot be believed, in words."""
        for text in inputs:
            sentence = text if text.endswith(("?", ".")) else f"{text}."
            self.add("unknown", sentence, "Look at its wiring and run `dripleg check`.")

    def judgement(self) -> Judgement:
        """The worst finding decides; the reasons that made it so come first."""
        order = sorted(self.reasons, key=lambda found: _WORST_FIRST.index(found[0]))
        reasons = tuple(dict.fromkeys(reason for _, reason in order))
        return Judgement(worst(self.verdicts), reasons, tuple(self.would_change))


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


def liquid(kg_per_m3: float, units: Units) -> tuple[str, str]:
    """Liquid carried along, two figures and the unit: ("0.42", "g per m3") or grains per ft3."""
    unit, kg, m3 = ("grains per ft3", KG_PER_GRAIN, M3_PER_FT3) if units == "us" else _GRAMS
    return f"{float(f'{kg_per_m3 * m3 / kg:.2g}'):g}", unit


def _interval(shown: Sequence[str]) -> str:
    low, middle, high = shown
    return f"{middle} ({low.split(' ', 1)[0]} to {high})"
