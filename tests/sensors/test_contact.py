"""Contacts: edges at their own times, debounce, and edges that were lost."""

from __future__ import annotations

import pytest

from sensors import reasons
from sensors.contact import LineReader
from sensors.emulated.hardware import EmulatedHardware
from sensors.emulated.lines import EmulatedLine
from sensors.lines import Edge
from sensors.reading import Reading, Sensor, SensorFault
from tests.sensors.support import SECOND_US, config, fault_of, open_part

CHIP = "/dev/gpiochip0"
MOTOR = config("motor", "contact", chip=CHIP, line=17)
DEBOUNCE_US = 20_000
S_NS = 1_000_000_000


@pytest.fixture
def line(hardware: EmulatedHardware) -> EmulatedLine:
    return hardware.line(CHIP, 17)


@pytest.fixture
def sensor(hardware: EmulatedHardware, line: EmulatedLine) -> Sensor:
    return open_part(MOTOR, hardware)


def pairs(readings: object) -> list[tuple[int, float]]:
    assert isinstance(readings, list)
    found = []
    for one in readings:
        assert isinstance(one, Reading)
        assert one.good
        assert one.channel == "motor.contact"
        found.append((one.time_us, one.value))
    return found


def test_a_contact_gives_its_edges_then_its_state(sensor: Sensor, line: EmulatedLine) -> None:
    assert pairs(sensor.read(SECOND_US)) == [(SECOND_US, 0.0)]
    line.set(3 * S_NS, 0)
    line.set(7 * S_NS, 1)
    assert pairs(sensor.read(10 * SECOND_US)) == [
        (3 * SECOND_US + DEBOUNCE_US, 1.0),
        (7 * SECOND_US + DEBOUNCE_US, 0.0),
        (10 * SECOND_US, 0.0),
    ]


def test_a_run_is_as_long_as_it_was(sensor: Sensor, line: EmulatedLine) -> None:
    line.set(3 * S_NS, 0)
    line.set(3 * S_NS + 1_234_567_000, 1)
    on, off, _ = pairs(sensor.read(10 * SECOND_US))
    assert off[0] - on[0] == 1_234_567


def test_edges_later_than_now_wait_for_the_next_call(sensor: Sensor, line: EmulatedLine) -> None:
    line.set(3 * S_NS, 0)
    assert pairs(sensor.read(2 * SECOND_US)) == [(2 * SECOND_US, 0.0)]
    assert pairs(sensor.read(4 * SECOND_US)) == [
        (3 * SECOND_US + DEBOUNCE_US, 1.0),
        (4 * SECOND_US, 1.0),
    ]


def test_an_edge_exactly_at_now_is_said_once(sensor: Sensor, line: EmulatedLine) -> None:
    line.set(3 * S_NS, 0)
    now_us = 3 * SECOND_US + DEBOUNCE_US
    assert pairs(sensor.read(now_us)) == [(now_us, 1.0)]
    assert pairs(sensor.read(now_us + 1)) == [(now_us + 1, 1.0)]


def test_bounce_makes_one_edge(sensor: Sensor, line: EmulatedLine) -> None:
    line.bounce(3 * S_NS, 0, times=6, every_ns=700_000)
    settled_us = 3 * SECOND_US + 12 * 700 + DEBOUNCE_US
    assert pairs(sensor.read(10 * SECOND_US)) == [(settled_us, 1.0), (10 * SECOND_US, 1.0)]


def test_without_debounce_every_bounce_is_an_edge(
    hardware: EmulatedHardware, line: EmulatedLine
) -> None:
    raw = open_part(config("motor", "contact", chip=CHIP, line=17, debounce="0 s"), hardware)
    line.bounce(3 * S_NS, 0, times=6)
    assert len(pairs(raw.read(10 * SECOND_US))) == 13 + 1


def test_a_spike_shorter_than_the_debounce_is_not_seen(sensor: Sensor, line: EmulatedLine) -> None:
    line.set(3 * S_NS, 0)
    line.set(3 * S_NS + 19_000_000, 1)
    assert pairs(sensor.read(10 * SECOND_US)) == [(10 * SECOND_US, 0.0)]


