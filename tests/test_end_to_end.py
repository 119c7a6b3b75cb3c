"""The whole thing, as a shop and its other programs see it: processes, HTTP, MQTT, signals."""

from __future__ import annotations

import json
import os
import re
import signal
import subprocess
import sys
import threading
import urllib.error
import urllib.request
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from importlib import resources
from pathlib import Path
from typing import Any

import pytest

from daemon import compose
from daemon.__main__ import main
from daemon.advance import Core
from daemon.clock import DAY_US, SystemClock
from daemon.errors import DriplegError, StoreError
from daemon.journal import Drain
from daemon.replay import replay
from daemon.shell import Shell
from daemon.store.store import Store
from sensors.emulated.hardware import EmulatedHardware
from tests.daemon.broker import TIMEOUT_S, Broker, Heard, Listener, free_port
from tests.daemon.shops import BEGUN_US, SITE, site
from tests.daemon.test_shell import HandClock, Played, bits
from tests.tree import ROOT

SHOP = site()


class Process:
    """A program of the project's, with what it says."""

    def __init__(self, *arguments: str, folder: Path | None = None) -> None:
        temporary = {} if folder is None else {"TMPDIR": str(folder)}
        self._process = subprocess.Popen(
            [sys.executable, "-W", "error", "-m", *arguments],
            cwd=ROOT,
            env=os.environ | temporary,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )
        self.lines: list[str] = []

    def wait_for(self, pattern: str) -> str:
        """Read on until a line fits; its first group."""
        assert self._process.stdout is not None
        for line in self._process.stdout:
            self.lines.append(line)
            if found := re.search(pattern, line):
                return found[1]
        _, err = self._process.communicate(timeout=TIMEOUT_S)
        raise AssertionError(f"never said {pattern!r}: {self.lines[-5:]}, {err}")

    def end(self, number: int) -> tuple[int, str, str]:
        """Send a signal, wait; exit code, and what it said last on both ways."""
        self._process.send_signal(number)
        return self.finished()

    def finished(self) -> tuple[int, str, str]:
        out, err = self._process.communicate(timeout=TIMEOUT_S)
        return self._process.returncode, out, err

    def __enter__(self) -> Process:
        return self

    def __exit__(self, *_: object) -> None:
        if self._process.poll() is None:
            self._process.kill()
            self._process.communicate()


def ask(url: str, body: Any = None) -> Any:
    """The JSON that a GET answers, or a POST with a body."""
    data = None if body is None else json.dumps(body).encode()
    request = urllib.request.Request(url, data, {"content-type": "application/json"})
    opener = urllib.request.build_opener(urllib.request.ProxyHandler({}))
    try:
        with opener.open(request, timeout=TIMEOUT_S) as answer:
            return json.load(answer)
    except urllib.error.HTTPError as error:
        with error:
            return json.load(error)


def until(so: Callable[[], object]) -> None:
    """Look again and again until it is so."""
    clock, never = SystemClock(), threading.Event()
    end_s = clock.monotonic() + TIMEOUT_S
    while not so():
        assert clock.monotonic() < end_s, "it never came to it"
        clock.wait(0.02, never)


@pytest.fixture
def broker(tmp_path: Path) -> Iterator[Broker]:
    folder = tmp_path / "broker"
    folder.mkdir()
    started = Broker(folder).start()
    yield started
    started.stop()


# ---- the demo, as its README tells it ----

BASE = "dripleg/larch-lane"
ALARM = "tank-drain-due"


def told(state: str) -> Callable[[list[Heard]], object]:
    """Both the event and the retained state of the tank's alarm have come to this."""

    def so(heard: list[Heard]) -> bool:
        events = [each.body for each in heard if each.topic == f"{BASE}/events"]
        states = [each.body for each in heard if each.topic == f"{BASE}/alarms/{ALARM}"]
        event = any(each["alarm"] == ALARM and each["to"] == state for each in events)
        return event and bool(states) and states[-1]["state"] == state

    return so


