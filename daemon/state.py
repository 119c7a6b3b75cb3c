"""What a tick hands to the next one, takes in, and marks: plain immutable records."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Literal

from daemon.alarms import AlarmRecord
from daemon.drain_record import DrainsWatched
from daemon.due import NO_DATE
from daemon.followed import Followed
from daemon.hour_figures import HourTally
from daemon.journal import Entry
from daemon.moisture.ensemble import Array
from daemon.moisture.floats import FloatSeen
from daemon.moisture.learning import Suspect
from daemon.moisture.model import State
from daemon.moisture.observing import Observed
from daemon.outlet_record import OutletRecord
from daemon.views import Interval, Verdict
from sensors.quality import QualityState
from sensors.reading import Reading


@dataclass(frozen=True, slots=True)
class TrapRecord:
    """When a trap was last drained, and when its calendar asks again."""

    last_drain_us: int = -1
    calendar_due_us: int = NO_DATE
    suspect: Suspect | None = None  # its last measurement, while it is too far off to be believed


@dataclass(frozen=True, slots=True)
class ChannelRecord:
    """The last that a channel said, good or bad."""

    value: float = float("nan")  # of the last good reading
    time_us: int = -1  # of the last good reading
    heard_us: int = -1  # of the last reading of any kind
    fault: str = ""  # of the last reading
    only_edges: bool = False  # a contact that has not repeated its value: silence is normal


@dataclass(frozen=True, slots=True)
class HourTotals:
    """What has moved since the last full hour, or since the beginning. Arrays are (members,)."""

    from_us: int
    on_s: Array
    drawn_kg: Array
    used_kg: Array


@dataclass(frozen=True, slots=True)
class Sensed:
    """What the line's sensors said besides temperatures and pressures."""

    observed: Mapping[str, Observed] = field(default_factory=dict)  # by station: dew points
    floats: Mapping[str, FloatSeen] = field(default_factory=dict)  # by channel
    salted: Mapping[str, int] = field(default_factory=dict)  # by sensor: its last salt check


@dataclass(frozen=True, slots=True)
class CoreState:
    """Everything that a tick hands to the next one."""

    model: State
    begun_us: int
    stations: tuple[str, ...]  # the rows of the model's arrays
    traps: Mapping[str, TrapRecord]
    channels: Mapping[str, ChannelRecord]
    alarms: Mapping[str, AlarmRecord]
    hour: HourTotals
    followed: Followed
    outlets: Mapping[str, OutletRecord] = field(default_factory=dict)
    quality: QualityState = field(default_factory=QualityState)
    sensed: Sensed = field(default_factory=Sensed)
    drains: DrainsWatched = field(default_factory=DrainsWatched)
    hourly: HourTally | None = None  # for the weekly log; None: nothing is gathered

    @property
    def time_us(self) -> int:
        return self.model.time_us


@dataclass(frozen=True, slots=True)
class OutletMark:
    """An outlet's air at one full hour. None: not known."""

    outlet: str
    pressure_dew_point_k: Interval | None
    line_margin_k: Interval | None
    carried_p95_kg_per_m3: float | None
    verdict: Verdict


@dataclass(frozen=True, slots=True)
class Mark:
    """The traps at one full hour, at one drain (before the emptying) or at the beginning."""

    at_us: int
    kind: Literal["hour", "drain"]
    traps: tuple[str, ...]
    kg: Array  # (3, traps): 5, 50, 95 %
    probability_due: Array  # (traps,)
    hour: HourTotals | None = None  # what moved in the hour that ends here
    outlets: tuple[OutletMark, ...] = ()  # at full hours


@dataclass(frozen=True, slots=True)
class Inputs:
    """What arrived since the last tick: readings and entries, none after `now`."""

    readings: Sequence[Reading] = ()
    entries: Sequence[Entry] = ()