def test_a_contact_to_the_supply_can_be_named(
    hardware: EmulatedHardware, line: EmulatedLine
) -> None:
    high = open_part(config("motor", "contact", chip=CHIP, line=17, closed="high"), hardware)
    assert pairs(high.read(SECOND_US)) == [(SECOND_US, 1.0)]


def test_lost_edges_are_a_fault_once(sensor: Sensor, line: EmulatedLine) -> None:
    sensor.read(SECOND_US)
    line.lose = 2
    for second in (2, 3, 4):
        line.set(second * S_NS, second % 2)
    assert fault_of(sensor, 10 * SECOND_US) == reasons.EDGES_LOST
    assert pairs(sensor.read(20 * SECOND_US)) == [(20 * SECOND_US, 1.0)]


def test_one_lost_edge_is_seen_within_two_calls(sensor: Sensor, line: EmulatedLine) -> None:
    sensor.read(SECOND_US)
    line.lose = 1
    line.set(2 * S_NS, 0)
    faults = []
    for second in (10, 20):
        try:
            sensor.read(second * SECOND_US)
        except SensorFault as fault:
            faults.append(fault.reason)
    assert faults == [reasons.EDGES_LOST]
    assert pairs(sensor.read(30 * SECOND_US)) == [(30 * SECOND_US, 1.0)]


class ByHand:
    """A line whose edges a test hands over as they are."""

    def __init__(self) -> None:
        self.waiting: list[Edge] = []
        self.now = 1

    def level(self) -> int:
        return self.now

    def edges(self, until_ns: int) -> list[Edge]:
        ready, self.waiting = self.waiting, []
        self.now = ready[-1].level if ready else self.now
        return ready

    def close(self) -> None:
        self.waiting = []


def test_edges_from_before_a_clock_step_stay_in_order() -> None:
    line = ByHand()
    reader = LineReader("motor", line)
    reader.advance(100 * SECOND_US)
    line.waiting = [Edge(3 * S_NS, 0, 1), Edge(4 * S_NS, 1, 2)]  # long before the last call
    assert reader.advance(110 * SECOND_US) == (
        [(100 * SECOND_US + 1, 0), (100 * SECOND_US + 2, 1)],
        1,
    )


def test_more_edges_than_microseconds_still_end_in_the_right_state() -> None:
    line = ByHand()
    reader = LineReader("motor", line)
    reader.advance(100)
    line.waiting = [Edge(50_000, seq % 2, seq + 1) for seq in range(5)]
    assert reader.advance(102) == ([(101, 0), (102, 0)], 0)


def test_an_edge_while_the_line_is_being_asked_for_is_no_lost_edge() -> None:
    line = ByHand()
    line.now = 0  # it fell before its level was read, and the edge comes after
    reader = LineReader("motor", line)
    line.waiting = [Edge(50_000, 0, 1)]
    assert reader.advance(100) == ([(50, 0)], 0)


def test_a_line_that_goes_away_is_a_fault(sensor: Sensor, line: EmulatedLine) -> None:
    line.missing = True
    assert fault_of(sensor) == reasons.NO_ANSWER


def test_a_line_reopened_tells_no_old_edge_again(
    hardware: EmulatedHardware, sensor: Sensor, line: EmulatedLine
) -> None:
    line.set(3 * S_NS, 0)
    sensor.read(10 * SECOND_US)
    sensor.close()
    again = open_part(MOTOR, hardware)
    assert pairs(again.read(20 * SECOND_US)) == [(20 * SECOND_US, 1.0)]


def test_a_closed_contact_reads_nothing(sensor: Sensor) -> None:
    sensor.close()
    sensor.close()
    with pytest.raises(SensorFault):
        sensor.read(SECOND_US)


def test_a_long_history_is_let_go_of_and_changes_nothing(
    sensor: Sensor, line: EmulatedLine
) -> None:
    edges = 0
    for tick in range(1, 40):
        for part in range(20):
            line.set(tick * 10 * S_NS + part * S_NS // 4, part % 2)
        edges += len(pairs(sensor.read((tick + 1) * 10 * SECOND_US))) - 1
    assert edges == 39 * 20
    assert len(line.history) < 300