def test_a_trap_fills_its_alarm_is_raised_and_a_drain_ends_it_over_http_and_mqtt(
    tmp_path: Path, broker: Broker, capsys: pytest.CaptureFixture[str]
) -> None:
    temporary = tmp_path / "tmp"
    temporary.mkdir()
    where = f"127.0.0.1:{broker.port}"
    options = ["--broker", where, "--speed", "600", "--port", "0"]
    with (
        Listener(broker.port, f"{BASE}/#") as listener,
        Process("daemon", "demo", *options, folder=temporary) as demo,
    ):
        url = demo.wait_for(r"look +(http://\S+/)") + "api/v1"
        listener.wait_for(told("unacknowledged"))

        # the tank filled, and says so everywhere
        traps = [each.body for each in listener.heard if each.topic == f"{BASE}/traps/tank"]
        assert traps[0]["p50_ml"] < traps[0]["drain_at_ml"] <= traps[-1]["p50_ml"]
        standing = {each["id"]: each["state"] for each in ask(f"{url}/alarms")}
        assert standing[ALARM] == "unacknowledged"
        assert not [each for each in standing if each.endswith("-sensor-fault")]
        tank = ask(f"{url}/traps/tank")
        assert tank["probability_due"] > 0.5
        assert (tank["due"]["because"], tank["since"]) == ("volume", "start")
        with Listener(broker.port, f"{BASE}/alarms/{ALARM}") as late:
            retained = late.wait_for_number(1)[0]
            assert retained.retained
            assert retained.body["state"] == "unacknowledged"
        event = next(
            each.body
            for each in listener.heard
            if each.topic == f"{BASE}/events" and each.body["alarm"] == ALARM
        )
        assert (event["from"], event["to"]) == ("normal", "unacknowledged")
        assert event["id"].startswith(f"{ALARM}/")

        # somebody drains it
        answer = ask(f"{url}/traps/tank/drains", {"outcome": "emptied", "volume_ml": 590})
        assert (answer["trap"], answer["volume_ml"]) == ("tank", 590)
        assert ask(f"{url}/traps/tank")["p95_ml"] < 50
        listener.wait_for(told("normal"))
        assert ALARM not in {each["id"] for each in ask(f"{url}/alarms")}
        every = {each["id"]: each["state"] for each in ask(f"{url}/alarms?all=true")}
        assert every[ALARM] == "normal"
        ids = [each.body["id"] for each in listener.heard if each.topic == f"{BASE}/events"]
        assert len(ids) == len(set(ids))
        tank = ask(f"{url}/traps/tank")
        assert (tank["since"], tank["p50_ml"] < 300) == ("last drain", True)
        assert [each["volume_ml"] for each in ask(f"{url}/traps/tank/drains")] == [590]

        # a second drain from a shell, by way of the same API
        text = resources.files("daemon").joinpath("demo-site.toml").read_text()
        site_file = tmp_path / "larch-lane.toml"
        port = re.search(r":(\d+)/", url)
        assert port is not None
        site_file.write_text(f"{text}\n[api]\nport = {port[1]}\n")
        assert main(["drained", str(site_file), "riser", "--volume", "40 ml", "--by", "AM"]) == 0
        assert "recorded as no. 2: riser emptied at 20" in capsys.readouterr().out
        (riser,) = ask(f"{url}/traps/riser/drains")
        assert (riser["volume_ml"], riser["by"]) == (40, "AM")

        # and it is stopped
        code, out, err = demo.end(signal.SIGTERM)
        assert (code, err) == (0, "")
        assert out.endswith("The demo has stopped; what it stored is gone.\n")
        listener.wait_for(
            lambda heard: any(
                each.topic == f"{BASE}/service" and each.body["state"] == "stopped"
                for each in heard
            )
        )
        assert list(temporary.iterdir()) == []


# ---- killed ----


