"""Stores with hours to seal, for the tests of sealing. All values are invented."""

from __future__ import annotations

import math
from collections.abc import Sequence

from hypothesis import strategies as st

from daemon.clock import HOUR_US, MINUTE_US, SECOND_US
from daemon.store.store import Store
from daemon.views import SeriesOfReadings
from sensors.reading import Channel, Reading, in_steps

T0 = 1_772_434_800_000_000  # 2026-03-02T07:00:00Z, a full hour
TICK = 10 * SECOND_US
PRESSURE = Channel("tank-gauge.pressure", "pressure", 10.0, 0.0, 1.2e6, 6000.0, gauge=True)
TEMPERATURE = Channel("pipe-end.temperature", "temperature", 0.0625, 218.15, 398.15, 0.5)
MOTOR = Channel("motor.contact", "contact", 1.0, 0.0, 1.0, 0.0)
CHANNELS = {channel.name: channel for channel in (PRESSURE, TEMPERATURE, MOTOR)}

Record = list[tuple[int, list[Reading]]]


def ordinary(tick_us: int) -> list[Reading]:
    """A pressure and a temperature that wander, and a motor with an edge now and then."""
    number = (tick_us - T0) // TICK
    edge = [Reading(MOTOR.name, float(number // 40 % 2), tick_us - 3_456_789)]
    return [
        Reading(PRESSURE.name, in_steps(7.1e5 + 1e4 * math.sin(number / 50), 10.0), tick_us),
        Reading(TEMPERATURE.name, in_steps(290.0 + number % 7 * 0.0625, 0.0625), tick_us),
        *(edge if number % 40 == 0 else []),
        Reading(MOTOR.name, float(number // 40 % 2), tick_us),
    ]


def record(hours: float, begin_us: int = T0) -> Record:
    """Ticks every 10 s from a time on."""
    number = round(hours * HOUR_US / TICK)
    return [(each, ordinary(each)) for each in range(begin_us, begin_us + number * TICK, TICK)]


def fill(store: Store, ticks: Record) -> None:
    """Store a record, all in one transaction: quicker than tick by tick, and the same rows."""
    if not ticks:
        return
    with store._database.write() as connection:
        for tick_us, readings in ticks:
            store._ticks.insert(connection, tick_us, readings)
    store._ticks.committed(ticks[-1][0])


def seal_all(store: Store) -> int:
    """Seal what can be; how many runs that were."""
    number = 0
    while store.seal_next():
        number += 1
    return number


def shown(ticks: Sequence[tuple[int, Sequence[Reading]]]) -> list[str]:
    """Ticks as text that tells every bit, also of a NaN."""
    return [
        f"{tick_us} "
        + " ".join(f"{r.channel}@{r.time_us}={r.value.hex()}({r.fault})" for r in readings)
        for tick_us, readings in ticks
    ]


def listed(series: SeriesOfReadings) -> list[tuple[int, str, str]]:
    """A series as a list that tells every bit."""
    return [
        (time_us, value.hex(), fault)
        for time_us, value, fault in zip(
            series.times_us.tolist(), series.values.tolist(), series.faults, strict=True
        )
    ]


_FAULTS = st.sampled_from(["", "", "", "no answer", "frozen", "zu groß\0"])
_OFFSETS = st.one_of(
    st.just(0), st.just(0), st.integers(-TICK, 0), st.integers(-3 * HOUR_US, HOUR_US)
)


@st.composite
def readings(draw: st.DrawFn, tick_us: int) -> Reading:
    """Whatever a part may say: in steps or not, bad with or without a value, of another time."""
    channel = draw(st.sampled_from(list(CHANNELS.values())))
    value = draw(
        st.one_of(
            st.integers(-(2**31) - 2, 2**31 + 2).map(lambda count: count * channel.step),
            st.sampled_from([0.0, 1.0, -0.0, math.nan, math.inf]),
            st.floats(-1e6, 1e6),
        )
    )
    return Reading(channel.name, value, tick_us + draw(_OFFSETS), draw(_FAULTS))


@st.composite
def records(draw: st.DrawFn) -> Record:
    """Ticks at odd times over some hours, with anything in them, or nothing."""
    steps = st.one_of(st.just(TICK), st.integers(1, 40 * MINUTE_US))
    time_us, found = T0 - 5 * MINUTE_US, []
    for step in draw(st.lists(steps, max_size=12)):
        time_us += step
        found.append((time_us, draw(st.lists(readings(time_us), max_size=6))))
    return found
