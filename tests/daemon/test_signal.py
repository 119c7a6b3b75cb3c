"""The lamp or buzzer. What asks for somebody, and until when, is after ISA-18.2 (unacknowledged:
until it was seen; shelved, suppressed by design, out of service: not at all); how long it blinks is
invented."""

from __future__ import annotations

import argparse
import threading
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import gpiod
import pytest

from daemon import compose
from daemon.alarms import Alarm, AlarmState, Priority
from daemon.check import explain
from daemon.check_command import check
from daemon.clock import SECOND_US, SystemClock
from daemon.errors import SiteError
from daemon.journal import Acknowledge
from daemon.signal_output import RETRY_EVERY_S, Show, SignalOutput, is_on, wanted
from daemon.site.types import Signal
from sensors.emulated.hardware import EmulatedHardware
from sensors.emulated.lines import EmulatedLines
from sensors.lines import GpiodLines
from tests.daemon.shops import BEGUN_US, SITE, site
from tests.daemon.test_shell import HandClock

LAMP, BUZZER = Signal(), Signal(kind="buzzer")


def alarm(state: AlarmState, priority: Priority = "medium") -> Alarm:
    return Alarm("tank-drain-due", "drain-due", "tank", state, priority, 0, "")


# ---- what is shown ----


@pytest.mark.parametrize(
    ("state", "lamp", "buzzer"),
    [
        ("normal", "off", "off"),
        ("unacknowledged", "pattern", "pattern"),
        ("acknowledged", "steady", "off"),
        ("returned unacknowledged", "off", "off"),
        ("shelved", "off", "off"),
        ("suppressed by design", "off", "off"),
        ("out of service", "off", "off"),
    ],
)
def test_a_lamp_stays_until_it_is_over_and_a_buzzer_until_it_was_seen(
    state: AlarmState, lamp: Show, buzzer: Show
) -> None:
    assert wanted(LAMP, [alarm(state)], is_open=True) == lamp
    assert wanted(BUZZER, [alarm(state)], is_open=True) == buzzer


def test_a_buzzer_keeps_quiet_outside_working_hours_and_a_lamp_does_not() -> None:
    assert wanted(BUZZER, [alarm("unacknowledged")], is_open=False) == "off"
    assert wanted(LAMP, [alarm("unacknowledged")], is_open=False) == "pattern"


def test_only_the_priorities_that_were_asked_for_are_shown() -> None:
    urgent = replace(LAMP, priorities=("high",))
    assert wanted(urgent, [alarm("unacknowledged", "medium")], is_open=True) == "off"
    assert wanted(urgent, [alarm("unacknowledged", "high")], is_open=True) == "pattern"


def test_what_nobody_has_seen_comes_before_what_somebody_has() -> None:
    both = [alarm("acknowledged"), alarm("unacknowledged")]
    assert wanted(LAMP, both, is_open=True) == "pattern"
    assert wanted(replace(LAMP, pattern="steady"), both, is_open=True) == "steady"


def test_a_lamp_blinks_once_a_second_and_a_buzzer_calls_now_and_then() -> None:
    assert [is_on("lamp", "pattern", t / 4) for t in range(8)] == [True, True, False, False] * 2
    assert [t / 4 for t in range(80) if is_on("buzzer", "pattern", t / 4)] == [0, 0.25, 10, 10.25]
    assert is_on("buzzer", "steady", 3.0)
    assert not is_on("lamp", "off", 0.0)


# ---- the line ----


class Rig:
    """A signal on an emulated line, stepped by hand."""

    def __init__(self, signal: Signal = LAMP) -> None:
        self.lines, self.clock = EmulatedLines(), HandClock(BEGUN_US)
        self.alarms: Sequence[Alarm] = [alarm("normal")]
        self.output = SignalOutput(
            signal, self.lines, lambda: self.alarms, lambda: True, self.clock
        )

    def run(self, seconds: float) -> list[int]:
        """The level at each quarter of a second."""
        levels = []
        for _ in range(round(seconds * 4)):
            self.output.step()
            levels.append(self.lines.outputs[25].level if 25 in self.lines.outputs else -1)
            self.clock.wait(0.25, threading.Event())
        return levels


