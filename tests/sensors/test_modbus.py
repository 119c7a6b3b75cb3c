"""Modbus through pymodbus against its own server, over TCP and over a pair of pseudo-terminals."""

from __future__ import annotations

import threading
from collections.abc import Iterator

import pytest

from sensors import reasons
from sensors.hardware import RealHardware
from sensors.modbus import ModbusError, ModbusPort, PymodbusReader, parse_line, parse_port
from sensors.reading import SensorFault
from sensors.registers import register_map
from sensors.registry import SensorConfig
from tests.sensors.modbus_servers import Wire, serial_server, tcp_server
from tests.sensors.support import START_US, config, fault_of, open_part, values

MAP = {
    "dew_point": {"at": 0, "type": "float32"},
    "temperature": {"at": 2, "kind": "holding", "scale": 0.1},
}


@pytest.fixture(scope="module")
def port() -> Iterator[int]:
    with tcp_server() as number:
        yield number


@pytest.fixture
def wire() -> Iterator[Wire]:
    with serial_server() as made:
        yield made


def machine(timeout_s: float) -> Iterator[RealHardware]:
    before = threading.active_count()
    real = RealHardware(modbus_timeout_s=timeout_s)
    yield real
    real.close()
    assert threading.active_count() <= before


@pytest.fixture
def hardware() -> Iterator[RealHardware]:
    """Waits long, so that a busy machine fails no test."""
    yield from machine(20.0)


@pytest.fixture
def hasty() -> Iterator[RealHardware]:
    """Waits about as long as a real one, for answers that never come."""
    yield from machine(1.5)


def transmitter(port: str, **said: object) -> SensorConfig:
    return config("dryer", "dew-point-modbus", port=port, device=7, **{"registers": MAP, **said})


def test_registers_are_read_over_tcp(port: int, hardware: RealHardware) -> None:
    read = values(open_part(transmitter(f"127.0.0.1:{port}"), hardware).read(START_US))
    assert read == {
        "dew_point": pytest.approx(283.15, abs=0.0051),
        "temperature": pytest.approx(273.15 + 21.0, abs=0.0051),
    }


def test_registers_are_read_over_a_serial_line(wire: Wire, hardware: RealHardware) -> None:
    one = transmitter(wire.ends[0], line="19200 8N1")
    sensor = open_part(one, hardware)
    for _ in range(3):
        assert values(sensor.read(START_US))["dew_point"] == pytest.approx(283.15, abs=0.0051)


def test_a_spoiled_frame_is_a_bad_checksum_and_heals(wire: Wire, hasty: RealHardware) -> None:
    sensor = open_part(transmitter(wire.ends[0], line="19200 8N1"), hasty)
    wire.spoil = lambda data: bytes([*data[:-3], data[-3] ^ 1, *data[-2:]])
    assert fault_of(sensor) == reasons.BAD_CHECKSUM
    wire.spoil = lambda data: data
    assert values(sensor.read(START_US))["dew_point"] == pytest.approx(283.15, abs=0.0051)


def test_a_silent_line_is_no_answer(wire: Wire, hasty: RealHardware) -> None:
    sensor = open_part(transmitter(wire.ends[0], line="19200 8N1"), hasty)
    wire.spoil = lambda data: b""
    assert fault_of(sensor) == reasons.NO_ANSWER


def test_words_may_come_low_first(port: int, hardware: RealHardware) -> None:
    place = {"at": 0, "kind": "holding", "type": "float32", "words": "low first", "unit": "degF"}
    one = transmitter(f"127.0.0.1:{port}", registers={"dew_point": place})
    read = values(open_part(one, hardware).read(START_US))
    assert read["dew_point"] == pytest.approx((-20.5 + 459.67) / 1.8, abs=0.0051)


def test_a_register_that_is_not_there_is_an_error_answer(port: int, hardware: RealHardware) -> None:
    one = transmitter(f"127.0.0.1:{port}", registers={"dew_point": {"at": 900}})
    with pytest.raises(SensorFault, match="exception code 2") as caught:
        open_part(one, hardware).read(START_US)
    assert caught.value.reason == reasons.ERROR_ANSWER


def test_a_value_beyond_any_dew_point_is_bad(port: int, hardware: RealHardware) -> None:
    one = transmitter(f"127.0.0.1:{port}", registers={"dew_point": {"at": 3}})
    (read,) = open_part(one, hardware).read(START_US)
    assert read.fault.startswith("out of range")


