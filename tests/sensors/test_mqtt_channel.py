"""A channel from another device: its messages, their times, and its silence. No broker needed."""

from __future__ import annotations

import pytest

from sensors import reasons
from sensors.emulated.hardware import EmulatedHardware
from sensors.inbox import Inbox
from sensors.reading import Reading, Sensor
from sensors.registry import DRIVERS
from tests.sensors.support import SECOND_US, START_US, config, fault_of, open_part

TOPIC = "shop/booth/air"
BOOTH = config(
    "booth-air",
    "mqtt-channel",
    topic=TOPIC,
    field="air.temp",
    quantity="temperature",
    unit="degC",
    silent_after="60 s",
)


@pytest.fixture
def inbox(hardware: EmulatedHardware) -> Inbox:
    return hardware.inbox()


@pytest.fixture
def sensor(hardware: EmulatedHardware) -> Sensor:
    return open_part(BOOTH, hardware)


def only(sensor: Sensor, now_us: int) -> Reading:
    (one,) = sensor.read(now_us)
    return one


def test_a_message_is_a_reading_at_the_time_it_came(inbox: Inbox, sensor: Sensor) -> None:
    sensor.read(START_US)
    inbox.post(TOPIC, b'{"air": {"temp": 21.5, "rh": 44}}', START_US + 3 * SECOND_US)
    one = only(sensor, START_US + 10 * SECOND_US)
    assert one.channel == "booth-air.temperature"
    assert one.value == pytest.approx(294.65)
    assert one.time_us == START_US + 3 * SECOND_US


def test_no_message_is_no_reading_and_never_the_old_one(inbox: Inbox, sensor: Sensor) -> None:
    sensor.read(START_US)
    inbox.post(TOPIC, b'{"air": {"temp": 21.5}}', START_US + SECOND_US)
    assert len(sensor.read(START_US + 10 * SECOND_US)) == 1
    assert sensor.read(START_US + 20 * SECOND_US) == []


def test_a_device_that_says_nothing_for_long_is_a_fault_and_heals(
    inbox: Inbox, sensor: Sensor
) -> None:
    sensor.read(START_US)
    for second in (10, 50):
        assert sensor.read(START_US + second * SECOND_US) == []
    assert fault_of(sensor, START_US + 60 * SECOND_US) == reasons.SILENT
    inbox.post(TOPIC, b'{"air": {"temp": 20}}', START_US + 65 * SECOND_US)
    assert only(sensor, START_US + 70 * SECOND_US).good


def test_a_retained_message_does_not_count(inbox: Inbox, sensor: Sensor) -> None:
    inbox.post(TOPIC, b'{"air": {"temp": 20}}', START_US, retained=True)
    assert sensor.read(START_US) == []


def test_a_message_later_than_now_waits(inbox: Inbox, sensor: Sensor) -> None:
    sensor.read(START_US)
    inbox.post(TOPIC, b'{"air": {"temp": 20}}', START_US + 11 * SECOND_US)
    assert sensor.read(START_US + 10 * SECOND_US) == []
    assert only(sensor, START_US + 20 * SECOND_US).time_us == START_US + 11 * SECOND_US


@pytest.mark.parametrize(
    "payload",
    [b"", b"warm", b"{}", b'{"air": 20}', b'{"air": {"temp": null}}', b'{"air": {"temp": true}}',
     b'{"air": {"temp": "warm"}}', b"\xff\xfe", b"[21]"],
)  # fmt: skip
def test_a_message_without_the_number_is_a_bad_reading(
    inbox: Inbox, sensor: Sensor, payload: bytes
) -> None:
    sensor.read(START_US)
    inbox.post(TOPIC, payload, START_US + SECOND_US)
    assert only(sensor, START_US + 10 * SECOND_US).fault == reasons.ERROR_ANSWER


def test_a_number_out_of_its_range_is_bad(inbox: Inbox, sensor: Sensor) -> None:
    sensor.read(START_US)
    inbox.post(TOPIC, b'{"air": {"temp": -127}}', START_US + SECOND_US)
    assert only(sensor, START_US + 10 * SECOND_US).fault.startswith("out of range")


@pytest.mark.parametrize(
    ("quantity", "unit", "payload", "value"),
    [
        ("temperature", "degF", b"68", 293.15),
        ("relative_humidity", "%", b"45.5", 0.455),
        ("relative_humidity", "1", b"0.455", 0.455),
        ("pressure", "bar", b"7.5", 7.5e5),
        ("dew_point", "degC", b"-20", 253.15),
        ("free_air_flow", "L/min", b"120", 0.002),
        ("contact", "", b"ON", 1.0),
        ("contact", "", b"false", 0.0),
        ("contact", "", b"1", 1.0),
    ],
)
def test_plain_numbers_in_their_units(
    hardware: EmulatedHardware, quantity: str, unit: str, payload: bytes, value: float
) -> None:
    one = config("x", "mqtt-channel", topic="a/b", quantity=quantity, unit=unit)
    assert DRIVERS["mqtt-channel"].clashes(one) == ()
    sensor = open_part(one, hardware)
    sensor.read(START_US)
    hardware.inbox().post("a/b", payload, START_US + SECOND_US)
    read = only(sensor, START_US + 10 * SECOND_US)
    assert read.channel == f"x.{quantity}"
    assert read.value == pytest.approx(value)


def test_a_unit_of_another_kind_is_told() -> None:
    one = config("x", "mqtt-channel", topic="a/b", quantity="pressure", unit="degC")
    ((key, remedy),) = DRIVERS["mqtt-channel"].clashes(one)
    assert key == "unit"
    assert "bar" in remedy
    assert len(DRIVERS["mqtt-channel"].channels(one)) == 1


def test_a_client_hears_of_each_topic_once(hardware: EmulatedHardware) -> None:
    heard = []

    class Client(Inbox):
        def on_new_topic(self, topic: str) -> None:
            heard.append(topic)

    inbox = Client()
    inbox.want("a/b", "one")
    inbox.want("a/b", "two")
    inbox.want("c", "two")
    assert heard == ["a/b", "c"] == list(inbox.topics())
    inbox.post("a/b", b"1", 5)
    assert len(inbox.take("a/b", "one", 10)) == 1
    assert len(inbox.take("a/b", "two", 10)) == 1
    assert inbox.take("a/b", "two", 10) == []
    inbox.post("nobody/waits", b"1", 5)


def test_several_messages_in_one_microsecond_leave_the_last(inbox: Inbox, sensor: Sensor) -> None:
    sensor.read(START_US)
    for celsius in (20, 21, 22):
        inbox.post(TOPIC, b'{"air": {"temp": %d}}' % celsius, START_US + 1)
    read = sensor.read(START_US + 2)
    assert [one.time_us - START_US for one in read] == [1, 2]
    assert read[-1].value == pytest.approx(295.15)


@pytest.mark.parametrize("topic", ["a/#", "+/b", "a b", ""])
def test_a_topic_with_wild_cards_is_refused(topic: str) -> None:
    with pytest.raises(ValueError, match="whole topic"):
        config("x", "mqtt-channel", topic=topic, quantity="temperature", unit="degC")
