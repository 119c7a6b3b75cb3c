"""A refrigerated dryer from a site file and recorded readings to the files that a replay writes."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path

import pytest

from daemon.__main__ import main
from daemon.clock import HOUR_US
from daemon.site.types import Site
from sensors.reading import Reading
from tests.daemon.records import rows, write_readings
from tests.daemon.shops import BEGUN_US, SITE, a_tick, site, working

# Birch Works with a dryer between its bowl and its regulator; its plate and its drain. Invented.
ON = """
[[sensor]]
id = "dryer-on"
driver = "contact"
line = 27

[[station]]
id = "intake"
"""
DRYER = """
[[station]]
id = "dryer"
kind = "refrigerated"
after = "bowl"
rated_flow = "20 m3/h"
powered = "dryer-on.contact"
trap = { drain = "timer", blows_every = "10 min", capacity = "80 ml" }

[[station]]
id = "booth-regulator"
kind = "regulator"
after = "dryer"
"""
TEXT = SITE.replace('[[station]]\nid = "intake"\n', ON.lstrip(), 1).replace(
    '[[station]]\nid = "booth-regulator"\nkind = "regulator"\nafter = "bowl"\n', DRYER.lstrip()
)


def readings(shop: Site) -> Iterator[Reading]:
    """Four hours of work; the dryer is switched on after one, and off after three."""
    for now_us, told in working(shop, 4 * 360 + 1):
        yield from told
        on = HOUR_US <= now_us - BEGUN_US < 3 * HOUR_US
        yield from a_tick(shop, now_us, {"dryer-on.contact": float(on)})


@pytest.fixture(scope="module")
def out(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("dryer")
    shop, site_file, file = site(TEXT), folder / "birch-works.toml", folder / "readings.csv"
    site_file.write_text(TEXT, encoding="utf-8")
    write_readings(file, shop, readings(shop))
    assert main(["replay", str(site_file), str(file), "--out", str(folder / "out")]) == 0
    return folder / "out"


def test_the_outlet_is_as_dry_as_the_dryer_only_while_that_runs(out: Path) -> None:
    """+3 degC at 6 to 8 bar gauge is a frost point of -4.0 to -6.8 degC at 3 bar gauge (CoolProp
    8); the dryer's own 2 K, and a little that it does not keep and that dries behind it."""
    by_time = {
        row["time"][11:16]: float(row["pressure_dew_point_p50_c"])
        for row in rows(out / "outlets.csv")
    }
    assert -7.5 < by_time["09:00"] < -3.3
    # switched on at eight and off at ten, so that it has dried nothing by then
    assert all(by_time[time] > 4.0 for time in ("08:00", "10:00", "11:00"))


def test_the_summary_books_what_the_drain_passed(out: Path) -> None:
    """One and three quarter hours of some 75 L/min, saturated at about 18 degC, to 3 degC at 7 bar
    gauge: 1.04 g a kilogram of dry air (CoolProp 8: 1.65 less 0.61), by hand 9.7 g."""
    summary = json.loads((out / "summary.json").read_text(encoding="utf-8"))
    shed, held = summary["shed_ml"]["dryer"]["p50"], summary["held_ml"]["dryer"]["p50"]
    assert 6.0 < shed < 12.0
    assert held < 0.3 * shed
    assert summary["passed_by_drains_ml"]["p50"] == pytest.approx(shed - held, rel=0.2)
    assert summary["balance_residual"] < 1e-9


def test_the_alarms_tell_when_the_dryer_was_off(out: Path) -> None:
    told = [
        (row["time"], row["to"])
        for row in rows(out / "transitions.csv")
        if row["alarm"] == "dryer-dryer-overloaded"
    ]
    assert [after for _, after in told] == [
        "suppressed by design",
        "normal",
        "suppressed by design",
    ]
    assert told[1][0] == "2026-03-02T08:00:00Z"
    assert told[2][0] == "2026-03-02T10:00:00Z"
