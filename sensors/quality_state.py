"""What the judgement of readings remembers and says: plain immutable records."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

from sensors.reading import Reading

Severity = Literal["bad", "doubt"]

OUT_OF_RANGE = "out of range"
TOO_FAST = "changes too fast"
FROZEN = "frozen"
SATURATED_ELEMENT = "humidity element saturated"
DISAGREES = "disagrees with its like"


@dataclass(frozen=True, slots=True)
class Verdict:
    """Something that began or ended to be so of a channel."""

    channel: str
    at_us: int
    reason: str
    severity: Severity  # "bad": its readings are not used; "doubt": two differ, nobody knows which
    began: bool
    detail: str = ""


@dataclass(frozen=True, slots=True)
class ChannelState:
    """What is remembered of a channel."""

    value: float = math.nan  # the last one that was believed
    time_us: int = 0
    same_since_us: int = 0  # since when it is exactly that
    repeated: int = 0  # how many readings in a row were that
    ran_us: int = 0  # how long the compressor ran since then
    moves: int = 0  # changes in quick succession, up to LIVELY_MOVES: then it was seen to live
    jumped: int = 0  # consecutive readings beyond what the rate allows
    jump_value: float = math.nan  # the last of those
    wet_since_us: int | None = None
    wet: bool = False
    said: Mapping[str, Severity] = field(default_factory=dict)  # verdicts that hold


@dataclass(frozen=True, slots=True)
class QualityState:
    """What is remembered of all channels."""

    channels: Mapping[str, ChannelState] = field(default_factory=dict)
    off_since_us: int | None = None
    last_us: int | None = None


@dataclass(frozen=True, slots=True)
class Judged:
    """A tick's outcome."""

    state: QualityState
    readings: tuple[Reading, ...]
    verdicts: tuple[Verdict, ...]
