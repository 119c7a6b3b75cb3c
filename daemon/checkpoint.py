"""A state as bytes and back, to the bit: JSON for the structure, raw float64 for the arrays."""

from __future__ import annotations

import json
import struct
import zlib
from collections.abc import Mapping
from dataclasses import fields, is_dataclass
from typing import Any

import numpy as np

from daemon.alarms import AlarmRecord
from daemon.drain_record import DrainRecord, DrainsWatched, Fall, Leak
from daemon.errors import StoreError
from daemon.followed import Followed
from daemon.foresight import Foresight, Kept, Score
from daemon.hour_figures import HourTally, Least, OutletTally
from daemon.moisture.beliefs import Parameters
from daemon.moisture.carried import Carried
from daemon.moisture.conditions import Conditions, Held, Lapse, Offsets
from daemon.moisture.contact import ContactState
from daemon.moisture.fitting_beliefs import FittingParameters
from daemon.moisture.fitting_state import FittingState
from daemon.moisture.floats import FloatSeen
from daemon.moisture.flow import AirState, PumpWatch
from daemon.moisture.learning import Suspect
from daemon.moisture.line import Ledger, WaterParameters, WaterState
from daemon.moisture.model import State
from daemon.moisture.observing import Gathered, Observed
from daemon.moisture.outlook import Pattern, Typical
from daemon.moisture.plant import Figure, Phase, Plant, Sample
from daemon.moisture.power import Powered
from daemon.moisture.week import Errors, Week
from daemon.older_states import completed
from daemon.outlet_record import GaugeHeld, OutletRecord
from daemon.reminders import Reminder, Reminders, Turn
from daemon.state import ChannelRecord, CoreState, HourTotals, Sensed, TrapRecord
from sensors.quality import ChannelState, QualityState

FORMAT = b"DLC1"
_CLASSES = {
    cls.__name__: cls
    for cls in (
        AirState,
        AlarmRecord,
        Carried,
        ChannelRecord,
        ChannelState,
        Conditions,
        ContactState,
        CoreState,
        Errors,
        Figure,
        FittingParameters,
        FittingState,
        DrainRecord,
        DrainsWatched,
        Fall,
        Leak,
        Followed,
        Foresight,
        GaugeHeld,
        FloatSeen,
        Gathered,
        Held,
        HourTally,
        HourTotals,
        Kept,
        Lapse,
        Least,
        Ledger,
        Observed,
        Offsets,
        OutletRecord,
        OutletTally,
        Parameters,
        Pattern,
        Phase,
        Plant,
        Powered,
        PumpWatch,
        QualityState,
        Reminder,
        Reminders,
        Sample,
        Score,
        Sensed,
        State,
        Suspect,
        TrapRecord,
        Turn,
        Typical,
        Week,
        WaterParameters,
        WaterState,
    )
}


def encode(state: CoreState, fingerprint: str) -> bytes:
    """The state as a blob that says which description of the line it belongs to."""
    arrays: list[bytes] = []
    structure = json.dumps([fingerprint, _flatten(state, arrays)]).encode()
    head = FORMAT + struct.pack("<I", len(structure))
    return zlib.compress(head + structure + b"".join(arrays), 1)


def decode(blob: bytes) -> tuple[CoreState, str]:
    """The state and the fingerprint of a blob; StoreError when it is not one."""
    try:
        raw = zlib.decompress(blob)
        if raw[:4] != FORMAT:
            raise ValueError("unknown format")
        (length,) = struct.unpack_from("<I", raw, 4)
        fingerprint, structure = json.loads(raw[8 : 8 + length])
        state = _rebuild(structure, memoryview(raw)[8 + length :])
        if not isinstance(state, CoreState):
            raise ValueError("not a state")
    except (zlib.error, ValueError, KeyError, TypeError, struct.error) as error:
        raise StoreError(f"a checkpoint cannot be read: {error}") from error
    return state, str(fingerprint)


def _flatten(value: Any, arrays: list[bytes]) -> Any:
    """JSON for everything but arrays, which are appended and pointed at."""
    flat: Any = value
    if isinstance(value, np.ndarray):
        flat = {"array": list(value.shape), "at": sum(len(each) for each in arrays)}
        arrays.append(np.ascontiguousarray(value, dtype="<f8").tobytes())
    elif is_dataclass(value):
        inner = {f.name: _flatten(getattr(value, f.name), arrays) for f in fields(value)}
        flat = {"class": type(value).__name__, "fields": inner}
    elif isinstance(value, frozenset):
        flat = {"set": sorted(value)}
    elif isinstance(value, tuple | list):
        flat = {"tuple": [_flatten(each, arrays) for each in value]}
    elif isinstance(value, Mapping):
        flat = {"map": [[key, _flatten(each, arrays)] for key, each in value.items()]}
    elif isinstance(value, np.floating):
        flat = float(value)
    return flat


def _rebuild(value: Any, raw: memoryview) -> Any:
    if not isinstance(value, dict):
        return value
    if "array" in value:
        shape = tuple(value["array"])
        count = int(np.prod(shape))
        found = np.frombuffer(raw, dtype="<f8", count=count, offset=value["at"])
        return found.reshape(shape).copy()
    if "class" in value:
        inner = {name: _rebuild(each, raw) for name, each in value["fields"].items()}
        return _CLASSES[value["class"]](**completed(value["class"], inner))
    if "set" in value:
        return frozenset(value["set"])
    if "tuple" in value:
        return tuple(_rebuild(each, raw) for each in value["tuple"])
    return {key: _rebuild(each, raw) for key, each in value["map"]}
