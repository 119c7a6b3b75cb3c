"""Parts that fail at random, for hours: what is called good is true, and nothing is left behind."""

from __future__ import annotations

import random
import threading
from collections.abc import Callable

import pytest

from sensors.emulated.bme280 import Calibration
from sensors.emulated.hardware import EmulatedHardware
from sensors.emulated.lines import EmulatedLine
from sensors.registry import DRIVERS
from sensors.sampling import Sampler
from tests.sensors.support import SECOND_US, START_US, HandClock, config

SERIAL = "28-0123456789ab"
SENSORS = [
    config("air", "bme280"),
    config("tank", "pressure-transducer", input=0, supply_input=3, range="0-12 bar"),
    config("dryer", "dew-point-loop", input=2, range="-60 to 20 degC"),
    config("panel", "mlx90614"),
    config("pipe", "ds18b20", serial=SERIAL),
    config("motor", "contact", line=17),
]
NEAR = {
    "air.temperature": 0.0101,
    "air.relative_humidity": 3e-4,
    "air.pressure": 2.5,
    "tank.pressure": 80.0,
    "dryer.dew_point": 0.0071,
    "panel.temperature": 0.0101,
    "pipe.temperature": 0.0363,
    "motor.contact": 0.0,
}
OTHER_PART = Calibration(t=(28200, 26500, 50), h=(75, 355, 0, 330, 0, 30))


class Trouble:
    """Breaks and mends parts at random, from a seed."""

    def __init__(self, hardware: EmulatedHardware, seed: int) -> None:
        self.random = random.Random(seed)
        self.air = hardware.bme280(1, 0x76)
        self.adc = hardware.ads1115(1, 0x48)
        self.panel = hardware.mlx90614(1, 0x5A)
        self.probe = hardware.ds18b20(SERIAL)
        self.line: EmulatedLine = hardware.line("/dev/gpiochip0", 17)

    def strike(self) -> None:
        """One more thing goes wrong, or everything is well again."""
        acts: list[Callable[[], None]] = [
            self.mend,
            lambda: self._set(self._part(), "silent", True),
            lambda: self._set(self._part(), "lines_high", True),
            lambda: self._set(self._part(), "lines_low", True),
            lambda: self._set(self.random.choice((self.air, self.adc)), "stuck_busy", True),
            lambda: self._set(self.air, "flipped_data_bit", self.random.randrange(64)),
            lambda: self._set(self.air, "flipped_calibration_bit", self.random.randrange(208)),
            self.air.brown_out,
            lambda: self.air.replace(self.random.choice((Calibration(), OTHER_PART))),
            lambda: self._set(self.adc, "flipped_data_bit", self.random.randrange(16)),
            lambda: self._set(self.adc, "resets_while_converting", True),
            self.adc.brown_out,
            lambda: self._set(self.adc.rail, "supply_v", self.random.uniform(4.0, 5.6)),
            lambda: self._set(self.adc.inputs[0], "wire_off", True),
            lambda: self._set(self.adc.inputs[2], "wire_off", True),
            lambda: self._set(self.panel, "bad_checksum", True),
            lambda: self._set(self.panel, "flipped_data_bit", self.random.randrange(16)),
            self.panel.brown_out,
            lambda: self.probe.fail(
                self.random.choice(
                    ("silent", "empty", "checksum", "ones", "zeros", "reset", "starved")
                )
            ),
            lambda: self._set(self.line, "missing", True),
        ]
        self.random.choice(acts)()

    def mend(self) -> None:
        for part in (self.air, self.adc, self.panel):
            part.silent = part.lines_high = part.lines_low = False
            part.flipped_data_bit = None
        self.air.stuck_busy = self.adc.stuck_busy = self.adc.resets_while_converting = False
        self.air.flipped_calibration_bit = None
        self.panel.bad_checksum = self.panel.not_valid = False
        self._set(self.adc.inputs[0], "wire_off", False)
        self._set(self.adc.inputs[2], "wire_off", False)
        self.adc.rail.supply_v = 5.0
        self.probe.fail()
        self.line.missing = False

    def _part(self) -> object:
        return self.random.choice((self.air, self.adc, self.panel))

    @staticmethod
    def _set(part: object, name: str, value: object) -> None:
        setattr(part, name, value)


def truth(chance: random.Random) -> dict[str, float]:
    return {
        "air.temperature": chance.uniform(270, 310),
        "air.relative_humidity": chance.uniform(0.1, 0.95),
        "air.pressure": chance.uniform(95e3, 104e3),
        "tank.pressure": chance.uniform(0, 11e5),
        "dryer.dew_point": chance.uniform(220, 290),
        "panel.temperature": chance.uniform(260, 320),
        "pipe.temperature": chance.uniform(260, 380),
        "motor.contact": float(chance.random() < 0.5),
    }


@pytest.mark.parametrize("seed", range(4))
def test_what_is_called_good_is_true(hardware: EmulatedHardware, seed: int) -> None:
    before = set(threading.enumerate())
    put = hardware.fit(SENSORS)
    trouble = Trouble(hardware, seed)
    clock = HandClock()
    sampler = Sampler(SENSORS, hardware, clock)
    channels = [channel.name for one in SENSORS for channel in DRIVERS[one.driver].channels(one)]
    seen: dict[str, set[str]] = {name: set() for name in channels}
    now_us = START_US
    for _ in range(400):
        true = truth(trouble.random)
        for name, value in true.items():
            put[name](value, now_us + SECOND_US)
        if trouble.random.random() < 0.3:
            trouble.strike()
        after_us, now_us = now_us, now_us + 10 * SECOND_US
        clock.now_s += 10.0
        readings = sampler.sample(now_us, 20.0, patient=True)
        last = {one.channel: one for one in readings}
        assert list(last) == channels
        for name, one in last.items():
            assert after_us < one.time_us <= now_us
            seen[name].add(one.fault)
            assert not one.good or one.value == pytest.approx(true[name], abs=NEAR[name]), one
    # it was no idle run: each channel was good at times and failed in several ways
    for name, faults in seen.items():
        assert "" in faults
        few = name in ("motor.contact", "pipe.temperature")  # struck by one act in twenty
        assert len(faults) >= (2 if few else 4), (name, faults)
    trouble.mend()
    for _ in range(5):
        now_us += 10 * SECOND_US
        readings = sampler.sample(now_us, 20.0, patient=True)
    assert all(one.good for one in readings)
    assert sampler.close() == ()
    assert set(threading.enumerate()) <= before
