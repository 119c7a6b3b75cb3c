"""`dripleg demo`: its options, what it says, and that it leaves nothing behind."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import sys
from pathlib import Path
from types import SimpleNamespace
from typing import cast
from zoneinfo import ZoneInfo

import pytest

from daemon.__main__ import main
from daemon.clock import HOUR_US, to_datetime
from daemon.demo import DemoError, _ShopSampler, broker, demo_site, seconds
from daemon.journal import Drain, Entry, Undo
from daemon.make_believe import MakeBelieveShop
from daemon.site import hours as opening
from daemon.site.types import Mqtt
from sensors.sampling import Sampler
from tests.daemon.broker import TIMEOUT_S, free_port
from tests.daemon.shops import BEGUN_US
from tests.tree import ROOT


@pytest.mark.parametrize(
    ("text", "length_s"),
    [
        ("90s", 90.0),
        ("90", 90.0),
        ("1.5 min", 90.0),
        ("2m", 120.0),
        ("1 h", 3600.0),
        (" 0.5s ", 0.5),
    ],
)
def test_a_length_of_time_is_taken_as_people_write_it(text: str, length_s: float) -> None:
    assert seconds(text) == length_s


@pytest.mark.parametrize("text", ["", "s", "0s", "-5s", "five", "90 days", "1e3s", "nan", "9 0s"])
def test_what_is_no_length_of_time_is_refused(text: str) -> None:
    with pytest.raises(DemoError, match=r"--for .*write a length of time like 90s or 5min"):
        seconds(text)


@pytest.mark.parametrize(
    ("text", "found"),
    [
        ("127.0.0.1:1883", Mqtt("127.0.0.1", 1883)),
        ("broker.lan:8883", Mqtt("broker.lan", 8883)),
        ("[::1]:1883", Mqtt("::1", 1883)),
    ],
)
def test_a_broker_is_host_and_port(text: str, found: Mqtt) -> None:
    assert broker(text) == found


@pytest.mark.parametrize("text", ["", "host", ":1883", "host:", "host:0", "host:65536", "host:x"])
def test_what_is_no_broker_is_refused(text: str) -> None:
    with pytest.raises(DemoError, match=r"--broker .*write HOST:PORT"):
        broker(text)


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (["--for", "soon"], '--for "soon"'),
        (["--broker", "nowhere"], '--broker "nowhere"'),
        (["--speed", "0.5"], "--speed 0.5: give a number from 1 to 600"),
        (["--speed", "1000"], "--speed 1000"),
        (["--speed", "nan"], "--speed nan"),
        (["--port", "65536"], "--port 65536: give a number from 1 to 65535"),
        (["--port", "-1"], "--port -1"),
    ],
)
def test_an_option_that_cannot_be_starts_nothing(
    options: list[str], words: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["demo", "--for", "1s", *options]) == 2
    said = capsys.readouterr()
    assert said.out == ""
    assert words in said.err


@pytest.mark.parametrize("hour", range(24))
def test_the_shop_is_at_work_whenever_the_demo_is_started(hour: int) -> None:
    """In a time zone in which it is mid-morning, with the rest of the shift ahead."""
    start_us = BEGUN_US + hour * HOUR_US
    site = demo_site(start_us, None)
    local = to_datetime(start_us).astimezone(ZoneInfo(site.timezone))
    assert local.hour == 10
    for later_us in (start_us, start_us + HOUR_US):
        assert opening.is_open(site.hours, site.timezone, later_us)
    end_us = opening.next_shift_end(site.hours, site.timezone, start_us)
    assert end_us is not None
    assert end_us - start_us > 6 * HOUR_US


def demo(folder: Path, *options: str) -> subprocess.Popen[str]:
    """The demo as a newcomer starts it, with temporary files in a folder of the test's."""
    return subprocess.Popen(
        [sys.executable, "-W", "error", "-m", "daemon", "demo", *options],
        cwd=ROOT,
        env=os.environ | {"TMPDIR": str(folder)},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )


def test_a_run_says_where_to_look_and_stops_by_itself(tmp_path: Path) -> None:
    port = free_port()
    process = demo(tmp_path, "--for", "12s", "--speed", "600", "--port", str(port))
    out, err = process.communicate(timeout=TIMEOUT_S)
    assert (process.returncode, err) == (0, "")
    assert "make-believe shop" in out
    assert f"http://127.0.0.1:{port}/api/v1/traps\n" in out
    assert "An hour there passes in 6 s here, for 12 s." in out
    assert "Without MQTT" in out
    assert re.search(r"tank +\d+ ml \(\d+ to \d+ ml\)", out)
    assert "tank-drain-due: unacknowledged" in out
    assert out.endswith("The demo has stopped; what it stored is gone.\n")
    assert list(tmp_path.iterdir()) == []


def test_ctrl_c_ends_it_cleanly(tmp_path: Path) -> None:
    process = demo(tmp_path, "--port", "0")
    assert process.stdout is not None
    assert "make-believe shop" in process.stdout.readline()
    while "Without MQTT" not in process.stdout.readline():
        assert process.poll() is None
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=TIMEOUT_S)
    assert (process.returncode, err) == (0, "")
    assert out.endswith("The demo has stopped; what it stored is gone.\n")
    assert list(tmp_path.iterdir()) == []


def test_it_ends_when_nobody_reads_what_it_says(tmp_path: Path) -> None:
    """As with `dripleg demo | head`: it must not run on unseen."""
    process = demo(tmp_path, "--port", "0", "--speed", "600")
    assert process.stdout is not None
    while "Without MQTT" not in process.stdout.readline():
        assert process.poll() is None
    process.stdout.readline()  # the greeting's last: from here on only the teller speaks
    process.stdout.close()
    process.wait(TIMEOUT_S)
    assert process.stderr is not None
    with process.stderr:
        assert process.stderr.read() == ""
    assert list(tmp_path.iterdir()) == []


def test_a_port_that_is_taken_is_told_and_nothing_runs_on(tmp_path: Path) -> None:
    first = demo(tmp_path, "--port", "0")
    assert first.stdout is not None
    port = ""
    while not port:
        found = re.search(r"look +http://127\.0\.0\.1:(\d+)/", first.stdout.readline())
        port = found[1] if found else ""
    second = demo(tmp_path, "--port", port)
    out, err = second.communicate(timeout=TIMEOUT_S)
    first.send_signal(signal.SIGTERM)
    first.communicate(timeout=TIMEOUT_S)
    assert (second.returncode, out) == (1, "")
    assert err.startswith(f"dripleg: the API cannot listen on 127.0.0.1 port {port}: another")
    assert err.count("\n") == 1
    assert first.returncode == 0
    assert list(tmp_path.iterdir()) == []


def test_what_is_undone_was_never_drained_in_the_make_believe_shop() -> None:
    held = {"tank": 0.6}
    shop = SimpleNamespace(traps_kg=held, drain=lambda trap: held.update({trap: 0.02}))
    sampler = _ShopSampler(cast(Sampler, None), cast(MakeBelieveShop, shop))
    sampler.drain(Entry(1, 0, 0, Drain("tank", by="AM")))
    assert held == {"tank": 0.02}
    sampler.drain(Entry(2, 0, 0, Undo("tank", 1, "AM")))
    assert held["tank"] == pytest.approx(0.6)
