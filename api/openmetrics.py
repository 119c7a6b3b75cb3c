"""The OpenMetrics text format, version 1.0 (prometheus.io/docs/specs/om/open_metrics_spec).

Families of samples, each with its help, type and unit, and an end that tells a cut answer from a
whole one.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Literal

MEDIA_TYPE = "application/openmetrics-text; version=1.0.0; charset=utf-8"

Labels = Mapping[str, str]
Type = Literal["gauge", "counter", "stateset", "info"]
_SUFFIXES: dict[Type, str] = {"counter": "_total", "info": "_info", "gauge": "", "stateset": ""}


@dataclass(slots=True)
class Family:
    """Samples of one name. The name ends in its unit, where it has one."""

    name: str
    help: str
    type: Type = "gauge"
    unit: str = ""
    samples: list[tuple[Labels, float]] = field(default_factory=list)

    def add(self, value: float | None, **labels: str) -> None:
        """One sample; none where the value is not known."""
        if value is not None:
            self.samples.append((labels, value))

    def state(self, states: Sequence[str], now: str, **labels: str) -> None:
        """One sample a state: 1 for the one that is so."""
        self.samples += [({**labels, self.name: each}, float(each == now)) for each in states]


def written(families: Iterable[Family]) -> str:
    """All families that have samples, and the end."""
    lines = [line for family in families if family.samples for line in _lines(family)]
    return "\n".join([*lines, "# EOF", ""])


def _lines(family: Family) -> Iterator[str]:
    yield f"# TYPE {family.name} {family.type}"
    if family.unit:
        yield f"# UNIT {family.name} {family.unit}"
    yield f"# HELP {family.name} {_escaped(family.help)}"
    name = f"{family.name}{_SUFFIXES[family.type]}"
    for labels, value in family.samples:
        yield f"{name}{_labels(labels)} {_number(value)}"


def _labels(labels: Labels) -> str:
    if not labels:
        return ""
    return "{" + ",".join(f'{name}="{_escaped(text)}"' for name, text in labels.items()) + "}"


def _escaped(text: str) -> str:
    return text.replace("\\", "\\\\").replace("\n", "\\n").replace('"', '\\"')


def _number(value: float) -> str:
    return str(int(value)) if float(value).is_integer() and abs(value) < 1e15 else repr(value)
