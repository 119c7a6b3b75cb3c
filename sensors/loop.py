"""4-20 mA transmitters through a resistor and an ADS1115: line pressure, and pressure dew point.

Wiring: the transmitter's loop supply (12 or 24 V, of its own), the transmitter, a 150 ohm resistor
to ground in series; the converter's input across the resistor, with 1 kohm in series to protect it.
At 20 mA it sees 3.0 V. Never the Pi's 5 V as a loop supply, and never 250 ohm: that is 5 V.

A live zero shows a broken wire. Source of the limits: NAMUR NE 43 (from memory): 3.8-20.5 mA is
signal, at or below 3.6 mA and at or above 21 mA is failure. A dew-point transmitter shows the dew
point at the pressure of its own cell: put it in a bypass at line pressure.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from sensors import keys, reasons
from sensors.adc import ADC_KEYS, Adc
from sensors.guard import faults
from sensors.keys import PressureRange, TemperatureRange
from sensors.reading import Channel, Reading, SensorFault, reading
from sensors.registry import Driver, Hardware, Key, SensorConfig, register

LOW_MA, HIGH_MA = 4.0, 20.0
SIGNAL_LOW_MA, SIGNAL_HIGH_MA = 3.8, 20.5
# a resistor of 1 % moves the upper end by 20 / 16 of that
_RESISTOR = 0.01 * HIGH_MA / (HIGH_MA - LOW_MA)
_UNDER = (LOW_MA - SIGNAL_LOW_MA) / (HIGH_MA - LOW_MA)
_OVER = (SIGNAL_HIGH_MA - HIGH_MA) / (HIGH_MA - LOW_MA)


class LoopTransmitter:
    """One current loop on one input of a converter."""

    def __init__(self, config: SensorConfig, hardware: Hardware) -> None:
        settings = config.settings
        self._id = config.id
        self._channels = _DRIVERS[config.driver].channels(config)
        self._input = int(settings["input"])
        self._resistor_ohm = float(settings["resistor_ohm"])
        self._lowest, self._highest = _ends(settings["range"])
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
            current_ma = self._adc.volts(self._input) / self._resistor_ohm * 1e3
        if current_ma < SIGNAL_LOW_MA:
            raise SensorFault(self._id, reasons.SIGNAL_LOW, f"{current_ma:.2f} mA")
        if current_ma > SIGNAL_HIGH_MA:
            raise SensorFault(self._id, reasons.SIGNAL_HIGH, f"{current_ma:.2f} mA")
        position = (current_ma - LOW_MA) / (HIGH_MA - LOW_MA)
        value = self._lowest + position * (self._highest - self._lowest)
        return [reading(self._channels[0], value, now_us)]

    def close(self) -> None:
        """The converter sleeps between conversions: nothing to let go of."""


def _ends(span: PressureRange | TemperatureRange) -> tuple[float, float]:
    if isinstance(span, PressureRange):
        return span.lowest_pa, span.highest_pa
    return span.lowest_k, span.highest_k


def _pressure_channels(config: SensorConfig) -> tuple[Channel, ...]:
    span: PressureRange = config.settings["range"]
    return (
        Channel(
            f"{config.id}.pressure",
            "pressure",
            10.0,
            span.lowest_pa - 1.01 * _UNDER * span.span_pa,
            span.highest_pa + 1.01 * _OVER * span.span_pa,
            math.hypot(config.settings["accuracy"], _RESISTOR) * span.span_pa,
            gauge=span.gauge,
        ),
    )


def _dew_point_channels(config: SensorConfig) -> tuple[Channel, ...]:
    span: TemperatureRange = config.settings["range"]
    return (
        Channel(
            f"{config.id}.dew_point",
            "dew_point",
            0.01,
            span.lowest_k - 1.01 * _UNDER * span.span_k,
            span.highest_k + 1.01 * _OVER * span.span_k,
            math.hypot(config.settings["give_or_take"], _RESISTOR * span.span_k),
        ),
    )


_RESISTOR_KEY = Key(
    "resistor_ohm", keys.number(10.0, 180.0), 150.0, "the resistor that the loop flows through"
)


def _occupies(config: SensorConfig) -> tuple[str, ...]:
    settings = config.settings
    return (f"bus {settings['bus']} address 0x{settings['address']:02x} input {settings['input']}",)


PRESSURE_LOOP = register(
    Driver(
        name="pressure-loop",
        summary="line pressure, 4-20 mA through a resistor and an ADS1115",
        keys=(
            *ADC_KEYS,
            _RESISTOR_KEY,
            Key("range", keys.pressure_range, meaning='what the label says, like "0-16 bar"'),
            Key("accuracy", keys.percent(0.0005, 0.2), 0.01, "of the range, the resistor apart"),
        ),
        channels=_pressure_channels,
        occupies=_occupies,
        bus=lambda c: f"i2c-{c.settings['bus']}",
        open=LoopTransmitter,
    )
)
DEW_POINT_LOOP = register(
    Driver(
        name="dew-point-loop",
        summary="pressure dew point, 4-20 mA through a resistor and an ADS1115",
        keys=(
            *ADC_KEYS,
            _RESISTOR_KEY,
            Key("range", keys.temperature_range, meaning='4 and 20 mA, like "-60 to 20 degC"'),
            Key(
                "give_or_take",
                keys.quantity("temperature difference", 0.05, 20.0),
                2.0,
                "the transmitter's own error, 95 % of the time",
            ),
        ),
        channels=_dew_point_channels,
        occupies=_occupies,
        bus=lambda c: f"i2c-{c.settings['bus']}",
        open=LoopTransmitter,
    )
)
_DRIVERS = {driver.name: driver for driver in (PRESSURE_LOOP, DEW_POINT_LOOP)}
