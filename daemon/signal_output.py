"""The lamp or buzzer: what it shows of the alarms, and the thread that switches it.

After ISA-18.2 an alarm asks for somebody until it is acknowledged. A lamp shows by its pattern what
nobody has seen, steadily what was seen and is still so, and goes out when that is over. A buzzer
calls until it was seen, in working hours only: there is nobody to hear it otherwise. What is put
off, suppressed by design or out of service shows nothing.

It has a thread of its own and the real time: no tick waits for it, and a line that cannot be had
stops nothing. The line is switched off and given back at a stop.
"""

from __future__ import annotations

import logging
import threading
from collections.abc import Callable, Iterable, Sequence
from typing import Literal, Protocol

from daemon.alarms import Alarm
from daemon.clock import Clock
from daemon.site.types import Signal, SignalKind
from sensors.lines import OutputLine

log = logging.getLogger("dripleg")

Show = Literal["off", "steady", "pattern"]
STEP_S = 0.25
LOOK_EVERY_S = 1.0
RETRY_EVERY_S = 30.0
# on for how long, of how long: a lamp's blink, a buzzer's call that can be borne
_BLINKS: dict[SignalKind, tuple[float, float]] = {"lamp": (0.5, 1.0), "buzzer": (0.5, 10.0)}


class Outputs(Protocol):
    """The lines of one chip, as far as they are switched."""

    def output(self, number: int, active_high: bool) -> OutputLine: ...


def wanted(signal: Signal, alarms: Iterable[Alarm], is_open: bool) -> Show:
    """What to show of the alarms as they stand."""
    states = {alarm.state for alarm in alarms if alarm.priority in signal.priorities}
    if "unacknowledged" in states and (signal.kind == "lamp" or is_open):
        return "steady" if signal.pattern == "steady" else "pattern"
    return "steady" if signal.kind == "lamp" and "acknowledged" in states else "off"


def is_on(kind: SignalKind, show: Show, since_s: float) -> bool:
    """Whether it is switched on, so long after it began to show that."""
    if show != "pattern":
        return show == "steady"
    on_s, of_s = _BLINKS[kind]
    return since_s % of_s < on_s


class SignalOutput:
    """Switches the line. `step` is all that the thread does, again and again."""

    def __init__(
        self,
        signal: Signal,
        outputs: Outputs,
        alarms: Callable[[], Sequence[Alarm]],
        is_open: Callable[[], bool],
        clock: Clock,
    ) -> None:
        self._signal, self._outputs = signal, outputs
        self._alarms, self._is_open, self._clock = alarms, is_open, clock
        self._line: OutputLine | None = None
        self._show: Show = "off"
        self._since_s = self._looked_s = self._tried_s = float("-inf")
        self._on = False
        self._stop = threading.Event()
        self._thread = threading.Thread(target=self._run, name="signal", daemon=True)
        self.problem = ""  # why it cannot be switched, in words

    def start(self) -> None:
        """Begin, in the background."""
        self._thread.start()

    def stop(self) -> None:
        """Switch off, give the line back, end. May be called twice."""
        self._stop.set()
        if self._thread.ident is not None:
            self._thread.join()
        self.close()

    def close(self) -> None:
        """Switch off and give the line back."""
        line, self._line = self._line, None
        if line is not None:
            try:
                line.close()
            except OSError as error:
                log.warning("%s could not be given back: %s", self._signal.place, error)

    def _run(self) -> None:
        while not self._stop.is_set():
            self.step()
            self._clock.wait(STEP_S, self._stop)

    def step(self) -> None:
        """Look at the alarms now and then, and switch. Never raises."""
        now_s = self._clock.monotonic()
        try:
            if now_s - self._looked_s >= LOOK_EVERY_S:
                self._looked_s = now_s
                self._take(wanted(self._signal, self._alarms(), self._is_open()), now_s)
            self._switch(now_s)
        except Exception as error:  # whatever it is: the shop's work goes on
            self._failed(error)

    def _take(self, show: Show, now_s: float) -> None:
        if show != self._show:
            self._show, self._since_s = show, now_s

    def _switch(self, now_s: float) -> None:
        if self._line is None:
            if now_s - self._tried_s < RETRY_EVERY_S:
                return
            self._tried_s = now_s
            self._line = self._outputs.output(self._signal.line, self._signal.active_high)
            self._on = False
            if self.problem:
                log.info(
                    "the %s on %s can be switched again", self._signal.kind, self._signal.place
                )
            self.problem = ""
        on = is_on(self._signal.kind, self._show, now_s - self._since_s)
        if on != self._on:
            self._line.set(on)
            self._on = on

    def _failed(self, error: Exception) -> None:
        said = getattr(error, "strerror", None) or str(error) or repr(error)
        problem = (
            f"the {self._signal.kind} on {self._signal.place} cannot be switched ({said}): look "
            "whether another program has the line, and at [signal]"
        )
        if not self.problem:
            log.warning("%s", problem)
        self.problem = problem
        self.close()