def test_the_line_blinks_then_is_on_then_off() -> None:
    rig = Rig()
    assert rig.run(2) == [0] * 8
    rig.alarms = [alarm("unacknowledged")]
    assert rig.run(3) == [1, 1, 0, 0] * 3
    rig.alarms = [alarm("acknowledged")]
    assert rig.run(2) == [1] * 8
    rig.alarms = [alarm("normal")]
    assert rig.run(1) == [0] * 4


def test_a_line_that_is_active_low_is_the_other_way_round() -> None:
    rig = Rig(replace(LAMP, active_high=False))
    assert rig.run(1) == [1] * 4
    rig.alarms = [alarm("acknowledged")]
    assert rig.run(1) == [0] * 4
    rig.output.stop()
    assert rig.lines.outputs[25].level == 1


def test_a_stop_switches_off_and_gives_back() -> None:
    rig = Rig()
    rig.alarms = [alarm("acknowledged")]
    rig.run(1)
    rig.output.stop()
    rig.output.stop()
    assert rig.lines.outputs[25].closed
    assert rig.lines.outputs[25].level == 0


def test_a_line_that_another_program_has_is_told_and_tried_again() -> None:
    rig = Rig()
    rig.lines.refuse.add(25)
    rig.alarms = [alarm("acknowledged")]
    rig.run(1)
    assert rig.output.problem.startswith(
        "the lamp on /dev/gpiochip0 line 25 cannot be switched (Device or resource busy)"
    )
    rig.lines.refuse.clear()
    assert rig.run(RETRY_EVERY_S - 2) == [-1] * round(4 * (RETRY_EVERY_S - 2))
    assert rig.run(3)[-1] == 1
    assert rig.output.problem == ""


def test_a_line_that_is_lost_is_told_and_had_again() -> None:
    rig = Rig()
    rig.alarms = [alarm("unacknowledged")]
    rig.run(1)
    lost = rig.lines.outputs[25]
    lost.missing = True
    rig.run(2)
    assert "No such device" in rig.output.problem
    assert lost.closed
    rig.run(RETRY_EVERY_S)
    assert rig.output.problem == ""
    assert rig.lines.outputs[25] is not lost


def test_alarms_that_cannot_be_asked_for_stop_nothing() -> None:
    rig = Rig()
    rig.run(1)

    def fails() -> Sequence[Alarm]:
        raise RuntimeError("a fault in the alarms")

    rig.output._alarms = fails
    rig.run(1)
    assert "a fault in the alarms" in rig.output.problem


def test_gpiod_is_asked_for_an_output_that_is_off() -> None:
    asked: dict[str, Any] = {}
    told: list[object] = []
    request = SimpleNamespace(
        set_value=lambda number, value: told.append((number, value)),
        release=lambda: told.append("released"),
    )

    def request_lines(path: str, **given: Any) -> Any:
        asked.update(path=path, **given)
        return request

    module = SimpleNamespace(
        line=gpiod.line, LineSettings=gpiod.LineSettings, request_lines=request_lines
    )
    lines = GpiodLines("/dev/gpiochip0", lambda: 0, lambda: 0, gpiod=module)
    line = lines.output(25, active_high=False)
    settings = asked["config"][25]
    assert (asked["path"], asked["consumer"]) == ("/dev/gpiochip0", "dripleg")
    assert settings.direction == gpiod.line.Direction.OUTPUT
    assert settings.output_value == gpiod.line.Value.INACTIVE
    assert settings.active_low
    line.set(True)
    line.close()
    line.close()
    value = gpiod.line.Value
    assert told == [(25, value.ACTIVE), (25, value.INACTIVE), "released"]
    with pytest.raises(OSError, match="given back"):
        line.set(True)


# ---- the site file ----


def of(text: str) -> Signal | None:
    return site(f"{SITE}\n{text}").signal


def test_a_site_without_the_table_has_no_signal() -> None:
    assert of("") is None


def test_a_line_alone_is_enough() -> None:
    assert of("[signal]\nline = 25") == LAMP


