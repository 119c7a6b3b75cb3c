"""`dripleg check` at the parts: what they say beside what is plausible, and what to do."""

from __future__ import annotations

import argparse
import contextlib
import socket
import threading
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from api.app import create_app
from api.server import ApiServer
from daemon.__main__ import main, parser
from daemon.check_command import check
from daemon.check_readings import Looked, Looker, Said, device_of, missing_devices
from daemon.check_sensors import now_section
from daemon.check_words import plausible, remedy
from daemon.clock import HOUR_US, SystemClock
from daemon.site.reader import parse_site
from daemon.site.types import Site
from sensors import reasons
from sensors.emulated.hardware import EmulatedHardware
from tests.api.fake import NOW_US, FakeRunning
from tests.daemon.broker import Broker, Listener, free_port

SITE = """
[site]
id = "birch-works"
units = "{units}"

[api]
port = {port}

[compressor]
running = "motor.contact"
cut_in = "6 bar"
cut_out = "8 bar"

[[sensor]]
id = "intake-air"
driver = "bme280"

[[sensor]]
id = "cell"
driver = "vented-cell"
address = 0x77

[[sensor]]
id = "tank-gauge"
driver = "pressure-transducer"
input = 0
supply_input = 3
range = "0-12 bar"

[[sensor]]
id = "pipe-end"
driver = "ds18b20"
serial = "28-00000a1b2c3d"

[[sensor]]
id = "motor"
driver = "contact"
line = 17

[[station]]
id = "intake"
kind = "intake"
temperature = "intake-air.temperature"
relative_humidity = "intake-air.relative_humidity"
pressure = "intake-air.pressure"

[[station]]
id = "tank"
kind = "receiver"
after = "intake"
pressure = "tank-gauge.pressure"

[[station]]
id = "riser"
kind = "pipe"
after = "tank"
temperature = "pipe-end.temperature"
measured_dew_point = "cell"

[[outlet]]
id = "hose"
after = "riser"
"""


class QuickClock:
    """The machine's clock, but waiting takes no time and ends after so many times."""

    def __init__(self, waits: int = 1000) -> None:
        self._clock, self._left = SystemClock(), waits
        self.waited_s = 0.0

    def now_us(self) -> int:
        return self._clock.now_us() + round(self.waited_s * 1e6)

    def monotonic(self) -> float:
        return self._clock.monotonic() + self.waited_s

    def wait(self, seconds: float, stop: threading.Event) -> bool:
        self.waited_s += max(0.0, seconds)
        self._left -= 1
        return stop.is_set() or self._left < 0


def shop(units: str = "metric", port: int | None = None, more: str = "") -> Site:
    text = SITE.format(units=units, port=port or free_port())
    return parse_site(text + more, "birch-works.toml")


@pytest.fixture
def parts() -> Iterator[EmulatedHardware]:
    with EmulatedHardware() as hardware:
        setters = hardware.fit(shop().sensors)
        setters["tank-gauge.pressure"](7.62e5, 0)
        setters["pipe-end.temperature"](291.15, 0)
        setters["cell.relative_humidity"](0.042, 0)
        setters["cell.temperature"](293.15, 0)
        setters["cell.pressure"](101_325.0, 0)
        yield hardware


@pytest.fixture
def a_pi(tmp_path: Path) -> Path:
    """A root with the devices that these sensors need."""
    for name in ("dev/i2c-1", "dev/gpiochip0", "sys/bus/w1/devices"):
        (tmp_path / name).mkdir(parents=True)
    return tmp_path


def run(
    site: Site,
    hardware: EmulatedHardware,
    root: Path,
    clock: QuickClock | None = None,
    **said: Any,
) -> tuple[int, str]:
    told: list[str] = []
    options = argparse.Namespace(**({"no_sensors": False, "watch": False, "store": None} | said))
    code = check(
        site, options, hardware, clock or QuickClock(), threading.Event(), told.append, root
    )
    names = [thread.name for thread in threading.enumerate()]
    assert not [name for name in names if name.startswith(("bus ", "mqtt"))]  # none left behind
    return code, "\n".join(told)


