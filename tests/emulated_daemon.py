"""A daemon in a process of its own, on emulated parts and a fast clock, for tests that kill it.

    python -m tests.emulated_daemon STORE [START_US]

Says where its API is and how many ticks there were, a line each. The site is Birch Works.
"""

from __future__ import annotations

import sys
import threading
from pathlib import Path

from daemon import compose
from daemon.clock import ScaledClock
from sensors.emulated.hardware import EmulatedHardware
from tests.daemon.shops import BEGUN_US, site

SPEED = 600.0
FELT = {
    "intake-air.temperature": 295.15,
    "intake-air.relative_humidity": 0.7,
    "intake-air.pressure": 101_000.0,
    "tank-gauge.pressure": 7.0e5,
    "pipe-end.temperature": 290.15,
    "motor.contact": 1.0,
}


def main(store: str, start_us: int = BEGUN_US) -> None:
    """Run until SIGTERM."""
    stop = threading.Event()
    compose.stop_on_signals(stop)
    shop = site()
    with EmulatedHardware() as hardware:
        setters = hardware.fit(shop.sensors)
        for channel, value in FELT.items():
            setters[channel](value, start_us)
        clock = ScaledClock(SPEED, start_us, patience_s=10.0)
        setting = compose.Setting(shop, Path(store), hardware, clock, port=0)
        compose.run(setting, stop, _tell)
    print("stopped", flush=True)


def _tell(parts: compose.Parts) -> None:
    print(parts.server.url, flush=True)
    tick, number = parts.shell.tick, 0

    def told(now_us: int) -> None:
        nonlocal number
        tick(now_us)
        number += 1
        print(number, flush=True)

    parts.shell.tick = told  # type: ignore[method-assign]


if __name__ == "__main__":
    main(sys.argv[1], *(int(each) for each in sys.argv[2:]))