def recovered(store_path: Path) -> tuple[bytes, bytes, Store]:
    """The bits that a daemon comes back to, and those of a replay of all that is stored."""
    store = Store.open(store_path, SHOP.channels)
    shell = Shell(SHOP, HandClock(BEGUN_US), Played([]), store)
    shell.recover()
    state = shell._state
    assert state is not None
    core = Core(SHOP)
    stored = [each for _, found in store.ticks(0, BEGUN_US + 100 * DAY_US) for each in found]
    entries = [each for each in store.entries() if each.at_us <= state.time_us]
    entries.sort(key=lambda entry: (entry.at_us, entry.seq))
    return bits(state), bits(replay(core, stored, entries).state), store


def test_a_daemon_that_is_killed_comes_back_to_the_same_bits(tmp_path: Path) -> None:
    """`kill -9` while it ticks, right after it has answered a drain; twice."""
    path = tmp_path / "birch-works.db"
    start_us, ticks = BEGUN_US, 0
    for life in (1, 2):
        with Process("tests.emulated_daemon", str(path), str(start_us)) as daemon:
            url = daemon.wait_for(r"(http://\S+/)")
            daemon.wait_for(r"^(90)$")
            answer = ask(f"{url}api/v1/traps/tank/drains", {"volume_ml": 20 * life})
            code, _, _ = daemon.end(signal.SIGKILL)
            assert code == -signal.SIGKILL
        back, again, store = recovered(path)
        with store:
            assert not store.last_stop_clean
            assert back == again
            recorded = store.entries()
            assert len(recorded) == answer["seq"] == life
            body = recorded[-1].body
            assert isinstance(body, Drain)
            assert body.volume_kg == pytest.approx(0.02 * life)
            stored = sum(1 for _ in store.ticks(0, BEGUN_US + 100 * DAY_US))
            assert stored >= ticks + 90
            ticks = stored
            assert store.last_tick_us is not None
            start_us = store.last_tick_us + 7 * 60_000_000


def test_a_daemon_that_is_stopped_leaves_a_checkpoint_and_goes_on(tmp_path: Path) -> None:
    path = tmp_path / "birch-works.db"
    with Process("tests.emulated_daemon", str(path)) as daemon:
        daemon.wait_for(r"^(60)$")
        code, out, err = daemon.end(signal.SIGTERM)
    assert (code, err) == (0, "")
    assert out.endswith("stopped\n")
    back, again, store = recovered(path)
    with store:
        assert store.last_stop_clean
        assert store.last_tick_us is not None
        found = store.checkpoint_before(store.last_tick_us)
        assert found is not None
        assert found[0] == store.last_tick_us
    assert back == again


# ---- what a person gets wrong ----


def site_file(folder: Path, port: int) -> Path:
    path = folder / "birch-works.toml"
    text = SITE.replace("[site]\n", '[site]\nsample_every = "1 s"\n')
    path.write_text(f"{text}\n[api]\nport = {port}\n")
    return path


def test_a_machine_without_the_parts_runs_and_says_what_is_missing(tmp_path: Path) -> None:
    """An unplugged sensor is a fault on record, not an end."""
    path = site_file(tmp_path, port := free_port())
    with Process("daemon", "run", str(path)) as daemon:
        url = f"http://127.0.0.1:{port}/api/v1"

        def faults() -> list[str]:
            try:
                return [each["id"] for each in ask(f"{url}/alarms")]
            except urllib.error.URLError:
                return []

        until(lambda: "intake-air-sensor-fault" in faults())
        health = ask(f"{url}/health")
        assert not health["ok"]
        assert any("intake-air" in problem for problem in health["problems"])
        assert len(ask(f"{url}/traps")) == 3
        code, out, err = daemon.end(signal.SIGTERM)
    assert (code, out) == (0, "")
    assert f"Birch Works: watching; API at http://127.0.0.1:{port}/" in err
    assert "Traceback" not in err
    assert (tmp_path / "birch-works.db").exists()