def test_every_sensor_is_read_and_shown_beside_what_is_plausible(
    parts: EmulatedHardware, a_pi: Path
) -> None:
    code, text = run(shop(), parts, a_pi)
    assert code == 0
    lines = {line.split()[0]: " ".join(line.split()) for line in text.splitlines() if line.strip()}
    assert (
        lines["tank-gauge.pressure"] == "tank-gauge.pressure 7.62 bar plausible: -0.18 to 9.2 bar"
    )
    assert lines["pipe-end.temperature"].startswith("pipe-end.temperature 18 degC plausible:")
    assert lines["intake-air.relative_humidity"].endswith("50 % plausible: 8 to 99 %")
    assert lines["intake-air.pressure"] == "intake-air.pressure 1013 hPa plausible: 800 to 1085 hPa"
    assert lines["motor.contact"] == "motor.contact open plausible: open or closed"
    assert "not plausible" not in text
    assert "The line, in the order in which the air meets it" in text  # the file is explained too
    assert max(len(line) for line in text.splitlines()) < 100


def test_it_speaks_the_site_s_units(parts: EmulatedHardware, a_pi: Path) -> None:
    _, text = run(shop("us"), parts, a_pi)
    assert "110.5 psi" in text
    assert "29.92 inHg" in text
    assert "64.4 degF" in text


def test_a_vented_cell_s_dew_point_is_an_interval_at_the_line_s_pressure(
    parts: EmulatedHardware, a_pi: Path
) -> None:
    _, text = run(shop(), parts, a_pi)
    assert "riser" in text
    (line,) = [each for each in text.splitlines() if "dew point" in each and "gauge" in each]
    assert "at 7 bar gauge" in line  # between cut-in and cut-out: the riser has no gauge
    assert "3.0 degC (-12.8 to 11.8 degC)" in line or "3 degC (-12.8 to 11.8 degC)" in line
    parts.bme280(1, 0x77).relative_humidity = 0.006
    _, text = run(shop(), parts, a_pi)
    assert "dew point below 1.7 degC at 7 bar gauge" in text


def test_what_no_shop_shows_is_marked(parts: EmulatedHardware, a_pi: Path) -> None:
    parts.bme280(1, 0x76).temperature_k = 273.15 + 60.0
    code, text = run(shop(), parts, a_pi)
    (line,) = [each for each in text.splitlines() if "<- not plausible here" in each]
    assert line.split()[0] == "intake-air.temperature"
    assert code == 0  # it answers; whether it is hot there, only the installer knows


def test_an_unplugged_part_is_told_with_what_to_do_and_the_others_are_read(
    parts: EmulatedHardware, a_pi: Path
) -> None:
    parts.bme280(1, 0x76).silent = True
    parts.ds18b20("28-00000a1b2c3d").fail("checksum")
    code, text = run(shop(), parts, a_pi)
    assert code == 1
    assert text.count("not usable: no answer") == 3
    assert "SDA on pin 3 and SCL on pin 5" in text
    assert "i2cdetect -y 1" in text
    assert "not usable: bad checksum" in text
    assert "7.62 bar" in text


