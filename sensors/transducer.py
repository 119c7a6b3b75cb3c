"""Pressure transducer, ratiometric 0.5-4.5 V of a 5 V supply, through an ADS1115.

Wiring: supply and ground at 5 V; signal through a divider to the converter's input; the 5 V rail
through an equal divider to a spare input (`supply_input`), because the signal is a share of the
supply and a Pi's 5 V rail moves by 5 %. Fit the transducer into a tee of a line that is let down
and vented; its rating must be above the safety valve's setting; never drill a receiver.

Signal: 10 % of the supply at the lower end of the range, 90 % at the upper. What it costs to leave
the rail unread: supply give or take 5 % (USB's rail) moves the upper end by 0.9 / 0.8 x 5 % of the
range, and two 1 % resistors by a third of their 2 %.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from sensors import keys, reasons
from sensors.adc import ADC_KEYS, Adc
from sensors.guard import faults
from sensors.keys import PressureRange
from sensors.reading import Channel, Reading, SensorFault, reading
from sensors.registry import Driver, Hardware, Key, SensorConfig, register

NOMINAL_SUPPLY_V = 5.0
SUPPLY_LOWEST_V, SUPPLY_HIGHEST_V = 4.5, 5.5  # usual data sheets: 5 V, 10 % either way
_LOW, _SPAN = 0.1, 0.8  # of the supply
_BEYOND = 0.025  # of the span: past either end before it is a fault
_UNREAD_SUPPLY = 0.05 + 0.0067  # fraction of the signal: rail, and divider of 1 % resistors
_STEP_PA = 10.0


class PressureTransducer:
    """One transducer on one input of a converter."""

    def __init__(self, config: SensorConfig, hardware: Hardware) -> None:
        settings = config.settings
        self._id = config.id
        self._channels = channels(config)
        self._input = int(settings["input"])
        self._supply_input: int | None = settings["supply_input"]
        self._divider = float(settings["divider"])
        self._range: PressureRange = settings["range"]
        with faults(self._id):
            self._adc = Adc(self._id, hardware, int(settings["bus"]), int(settings["address"]))

    @property
    def id(self) -> str:
        return self._id

    @property
    def channels(self) -> Sequence[Channel]:
        return self._channels

    def read(self, now_us: int) -> Sequence[Reading]:
        with faults(self._id):
            supply_v = self._supply_v()
            share = self._adc.volts(self._input) / self._divider / supply_v
        position = (share - _LOW) / _SPAN
        if not -_BEYOND <= position <= 1 + _BEYOND:
            reason = reasons.SIGNAL_LOW if position < 0 else reasons.SIGNAL_HIGH
            raise SensorFault(self._id, reason, f"{share:.1%} of a supply of {supply_v:.2f} V")
        pressure_pa = self._range.lowest_pa + position * self._range.span_pa
        return [reading(self._channels[0], pressure_pa, now_us)]

    def close(self) -> None:
        """The converter sleeps between conversions: nothing to let go of."""

    def _supply_v(self) -> float:
        if self._supply_input is None:
            return NOMINAL_SUPPLY_V
        try:
            volts = self._adc.volts(self._supply_input) / self._divider
        except SensorFault as fault:
            if fault.reason != reasons.SIGNAL_HIGH:
                raise
            raise SensorFault(self._id, reasons.SUPPLY, fault.detail) from None
        if not SUPPLY_LOWEST_V <= volts <= SUPPLY_HIGHEST_V:
            raise SensorFault(self._id, reasons.SUPPLY, f"{volts:.2f} V")
        return volts


def channels(config: SensorConfig) -> tuple[Channel, ...]:
    """One pressure; its give or take is of the whole range, wider with the supply unread."""
    span: PressureRange = config.settings["range"]
    error = float(config.settings["accuracy"])
    if config.settings["supply_input"] is None:
        error = math.hypot(error, _UNREAD_SUPPLY * (_LOW + _SPAN) / _SPAN)
    beyond_pa = _BEYOND * span.span_pa
    return (
        Channel(
            f"{config.id}.pressure",
            "pressure",
            _STEP_PA,
            span.lowest_pa - beyond_pa,
            span.highest_pa + beyond_pa,
            error * span.span_pa,
            gauge=span.gauge,
        ),
    )


TRANSDUCER = register(
    Driver(
        name="pressure-transducer",
        summary="line pressure, 0.5-4.5 V ratiometric through an ADS1115",
        keys=(
            *ADC_KEYS,
            Key(
                "supply_input",
                keys.optional(keys.whole(0, 3)),
                None,
                "the input that reads the 5 V rail through an equal divider; without it 5 V is "
                "assumed, give or take 5 %",
            ),
            Key("divider", keys.number(0.05, 1.0), 0.6667, "what share of the signal arrives"),
            Key("range", keys.pressure_range, meaning='what the label says, like "0-12 bar"'),
            Key(
                "accuracy",
                keys.percent(0.0005, 0.2),
                0.015,
                "of the range, everything included, 95 % of the time",
            ),
        ),
        channels=channels,
        occupies=lambda c: (
            f"bus {c.settings['bus']} address 0x{c.settings['address']:02x} "
            f"input {c.settings['input']}",
        ),
        bus=lambda c: f"i2c-{c.settings['bus']}",
        open=PressureTransducer,
    )
)
