"""An emulated flow meter: closes its contact once for each volume that has gone through."""

from __future__ import annotations

from sensors.emulated.lines import EmulatedLine


class EmulatedMeter:
    """Pulses on a line, half of each at low level, for a flow that is set over time."""

    def __init__(self, line: EmulatedLine, volume_m3: float) -> None:
        self._line = line
        self._volume_m3 = volume_m3
        self._gone_m3 = 0.0
        self._flow = 0.0
        self._now_ns: int | None = None

    def set(self, flow_m3_s: float, now_ns: int) -> None:
        """The flow from now on; pulses of the flow until now are put on the line."""
        if self._now_ns is not None and self._flow > 0:
            self._run(self._now_ns, now_ns)
        self._flow, self._now_ns = flow_m3_s, now_ns

    def _run(self, from_ns: int, to_ns: int) -> None:
        half_m3 = self._volume_m3 / 2
        before = int(self._gone_m3 / half_m3)
        gone_m3 = self._gone_m3 + self._flow * (to_ns - from_ns) / 1e9
        for half in range(before + 1, int(gone_m3 / half_m3) + 1):
            at_ns = from_ns + round((half * half_m3 - self._gone_m3) / self._flow * 1e9)
            self._line.set(at_ns, 0 if half % 2 else 1)
        self._gone_m3 = gone_m3