def test_a_hung_bus_does_not_hang_the_check(
    parts: EmulatedHardware, a_pi: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("daemon.check_readings.SLOW_LIMIT_S", 0.2)
    monkeypatch.setattr("daemon.check_readings.SLOW_PART_S", 0.0)
    monkeypatch.setattr("sensors.sampling.CLOSE_WAIT_S", 0.0)
    told: list[str] = []
    release = parts.i2c(1).hang = threading.Event()
    options = argparse.Namespace(no_sensors=False, watch=False, store=None)
    code = check(shop(), options, parts, QuickClock(), threading.Event(), told.append, a_pi)
    release.set()
    for thread in threading.enumerate():
        if thread.name.startswith("bus "):
            thread.join(10.0)
            assert not thread.is_alive()
    assert code == 1
    assert "not usable: bus does not answer" in told[0]
    assert "open" in told[0]  # the contact, on another bus


def test_on_another_machine_the_file_is_explained_and_what_lacks_is_said(
    parts: EmulatedHardware, tmp_path: Path
) -> None:
    code, text = run(shop(), parts, tmp_path)
    assert code == 0
    assert "Nothing was read: this machine has no /dev/i2c-1, /sys/bus/w1/devices" in text
    assert "riser (pipe, after tank)" in text


def test_a_bus_that_is_missing_beside_others_is_a_fault(
    parts: EmulatedHardware, a_pi: Path
) -> None:
    (a_pi / "dev/i2c-1").rmdir()
    assert missing_devices(shop(), a_pi) == (("/dev/i2c-1",), False)
    parts.i2c(1).parts.clear()
    code, text = run(shop(), parts, a_pi)
    assert code == 1
    assert "18 degC" in text


def test_no_sensors_reads_none(parts: EmulatedHardware, a_pi: Path) -> None:
    code, text = run(shop(), parts, a_pi, no_sensors=True)
    assert code == 0
    assert "Sensors now" not in text
    assert parts.i2c(1).operations == 0


def test_watch_reads_again_until_it_is_stopped(parts: EmulatedHardware, a_pi: Path) -> None:
    clock = QuickClock(waits=3)  # the second look, and two pauses
    code, text = run(shop(), parts, a_pi, clock, watch=True)
    assert code == 0
    assert text.count("Sensors now, read just now") == 3
    assert text.count("(Ctrl-C ends this)") == 3
    assert "The line, in the order" not in text


def test_a_part_that_is_plugged_in_while_one_watches_answers(
    parts: EmulatedHardware, a_pi: Path
) -> None:
    part = parts.bme280(1, 0x76)
    part.silent = True
    looker = Looker(shop(), parts, QuickClock())
    try:
        assert "intake-air.pressure" in looker.look().faults()
        part.silent = False
        for _ in range(3):
            looked = looker.look()
        assert not looked.faults()
    finally:
        looker.close()


def test_while_the_daemon_runs_what_it_hears_is_shown_and_no_bus_is_touched(
    parts: EmulatedHardware, tmp_path: Path
) -> None:
    running = FakeRunning()
    running.views[1] = replace(running.views[1], counted_from_us=NOW_US - HOUR_US)
    server = ApiServer(create_app(running), "127.0.0.1", 0)
    server.start()
    try:
        text = SITE.format(units="metric", port=server.port)
        site = parse_site(text.replace("birch-works", running.site.id), "birch-works.toml")
        code, told = run(site, parts, tmp_path)
    finally:
        server.stop()
    assert code == 1
    assert "Sensors now, as the running daemon last heard them" in told
    assert "20 degC" in told
    assert told.index("What the traps hold") < told.index("Sensors now")
    words = " ".join(told.split())
    assert "Contents counted from Tue 1 Dec, 08:00: earlier state could not be read." in words
    assert "There may be more in riser than is shown. Drain it once" in words
    assert "not usable: no answer" in told  # its tank-gauge
    assert "nothing yet" in told
    assert parts.i2c(1).operations == 0


def test_another_program_on_the_port_is_no_daemon(parts: EmulatedHardware, a_pi: Path) -> None:
    with socket.create_server(("127.0.0.1", 0)) as other:
        port = other.getsockname()[1]

        def answer() -> None:
            with contextlib.suppress(OSError):  # closed below, whether it was asked twice or not
                while True:
                    connection, _ = other.accept()
                    with connection:
                        connection.recv(1000)
                        connection.sendall(b"HTTP/1.0 200 OK\r\n\r\n<html>hello</html>")

        answering = threading.Thread(target=answer, daemon=True)
        answering.start()
        told: list[str] = []
        options = argparse.Namespace(no_sensors=False, watch=False, store=None)
        site = shop(port=port)
        code = check(site, options, parts, QuickClock(), threading.Event(), told.append, a_pi)
    assert code == 0
    assert "Sensors now, read just now" in told[0]


# ---- words ----


def test_every_device_is_known_by_its_bus() -> None:
    site = shop()
    assert [device_of(config) for config in site.sensors] == [
        "/dev/i2c-1",
        "/dev/i2c-1",
        "/dev/i2c-1",
        "/sys/bus/w1/devices",
        "/dev/gpiochip0",
    ]


@pytest.mark.parametrize("reason", [v for n, v in vars(reasons).items() if n.isupper()])
def test_every_reason_has_its_remedy(reason: str) -> None:
    site = shop()
    if reason == reasons.DRIVER_FAILED:
        assert remedy(site.sensors[0], reason) == "Look at its wiring."
    for config in site.sensors if reason != reasons.DRIVER_FAILED else ():
        assert len(remedy(config, reason)) > 30


def test_plausible_lies_within_what_the_part_can_say() -> None:
    site = shop()
    for channel in site.channels.values():
        usual = plausible(site, channel)
        assert usual.lowest < usual.highest
        assert channel.lowest < usual.highest <= channel.highest * 1.01


def test_what_counts_pulses_or_waits_for_messages_may_have_said_nothing() -> None:
    more = (
        '[[sensor]]\nid = "slab"\ndriver = "mqtt-channel"\ntopic = "a/b"\nunit = "degC"\n'
        'quantity = "temperature"\n'
    )
    site = shop(more=more)
    section = now_section(site, Looked({"slab.temperature": Said(None, "nothing yet")}, "now"))
    assert any("published nothing while this listened" in line for line in section.lines)
    assert not Looked({"slab.temperature": Said(None, "nothing yet")}, "now").faults()


def test_a_channel_over_mqtt_is_listened_to(
    broker: Broker, parts: EmulatedHardware, a_pi: Path
) -> None:
    more = (
        f'[mqtt]\nhost = "127.0.0.1"\nport = {broker.port}\n'
        '[[sensor]]\nid = "slab"\ndriver = "mqtt-channel"\ntopic = "shop/slab"\n'
        'unit = "degC"\nquantity = "temperature"\n'
    )
    site = shop(more=more)
    stop = threading.Event()

    def speak() -> None:
        with Listener(broker.port, "nothing") as device:
            while not stop.wait(0.05):
                device.say("shop/slab", "14.5")

    speaker = threading.Thread(target=speak)
    speaker.start()
    told: list[str] = []
    try:
        options = argparse.Namespace(no_sensors=False, watch=False, store=None)
        code = check(site, options, parts, SystemClock(), threading.Event(), told.append, a_pi)
    finally:
        stop.set()
        speaker.join()
    assert code == 0
    assert "14.5 degC" in told[0]
    assert not [t for t in threading.enumerate() if t.name == "mqtt check"]


# ---- the command ----


def test_a_bad_site_file_is_2_and_a_good_one_without_its_hardware_0(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    good, bad = tmp_path / "good.toml", tmp_path / "bad.toml"
    text = SITE.format(units="metric", port=free_port())
    good.write_text(text)
    bad.write_text(text.replace('"8 bar"', '"8 feet"'))
    if all(not Path(d).exists() for d in ("/dev/i2c-1", "/dev/gpiochip0", "/sys/bus/w1/devices")):
        assert main(["check", str(good)]) == 0
        assert "Nothing was read: this machine has no /dev/i2c-1" in capsys.readouterr().out
    assert main(["check", "--no-sensors", str(good)]) == 0
    assert main(["check", str(bad)]) == 2
    assert "8 feet" in capsys.readouterr().err


def test_the_options_are_those_that_the_command_looks_at() -> None:
    options = parser().parse_args(["check", "shop.toml"])
    assert (options.watch, options.no_sensors, options.salt) == (False, False, None)
