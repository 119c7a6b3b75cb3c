"""`dripleg check --salt`: what is read in the jar, when it counts, and where it goes."""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from api.app import create_app
from api.server import ApiServer
from daemon.__main__ import main
from daemon.check_salt import Wanted, judge, salt_check
from daemon.errors import JournalError, StoreError
from daemon.journal import SaltCheck
from daemon.shell import GRID_KEY
from daemon.site.types import Site
from daemon.store.store import Store
from daemon.views import ChannelHealth, Health
from sensors.emulated.hardware import EmulatedHardware
from tests.api.fake import FakeRunning
from tests.daemon.broker import free_port
from tests.daemon.shops import SITE, site
from tests.daemon.test_check_sensors import QuickClock

JAR_K = 296.15  # 23 degC: 75.38 % over wet salt


@pytest.fixture
def hardware() -> Iterator[EmulatedHardware]:
    with EmulatedHardware() as parts:
        parts.fit(shop().sensors)
        jar = parts.bme280(1, 0x76)
        jar.temperature_k, jar.relative_humidity = JAR_K, 0.774
        yield parts


def shop() -> Site:
    return site(f"{SITE}\n[api]\nport = {free_port()}\n")


@pytest.fixture
def path(tmp_path: Path) -> Path:
    """A database whose record began long ago."""
    place = tmp_path / "birch-works.db"
    with Store.open(place, shop().channels) as store:
        store.set_meta(GRID_KEY, "1000000")
    return place


def run(
    hardware: EmulatedHardware,
    path: Path,
    sensor: str = "intake-air",
    length_s: float = 600.0,
    here: Site | None = None,
    clock: QuickClock | None = None,
) -> str:
    told: list[str] = []
    wanted = Wanted(sensor, length_s, "AM", path)
    never = threading.Event()
    salt_check(here or shop(), wanted, hardware, clock or QuickClock(), never, told.append)
    return "\n".join(told)


def recorded(path: Path) -> list[object]:
    with Store.open(path, shop().channels) as store:
        return [entry.body for entry in store.entries()]


def test_what_it_reads_beside_what_is_true_goes_into_the_journal(
    hardware: EmulatedHardware, path: Path
) -> None:
    text = run(hardware, path)
    assert "wet paste" in text
    assert "while the compressor is off" in text
    assert "intake-air reads 77.4 % where 75.4 % is: 2 % too high. Recorded" in text
    (check,) = recorded(path)
    assert isinstance(check, SaltCheck)
    assert (check.sensor, check.by) == ("intake-air", "AM")
    assert check.reads == pytest.approx(0.774, abs=2e-4)
    assert check.true == pytest.approx(0.7538, abs=1e-4)


class Warming(QuickClock):
    """Each pause changes something."""

    def __init__(self, change: Callable[[], None]) -> None:
        super().__init__()
        self._change = change

    def wait(self, seconds: float, stop: threading.Event) -> bool:
        self._change()
        return super().wait(seconds, stop)


def test_a_jar_that_has_not_settled_is_no_check(hardware: EmulatedHardware, path: Path) -> None:
    part = hardware.bme280(1, 0x76)

    def rise() -> None:
        part.relative_humidity += 0.0005

    with pytest.raises(JournalError, match=r"still moves .* leave it longer in the closed jar"):
        run(hardware, path, clock=Warming(rise))
    assert recorded(path) == []


@pytest.mark.parametrize(
    ("temperature_k", "humidity", "words"),
    [
        (JAR_K, 0.52, "so far off is no bias. Was it in the jar"),
        (280.0, 0.755, "do this between 15 degC and 35 degC"),
        (312.0, 0.755, "do this between"),
    ],
)
def test_what_cannot_be_a_check_is_refused(
    hardware: EmulatedHardware, path: Path, temperature_k: float, humidity: float, words: str
) -> None:
    part = hardware.bme280(1, 0x76)
    part.temperature_k, part.relative_humidity = temperature_k, humidity
    with pytest.raises(JournalError, match=words):
        run(hardware, path)
    assert recorded(path) == []


def test_a_silent_sensor_is_no_check(hardware: EmulatedHardware, path: Path) -> None:
    hardware.bme280(1, 0x76).silent = True
    with pytest.raises(JournalError, match="only 0 good readings: run `dripleg check`"):
        run(hardware, path)


@pytest.mark.parametrize(
    ("sensor", "length_s", "words"),
    [
        ("motor", 600.0, r'--salt "motor": no humidity sensor has this id \(intake-air\)'),
        ("intake-air", 5.0, "from 1 min to 1 day"),
    ],
)
def test_a_wrong_sensor_or_time_is_told_at_once(
    hardware: EmulatedHardware, path: Path, sensor: str, length_s: float, words: str
) -> None:
    with pytest.raises(JournalError, match=words):
        run(hardware, path, sensor, length_s)
    assert hardware.i2c(1).operations == 0


def test_without_daemon_or_database_it_says_so(hardware: EmulatedHardware, tmp_path: Path) -> None:
    with pytest.raises(StoreError, match="start the daemon first"):
        run(hardware, tmp_path / "none.db")


def test_stopped_before_its_time_it_records_nothing(hardware: EmulatedHardware, path: Path) -> None:
    with pytest.raises(JournalError, match="stopped before the time was over"):
        run(hardware, path, clock=QuickClock(waits=5))
    assert recorded(path) == []


def test_judging_takes_the_mean_of_what_stands() -> None:
    read = [(0.771 + 0.001 * (n % 2), JAR_K) for n in range(30)]
    jar = judge(shop(), "intake-air", read)
    assert jar.humidity == pytest.approx(0.7715)
    assert jar.temperature_k == pytest.approx(JAR_K)


class InTheJar(FakeRunning):
    """A daemon whose sensor hangs in the jar."""

    def health(self) -> Health:
        said = {"relative_humidity": 0.7641, "temperature": JAR_K}
        channels = tuple(
            ChannelHealth(f"intake-air.{name}", 1, value, "") for name, value in said.items()
        )
        return replace(super().health(), channels=channels)


def test_a_running_daemon_is_asked_and_told(hardware: EmulatedHardware, path: Path) -> None:
    """Its readings are used, its journal is written: nothing else touches the bus."""
    running = InTheJar()
    server = ApiServer(create_app(running), "127.0.0.1", 0)
    server.start()
    try:
        text = f"{SITE}\n[api]\nport = {server.port}\n"
        here = site(text.replace('"birch-works"', f'"{running.site.id}"'))
        text = run(hardware, path, here=here)
    finally:
        server.stop()
    assert "intake-air reads 76.4 % where 75.4 % is: 1 % too high" in text
    (entry,) = running.journal
    assert entry.body == SaltCheck("intake-air", 0.7641, 0.7538, "AM")
    assert hardware.i2c(1).operations == 0
    assert recorded(path) == []


def test_the_command_refuses_a_time_that_is_none(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    file = tmp_path / "shop.toml"
    file.write_text(SITE)
    assert main(["check", str(file), "--salt", "intake-air", "--for", "soon"]) == 2
    assert "--for:" in capsys.readouterr().err