def test_a_second_daemon_on_the_same_database_is_refused(tmp_path: Path) -> None:
    path = site_file(tmp_path, free_port())
    with (
        Store.open(tmp_path / "birch-works.db", SHOP.channels),
        Process("daemon", "run", str(path)) as daemon,
    ):
        code, out, err = daemon.finished()
    assert (code, out) == (1, "")
    assert f"another dripleg (process {os.getpid()}) is using this database" in err
    assert "Traceback" not in err


def test_a_port_that_is_taken_is_told_and_leaves_the_database_closed(
    tmp_path: Path, broker: Broker
) -> None:
    path = site_file(tmp_path, broker.port)
    with Process("daemon", "run", str(path)) as daemon:
        code, out, err = daemon.finished()
    assert (code, out) == (1, "")
    assert f"the API cannot listen on 127.0.0.1 port {broker.port}: another program" in err
    assert "Traceback" not in err
    with Store.open(tmp_path / "birch-works.db", SHOP.channels) as store:
        assert store.last_stop_clean


def test_a_broken_site_file_starts_nothing(tmp_path: Path) -> None:
    path = site_file(tmp_path, free_port())
    path.write_text(path.read_text().replace('volume = "100 L"', 'volume = "100 furlongs"'))
    with Process("daemon", "run", str(path)) as daemon:
        code, out, err = daemon.finished()
    assert (code, out) == (2, "")
    assert '1. [station "tank"] volume = "100 furlongs"' in err
    assert [each.name for each in tmp_path.iterdir()] == ["birch-works.toml"]


# ---- `dripleg drained` ----


@contextmanager
def serving(folder: Path, text: str, port: int, host: str = "127.0.0.1") -> Iterator[compose.Parts]:
    """A daemon of this process, on emulated parts, that does not tick."""
    with EmulatedHardware() as hardware:
        shop = site(f'{text}\n[api]\nport = {port}\nhost = "{host}"\n')
        hardware.fit(shop.sensors)
        setting = compose.Setting(shop, folder / f"{shop.id}.db", hardware)
        with compose.running(setting, threading.Event()) as parts:
            yield parts


def drained(path: Path, *options: str) -> int:
    return main(["drained", str(path), *options])


@pytest.mark.parametrize(
    ("options", "outcome", "volume_kg"),
    [
        (["--volume", "380 ml"], "emptied", 0.38),
        (["--volume", "12 oz"], "emptied", 0.354882),  # NIST SP 811: 29.57353 ml to the ounce
        (["--volume", "0 ml"], "empty", 0.0),
        (["--empty"], "empty", None),
        (["--partly"], "partly", None),
        ([], "emptied", None),
    ],
)
@pytest.mark.parametrize("running", [True, False])
def test_a_drain_from_a_shell_is_recorded_whether_the_daemon_runs_or_not(
    tmp_path: Path, running: bool, options: list[str], outcome: str, volume_kg: float | None
) -> None:
    path = site_file(tmp_path, port := free_port())
    store_path = tmp_path / "birch-works.db"
    if running:
        with serving(tmp_path, SITE, port):
            assert drained(path, "tank", *options, "--look", "milky") == 0
    else:
        Store.open(store_path, SHOP.channels).close()
        assert drained(path, "tank", *options, "--look", "milky") == 0
    with Store.open(store_path, SHOP.channels) as store:
        (entry,) = store.entries()
    assert isinstance(entry.body, Drain)
    assert (entry.body.trap, entry.body.outcome, entry.body.look) == ("tank", outcome, "milky")
    if volume_kg is None:
        assert entry.body.volume_kg is None
    else:
        assert entry.body.volume_kg == pytest.approx(volume_kg, rel=1e-6)


