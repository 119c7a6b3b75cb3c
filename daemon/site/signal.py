"""Reads the `[signal]` table: a lamp or a buzzer on a GPIO line."""

from __future__ import annotations

from collections.abc import Sequence
from typing import cast, get_args

from daemon.alarms import Priority
from daemon.site.notes import Notes, written
from daemon.site.table import Table
from daemon.site.types import Signal, SignalKind, SignalPattern
from daemon.site.values import choice
from sensors.contact import LINE_KEYS
from sensors.registry import DRIVERS, SensorConfig

SIGNAL_KEYS = ("kind", "chip", "line", "active", "priorities", "pattern")
PRIORITIES: tuple[Priority, ...] = get_args(Priority)
USUAL_PRIORITIES = Signal().priorities
_CHIP, _LINE = LINE_KEYS[0], LINE_KEYS[1]


def read_signal(notes: Notes, raw: object, sensors: Sequence[SensorConfig]) -> Signal | None:
    """The `[signal]` table; None without one."""
    if raw is None:
        return None
    table, usual = Table(notes, "signal", raw, SIGNAL_KEYS), Signal()
    if not table.said("line"):
        table.wrong("line", "it must be said: the line's number on the chip, GPIO 25 is 25")
    kinds = choice(get_args(SignalKind), "kind of signal")
    kind = table.value("kind", kinds, "lamp", '"lamp"', "a buzzer is said")
    levels, high = choice(("high", "low"), "level"), "a transistor that is on at 3.3 V"
    patterns, blinks = choice(get_args(SignalPattern), "pattern"), "until somebody has seen it"
    chip = table.value("chip", _CHIP.read, usual.chip, f'"{usual.chip}"', _CHIP.meaning)
    shown = written(list(usual.priorities))
    signal = Signal(
        kind=cast(SignalKind, kind),
        chip=chip,
        line=table.read("line", _LINE.read, usual.line),
        active_high=table.value("active", levels, "high", '"high"', high) == "high",
        priorities=table.value(
            "priorities", _priorities, usual.priorities, shown, "what can wait makes no light"
        ),
        pattern=cast(SignalPattern, table.value("pattern", patterns, "blink", '"blink"', blinks)),
    )
    _tell_shared(table, signal, sensors)
    return signal


def _priorities(raw: object) -> tuple[Priority, ...]:
    if not isinstance(raw, list) or not raw:
        raise ValueError(f"must be a list, like {written(list(USUAL_PRIORITIES))}")
    one = choice(PRIORITIES, "priority")
    named = [one(each) for each in raw]
    return tuple(each for each in PRIORITIES if each in named)


def _tell_shared(table: Table, signal: Signal, sensors: Sequence[SensorConfig]) -> None:
    if not table.ok("chip", "line"):
        return
    for config in sensors:
        if signal.place in DRIVERS[config.driver].occupies(config):
            table.wrong("line", f'the sensor "{config.id}" has this line; give one of them another')