def test_all_can_be_said() -> None:
    text = """[signal]
kind = "buzzer"
chip = "/dev/gpiochip4"
line = 5
active = "low"
priorities = ["high", "low"]
pattern = "steady"
"""
    said = Signal("buzzer", "/dev/gpiochip4", 5, False, ("low", "high"), "steady")
    assert of(text) == said


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ('kind = "lamp"', "[signal] line: it must be said"),
        ("line = 17", 'the sensor "motor" has this line'),
        ("line = 999", "whole number from 0 to 511"),
        ('line = 25\nkind = "horn"', "is no kind of signal"),
        ('line = 25\nactive = "on"', "is no level"),
        ("line = 25\npriorities = []", "must be a list"),
        ('line = 25\npriorities = ["urgent"]', "is no priority"),
        ('line = 25\npattern = "disco"', "is no pattern"),
        ("line = 25\ncolour = 1", "there is no such key"),
        ('line = 25\nchip = "gpio"', "write the chip's device"),
    ],
)
def test_what_cannot_be_is_told(text: str, words: str) -> None:
    with pytest.raises(SiteError) as told:
        of(f"[signal]\n{text}")
    assert words in str(told.value)
    assert len(told.value.problems) == 1


# ---- the daemon, and `dripleg check` ----


def test_the_daemon_lights_it_for_a_drain_that_is_due_and_says_when_it_cannot(
    tmp_path: Path,
) -> None:
    text = SITE.replace('drain_at = "600 ml"', 'drain_at = "600 ml", holds_at_start = "900 ml"')
    shop = site(f"{text}\n[signal]\nline = 25\n")
    clock = HandClock(BEGUN_US)
    with EmulatedHardware() as hardware:
        setters = hardware.fit(shop.sensors)
        setters["tank-gauge.pressure"](7e5, BEGUN_US)
        setting = compose.Setting(shop, tmp_path / "shop.db", hardware, clock, port=0)
        with compose.running(setting, threading.Event()) as parts:
            for number in range(14):
                clock.wall_us = BEGUN_US + number * 10 * SECOND_US
                parts.shell.tick(clock.wall_us)
            states = {each.id: each.state for each in parts.shell.alarms()}
            assert states["tank-drain-due"] == "unacknowledged"
            lines = hardware.lines("/dev/gpiochip0")
            wait_for(lambda: 1 in lines.outputs[25].levels)
            parts.shell.record(Acknowledge("tank-drain-due", "AM"))
            assert parts.shell.signal_problem() == ""
            lines.outputs[25].missing = True
            wait_for(lambda: bool(parts.shell.signal_problem()))
            problems = parts.shell.health().problems
            assert any(each.startswith("the lamp on /dev/gpiochip0 line 25") for each in problems)
        assert lines.outputs[25].closed


def wait_for(so: Any) -> None:
    """Look again and again: the signal's thread goes by the real clock."""
    clock, never = SystemClock(), threading.Event()
    end_s = clock.monotonic() + 20.0
    while not so():
        assert clock.monotonic() < end_s, "it never came to it"
        clock.wait(0.02, never)


def test_check_tells_of_it_and_switches_it_on_for_a_second(tmp_path: Path) -> None:
    shop = site(f"{SITE}\n[signal]\nline = 25\n[api]\nport = 1\n")
    said: list[str] = []
    clock = HandClock(BEGUN_US)
    options = argparse.Namespace(no_sensors=False, watch=False, store=None)
    for device in ("i2c-1", "gpiochip0"):
        (tmp_path / "dev").mkdir(exist_ok=True)
        (tmp_path / "dev" / device).touch()
    with EmulatedHardware() as hardware:
        hardware.fit(shop.sensors)
        check(shop, options, hardware, clock, threading.Event(), said.append, tmp_path)
        output = hardware.lines("/dev/gpiochip0").outputs[25]
        assert output.levels == [0, 1, 0]
        assert output.closed
        assert "line 25 was switched on for 1 s: did the lamp answer?" in said[0]
        hardware.lines("/dev/gpiochip0").refuse.add(25)
        assert check(shop, options, hardware, clock, threading.Event(), said.append, tmp_path) == 1
        assert "cannot be switched: Device or resource busy" in said[1]


def test_the_explanation_says_what_it_shows() -> None:
    text = " ".join(explain(site(f"{SITE}\n[signal]\nline = 25\n")).split())
    assert "lamp /dev/gpiochip0 line 25, on while high; blinks for alarms of priority" in text
    text = " ".join(explain(site(f'{SITE}\n[signal]\nline = 25\nkind = "buzzer"\n')).split())
    assert "calls every 10 s" in text
    assert "in working hours only" in text