@pytest.mark.parametrize("running", [True, False])
@pytest.mark.parametrize(
    ("options", "words"),
    [
        (["tnak"], '"tnak"'),
        (["tank/../riser?x=1 y"], "tank/../riser?x=1 y"),
        (["tank", "--volume", "5"], '"5" has no unit'),
        (["tank", "--volume", "99 L"], "more than twice what"),
        (["tank", "--volume", "-5 ml"], "-5 ml"),
        (["tank", "--at", "noon"], '--at: "noon" is not an RFC 3339 time'),
        (["tank", "--at", "2199-01-01T00:00:00Z"], "ahead of"),
        (["tank", "--empty", "--partly"], "contradict each other"),
        (["tank", "--empty", "--volume", "5 ml"], "empty"),
        (["tank", "--look", "purple"], "purple"),
        (["tank", "--by", "x" * 41], "40"),
    ],
)
def test_a_drain_that_cannot_be_is_refused_whether_the_daemon_runs_or_not(
    tmp_path: Path,
    capsys: pytest.CaptureFixture[str],
    running: bool,
    options: list[str],
    words: str,
) -> None:
    path = site_file(tmp_path, port := free_port())
    if running:
        with serving(tmp_path, SITE, port):
            code = drained(path, *options)
    else:
        Store.open(tmp_path / "birch-works.db", SHOP.channels).close()
        code = drained(path, *options)
    said = capsys.readouterr()
    assert (code, said.out) == (2, "")
    assert said.err.startswith("dripleg: ")
    assert words in said.err
    with Store.open(tmp_path / "birch-works.db", SHOP.channels) as store:
        assert store.entries() == []


def test_a_drain_for_a_daemon_of_another_site_is_not_given_to_it(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = site_file(tmp_path, port := free_port())
    with serving(tmp_path, SITE.replace('id = "birch-works"', 'id = "other-works"'), port):
        assert drained(path, "tank") == 2
    assert 'is served by another dripleg ("other-works", not "birch-works")' in (
        capsys.readouterr().err
    )


def test_without_a_daemon_and_without_a_database_there_is_nowhere_to_record(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = site_file(tmp_path, port := free_port())
    assert drained(path, "tank") == 1
    said = capsys.readouterr().err
    assert f"no daemon answers at 127.0.0.1:{port}, and there is no database at" in said
    assert not (tmp_path / "birch-works.db").exists()


def test_a_drain_from_before_the_record_is_refused(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = site_file(tmp_path, free_port())
    with Store.open(tmp_path / "birch-works.db", SHOP.channels) as store:
        Shell(SHOP, HandClock(BEGUN_US), Played([]), store).tick(BEGUN_US)
    assert drained(path, "tank", "--at", "2026-03-02T06:59:59Z") == 2
    assert "before the record begins (2026-03-02T07:00:00Z)" in capsys.readouterr().err


def test_what_answers_but_is_no_daemon_is_told(
    tmp_path: Path, broker: Broker, capsys: pytest.CaptureFixture[str]
) -> None:
    path = site_file(tmp_path, broker.port)
    assert drained(path, "tank") == 1
    assert f"127.0.0.1:{broker.port} does not answer as it should" in capsys.readouterr().err


# ---- nothing is left running ----


@pytest.mark.parametrize("trouble", ["port", "database"])
def test_a_daemon_that_cannot_start_stops_what_it_had_started(
    tmp_path: Path, broker: Broker, trouble: str
) -> None:
    before = set(threading.enumerate())
    text = f'{SITE}\n[mqtt]\nhost = "127.0.0.1"\nport = {broker.port}\n'
    store_path = tmp_path / "birch-works.db"
    port = broker.port if trouble == "port" else free_port()
    if trouble == "database":
        store_path.write_bytes(b"this is a text of mine, and no database" * 100)
    with pytest.raises(DriplegError), serving(tmp_path, text, port):
        raise AssertionError("it started")
    until(lambda: set(threading.enumerate()) <= before)
    if trouble == "port":
        Store.open(store_path, SHOP.channels).close()
    else:
        with pytest.raises(StoreError, match="not a dripleg database"):
            Store.open(store_path, SHOP.channels)
