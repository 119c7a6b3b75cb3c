"""Switches the lamp or buzzer on for a moment, for `dripleg check`, so that somebody can look."""

from __future__ import annotations

import threading
from dataclasses import dataclass
from pathlib import Path

from daemon.asking import serves
from daemon.check import Section
from daemon.clock import Clock
from daemon.site.types import Signal, Site
from sensors.registry import Hardware

ON_S = 1.0
TITLE = "Lamp or buzzer now"


@dataclass(frozen=True, slots=True)
class Tried:
    """What came of it."""

    section: Section
    good: bool


def signal_section(
    site: Site, hardware: Hardware, clock: Clock, store_path: Path | None
) -> Tried | None:
    """None where the site has none. A daemon that runs has the line, and is not disturbed."""
    signal = site.signal
    if signal is None:
        return None
    if serves(site, store_path):
        text = f"  The running daemon switches the {signal.kind}: it was left alone."
        return Tried(Section(TITLE, (text,)), good=True)
    try:
        _flash(signal, hardware, clock)
    except (OSError, ImportError, ValueError) as error:  # ValueError: no such line on this chip
        said = getattr(error, "strerror", None) or str(error)
        lines = (
            f"  {signal.place} cannot be switched: {said}.",
            "      Look at chip and line in [signal], and whether another program has the line.",
        )
        return Tried(Section(TITLE, lines), good=False)
    lines = (
        f"  {signal.place} was switched on for {ON_S:g} s: did the {signal.kind} answer?",
        "      If not, look at its supply, its transistor, and `active` in [signal].",
    )
    return Tried(Section(TITLE, lines), good=True)


def _flash(signal: Signal, hardware: Hardware, clock: Clock) -> None:
    line = hardware.lines(signal.chip).output(signal.line, signal.active_high)
    try:
        line.set(True)
        clock.wait(ON_S, threading.Event())
    finally:
        line.close()
