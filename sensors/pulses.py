"""Flow meter by pulses: a contact or open collector that closes once for so much air.

Wiring: as a contact, see `sensors/lines.py`. The meter's reference conditions (1 bar and 20 degC
with most; "normal" is 0 degC and 1.01325 bar, 8.7 % apart in density) are on its label.

A reading is the mean flow since the last one, pulses times volume over time: nothing of the total
is lost or made by sampling. Pulses may come up to 40 a second, the most that the kernel keeps for
ten seconds being 1024 edges.
"""

from __future__ import annotations

from collections.abc import Sequence

from sensors import keys
from sensors.contact import LINE_KEYS, LineReader
from sensors.guard import faults
from sensors.lines import LineSettings
from sensors.reading import Channel, Reading, reading
from sensors.registry import Driver, Hardware, Key, SensorConfig, register

PULSES_PER_S = 40.0


class PulseMeter:
    """One meter on one line."""

    def __init__(self, config: SensorConfig, hardware: Hardware) -> None:
        settings = config.settings
        self._id = config.id
        self._channels = channels(config)
        self._volume_m3 = float(settings["volume_per_pulse"])
        self._last_us: int | None = None
        asked = LineSettings(settings["pull"], round(settings["debounce"] * 1e6))
        with faults(self._id):
            line = hardware.lines(settings["chip"]).request(int(settings["line"]), asked)
            self._reader = LineReader(self._id, line)

    @property
    def id(self) -> str:
        return self._id

    @property
    def channels(self) -> Sequence[Channel]:
        return self._channels

    def read(self, now_us: int) -> Sequence[Reading]:
        """The mean flow since the last call; nothing with the first, for a rate needs two."""
        after_us, self._last_us = self._last_us, now_us
        with faults(self._id):
            edges, _ = self._reader.advance(now_us)
        if after_us is None or after_us >= now_us:
            return []
        pulses = sum(1 for _, level in edges if level == 0)
        flow = pulses * self._volume_m3 / ((now_us - after_us) / 1e6)
        return [reading(self._channels[0], flow, now_us)]

    def close(self) -> None:
        self._reader.close()


def channels(config: SensorConfig) -> tuple[Channel, ...]:
    """Up to the meter's end; the step is a thousandth of a litre a second."""
    settings = config.settings
    highest = float(settings["highest"])
    # a short interval may catch one pulse more than its share
    room = float(settings["volume_per_pulse"])
    return (
        Channel(
            f"{config.id}.free_air_flow",
            "free_air_flow",
            1e-6,
            0.0,
            1.1 * highest + room,
            float(settings["accuracy"]) * highest,
        ),
    )


def _clashes(config: SensorConfig) -> tuple[tuple[str, str], ...]:
    settings = config.settings
    if settings["highest"] / settings["volume_per_pulse"] <= PULSES_PER_S:
        return ()
    remedy = f"set the meter to more volume a pulse: at most {PULSES_PER_S:g} pulses a second"
    return (("volume_per_pulse", remedy),)


PULSES = register(
    Driver(
        name="flow-pulses",
        summary="free air through a meter that gives pulses",
        keys=(
            *LINE_KEYS,
            Key(
                "volume_per_pulse",
                keys.quantity("volume", 1e-6, 10.0),
                meaning='what the label says, like "10 L"',
            ),
            Key(
                "highest",
                keys.quantity("flow", 1e-5, 10.0),
                meaning='the end of the meter\'s range, like "1000 L/min"',
            ),
            Key("accuracy", keys.percent(0.001, 0.3), 0.03, "of the end of its range"),
            Key("debounce", keys.duration(0.0, 1.0), 0.005, "shorter than half a pulse"),
        ),
        channels=channels,
        occupies=lambda c: (f"{c.settings['chip']} line {c.settings['line']}",),
        bus=lambda c: f"gpio {c.settings['chip']}",
        open=PulseMeter,
        clashes=_clashes,
    )
)
