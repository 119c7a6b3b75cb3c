"""Condensate against tables, all the way from a recorded file to `summary.json`.

Nothing is uncertain in the shop of these checks, so that every member must give the table's figure.
"""

from __future__ import annotations

import json
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from daemon.advance import Core
from daemon.clock import HOUR_US
from daemon.recorded import read_readings
from daemon.replay import replay, summarise
from daemon.site.types import Site
from sensors.reading import Reading
from tests.daemon.records import exact, exact_text, write_readings
from tests.daemon.shops import BEGUN_US, a_tick
from tests.reference.test_air_condensate import CELLS
from tests.tree import ROOT

TOLERANCE_G_M3 = 0.01  # the formulas' stated error, 0.0018, and the readings' own steps


def running(shop: Site, celsius: float, humidity: float, hours: int) -> Iterator[Reading]:
    """A compressor that runs all the time."""
    period_us = shop.sample_every_us
    for now_us in range(BEGUN_US, BEGUN_US + hours * HOUR_US + 1, period_us):
        yield from a_tick(
            shop,
            now_us,
            {
                "intake-air.temperature": celsius + 273.15,
                "intake-air.relative_humidity": humidity,
                "intake-air.pressure": 101_325.0,
                "motor.contact": 1.0,
            },
        )


def grams_per_m3(summary: Any, percentile: str) -> float:
    """What the tank shed per reference m3 drawn in."""
    shed_ml = float(summary["shed_ml"]["tank"][percentile])
    return shed_ml / (float(summary["drawn_in_reference_l"][percentile]) / 1000.0)


def said(gauge_bar: float, cooled_to: float) -> dict[str, str]:
    return {
        "sample_every": "30 s",
        "pressure": f"{gauge_bar} bar",
        "cooled_to": f"{cooled_to} degC",
        "delivery": "1500 L/min",
    }


@pytest.mark.parametrize(("intake_c", "rh", "cooled_to_c", "gauge_bar", "expected_g"), CELLS)
def test_a_replay_sheds_what_the_table_says(
    tmp_path: Path,
    intake_c: float,
    rh: float,
    cooled_to_c: float,
    gauge_bar: float,
    expected_g: float,
) -> None:
    shop = exact(**said(gauge_bar, cooled_to_c))
    file = tmp_path / "readings.csv"
    write_readings(file, shop, running(shop, intake_c, rh, 1))
    core = Core(shop)
    result = replay(core, read_readings(shop, file).readings, [])
    summary = summarise(core, result, [])
    for percentile in ("p05", "p50", "p95"):
        found = grams_per_m3(summary, percentile)
        assert found == pytest.approx(expected_g, abs=TOLERANCE_G_M3)


def test_the_command_sheds_what_the_table_says(tmp_path: Path) -> None:
    """The whole way once: a site file, a recorded file, the command, the summary."""
    intake_c, rh, cooled_to_c, gauge_bar, expected_g = CELLS[4]
    names = said(gauge_bar, cooled_to_c)
    shop, site_file, file = exact(**names), tmp_path / "elm-row.toml", tmp_path / "readings.csv"
    site_file.write_text(exact_text(**names))
    write_readings(file, shop, running(shop, intake_c, rh, 1))
    out = tmp_path / "out"
    command = [sys.executable, "-m", "daemon", "replay", str(site_file), str(file)]
    command += ["--out", str(out)]
    done = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    summary = json.loads((out / "summary.json").read_text())
    assert grams_per_m3(summary, "p50") == pytest.approx(expected_g, abs=TOLERANCE_G_M3)


@pytest.mark.parametrize(("cooled_to", "shed_kg"), [("20", 67.3), ("3", 75.9)])
def test_eight_hours_at_200_litres_a_second_draw_in_the_handbook_s_80_litres(
    cooled_to: str, shed_kg: float
) -> None:
    """A compressor maker's handbook: 200 L/s of air at 20 degC and 80 % bring 80 litres of water
    in 8 hours. What is shed at 7 bar gauge is computed with CoolProp. Both within 1 %."""
    names = {
        "sample_every": "60 s",
        "delivery": "200 L/s",
        "pressure": "7 bar",
        "cooled_to": f"{cooled_to} degC",
        "volume": "1000 L",
        "capacity": "200 L",
    }
    shop = exact(**names)
    core = Core(shop)
    summary = summarise(core, replay(core, list(running(shop, 20.0, 0.8, 8)), []), [])
    assert summary["water_in_ml"]["p50"] / 1000.0 == pytest.approx(80.0, rel=0.01)
    assert summary["shed_ml"]["tank"]["p50"] / 1000.0 == pytest.approx(shed_kg, rel=0.01)
    assert summary["to"] == "2026-03-02T15:00:00Z"