def test_all_ones_are_no_dew_point(port: int, hardware: RealHardware) -> None:
    one = transmitter(f"127.0.0.1:{port}", registers={"dew_point": {"at": 3, "kind": "holding"}})
    assert fault_of(open_part(one, hardware)) == reasons.ALL_ONES


def test_a_host_that_is_not_there_does_not_answer(hardware: RealHardware) -> None:
    with tcp_server() as gone:
        pass
    assert fault_of(open_part(transmitter(f"127.0.0.1:{gone}"), hardware)) == reasons.NO_ANSWER


def test_another_device_number_is_no_reading(port: int, hasty: RealHardware) -> None:
    one = config("dryer", "dew-point-modbus", port=f"127.0.0.1:{port}", device=8, registers=MAP)
    sensor = open_part(one, hasty)
    assert fault_of(sensor) in (reasons.NO_ANSWER, reasons.ERROR_ANSWER)


def test_a_connection_that_was_closed_is_opened_again(port: int) -> None:
    reader = PymodbusReader(ModbusPort("127.0.0.1", port))
    assert reader.read("input", 7, 0, 1) == [0x4120]
    reader.close()
    reader.close()
    assert reader.read("holding", 7, 2, 2) == [0x00D2, 0xFFFF]
    with pytest.raises(ModbusError):
        reader.read("holding", 7, 900, 1)
    reader.close()


def test_one_reader_serves_all_devices_of_a_port(hardware: RealHardware) -> None:
    port = ModbusPort("/dev/ttyUSB0")
    assert hardware.modbus(port) is hardware.modbus(ModbusPort("/dev/ttyUSB0"))


@pytest.mark.parametrize(
    ("text", "port"),
    [
        ("/dev/ttyUSB0", ("/dev/ttyUSB0", 0)),
        ("192.168.4.20:502", ("192.168.4.20", 502)),
        ("[fd00::2]:502", ("fd00::2", 502)),
    ],
)
def test_ports_as_people_write_them(text: str, port: tuple[str, int]) -> None:
    assert parse_port(text) == port


@pytest.mark.parametrize("text", ["ttyUSB0", "192.168.4.20", "host:0", "host:70000", 502])
def test_a_port_that_is_none_is_refused(text: object) -> None:
    with pytest.raises(ValueError, match="write a serial device"):
        parse_port(text)


@pytest.mark.parametrize("text", ["19200", "19200 7E1", "9601 8N1", 19200])
def test_a_line_setting_that_is_none_is_refused(text: object) -> None:
    with pytest.raises(ValueError, match="19200 8E1"):
        parse_line(text)


@pytest.mark.parametrize(
    ("said", "remedy"),
    [
        ({}, "write the device's registers"),
        ({"dew_point": {"at": 0}, "humidity": {"at": 1}}, '"humidity" is no quantity'),
        ({"dew_point": 0}, "write a table"),
        ({"dew_point": {"at": 0, "register": 3}}, '"register" is not known'),
        ({"dew_point": {"at": -1}}, "0 to 65535"),
        ({"dew_point": {"at": 0, "type": "double"}}, "write type as one of"),
        ({"dew_point": {"at": 0, "scale": "0.1"}}, "write scale as a number"),
        ({"dew_point": {"at": 0, "scale": 0}}, "scale of 0"),
    ],
)
def test_a_map_with_a_mistake_is_refused(said: object, remedy: str) -> None:
    with pytest.raises(ValueError, match=remedy):
        register_map(said)


@pytest.mark.parametrize("words", ["high first", "low first"])
@pytest.mark.parametrize("code", ["int16", "int32", "float32"])
@pytest.mark.parametrize("unit", ["degC", "degF", "K"])
def test_coding_and_decoding_are_inverse(words: str, code: str, unit: str) -> None:
    scale = 1.0 if code == "float32" else 0.1
    said = {"dew_point": {"at": 0, "type": code, "words": words, "unit": unit, "scale": scale}}
    place = register_map(said)["dew_point"]
    for temperature_k in (213.15, 273.15, 283.37):
        assert place.decode_k(place.encode(temperature_k)) == pytest.approx(temperature_k, abs=0.06)
