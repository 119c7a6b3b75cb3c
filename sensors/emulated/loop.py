"""An emulated 4-20 mA transmitter on a converter's input.

Source of what it does when it fails: NAMUR NE 43 (from memory): 3.6 mA or less, or 21 mA or more.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass
class CurrentLoop:
    """A current set by what is measured, through a resistor to ground."""

    lowest: float
    highest: float
    resistor_ohm: float = 150.0
    value: float = 0.0  # in the unit of its ends
    wire_off: bool = False
    failed_ma: float | None = None  # it signals its own failure: 3.5 or 21.5

    @property
    def current_ma(self) -> float:
        if self.wire_off:
            return 0.0
        if self.failed_ma is not None:
            return self.failed_ma
        position = (self.value - self.lowest) / (self.highest - self.lowest)
        return min(max(4.0 + 16.0 * position, 3.8), 20.5)

    @property
    def volts(self) -> float:
        return self.current_ma * 1e-3 * self.resistor_ohm
