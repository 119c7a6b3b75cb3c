"""`dripleg replay`: where ticks stand, what is written, and what it says of bad input."""

from __future__ import annotations

import json
import random
import subprocess
import sys
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path

import pytest

from daemon.__main__ import main
from daemon.advance import Core
from daemon.clock import HOUR_US, MINUTE_US, SECOND_US, format_rfc3339, parse_rfc3339
from daemon.errors import ReplayError
from daemon.journal import Drain, Entry
from daemon.recorded import read_readings
from daemon.replay import replay, write
from daemon.site.types import Site
from sensors.reading import Reading, reading
from tests.daemon.records import exact, exact_text, rows, write_readings
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, a_tick, flat, site, working
from tests.tree import ROOT

ELM = exact()
FILES = ["flow.csv", "summary.json", "transitions.csv", "traps.csv"]


def us(time: str) -> int:
    return parse_rfc3339(f"2026-03-02T{time}Z")


def weather(shop: Site, from_us: int, to_us: int) -> Iterator[Reading]:
    """The intake's air, always the same, at every tick."""
    for now_us in range(from_us, to_us + 1, shop.sample_every_us):
        yield from a_tick(
            shop,
            now_us,
            {
                "intake-air.temperature": 293.15,
                "intake-air.relative_humidity": 0.5,
                "intake-air.pressure": 101_325.0,
            },
        )


def edges(shop: Site, *told: tuple[str, int]) -> list[Reading]:
    return [reading(shop.channels["motor.contact"], level, us(time)) for time, level in told]


def in_order(*parts: Sequence[Reading]) -> list[Reading]:
    return sorted((each for part in parts for each in part), key=lambda each: each.time_us)


def drains(*told: tuple[str, Drain]) -> list[Entry]:
    return [Entry(n, us(time), us(time), body) for n, (time, body) in enumerate(told, 1)]


def written(
    folder: Path, shop: Site, readings: Sequence[Reading], entries: Sequence[Entry] = ()
) -> Path:
    core = Core(shop)
    write(core, replay(core, readings, entries), entries, folder)
    return folder


def ml(row: Mapping[str, str]) -> float:
    return float(row["p50_ml"])


# ---- ticks ----


def test_ticks_stand_at_multiples_of_the_period_from_the_first_reading() -> None:
    """And the last one is the first that is not before the last reading."""
    told = in_order(
        list(weather(ELM, us("07:00:03"), us("07:05:03"))), edges(ELM, ("07:05:11.5", 1))
    )
    result = replay(Core(ELM), told, [])
    assert format_rfc3339(result.begun_us) == "2026-03-02T07:00:03Z"
    assert format_rfc3339(result.state.time_us) == "2026-03-02T07:05:13Z"
    assert result.ticks == 32


def test_a_drain_after_the_last_reading_is_still_taken_in(tmp_path: Path) -> None:
    shop = exact(holds_at_start="200 ml")
    told = list(weather(shop, us("07:00:00"), us("07:05:00")))
    out = written(tmp_path, shop, told, drains(("07:05:04", Drain("tank"))))
    found = rows(out / "traps.csv")
    assert [row["time"] for row in found] == [
        "2026-03-02T07:00:00Z",
        "2026-03-02T07:05:04Z",
        "2026-03-02T07:05:10Z",
    ]
    assert ml(found[1]) > 200.0
    assert ml(found[2]) < 1.0


def test_rows_of_one_time_may_come_in_any_order(tmp_path: Path) -> None:
    shop = site()
    told = flat(list(working(shop, 120)))
    shuffled = list(told)
    random.Random(4).shuffle(shuffled)
    by_channel = sorted(told, key=lambda each: (each.channel, each.time_us))
    shuffled.sort(key=lambda each: each.time_us)
    for name, rows_of_it in (("a", told), ("b", shuffled), ("c", by_channel)):
        write_readings(tmp_path / f"{name}.csv", shop, rows_of_it)
        written(tmp_path / name, shop, read_readings(shop, tmp_path / f"{name}.csv").readings)
    for file in FILES:
        texts = {(tmp_path / name / file).read_bytes() for name in "abc"}
        assert len(texts) == 1, file


def test_a_recorded_file_gives_the_readings_back_to_the_bit(tmp_path: Path) -> None:
    shop = site()
    told = flat(list(working(shop, 200)))
    write_readings(tmp_path / "a.csv", shop, told)
    assert read_readings(shop, tmp_path / "a.csv").readings == told


# ---- traps.csv ----


def test_traps_stand_at_full_hours_also_where_no_tick_does(tmp_path: Path) -> None:
    shop = exact(holds_at_start="40 ml")
    told = in_order(
        list(weather(shop, us("07:00:03"), us("09:10:03"))), edges(shop, ("07:00:03", 1))
    )
    found = rows(written(tmp_path, shop, told) / "traps.csv")
    assert [row["time"] for row in found] == [
        "2026-03-02T08:00:00Z",
        "2026-03-02T09:00:00Z",
        "2026-03-02T09:10:03Z",
    ]
    assert {row["trap"] for row in found} == {"tank"}
    # 150 L/min without a break: every second brings the same
    first, second, last = (ml(row) - 40.0 for row in found)
    assert first == pytest.approx(second * 3597 / 7197, rel=1e-4)
    assert last == pytest.approx(second * 7800 / 7197, rel=1e-4)
    assert first > 50.0


def test_the_state_at_the_first_tick_is_written_when_it_is_a_full_hour(tmp_path: Path) -> None:
    shop = exact(holds_at_start="40 ml")
    found = rows(
        written(tmp_path, shop, list(weather(shop, us("07:00:00"), us("07:00:00")))) / "traps.csv"
    )
    assert [(row["time"], ml(row)) for row in found] == [("2026-03-02T07:00:00Z", 40.0)]


def test_a_drain_has_its_own_row_with_what_was_there_before(tmp_path: Path) -> None:
    """Two traps' worth: the drained one has no second row at that time, the end has its row."""
    told = in_order(list(weather(ELM, us("07:00:00"), us("08:30:00"))), edges(ELM, ("07:00:00", 1)))
    entries = drains(
        ("07:33:07.25", Drain("tank", volume_kg=0.03)), ("08:30:00", Drain("tank", "empty", 0.0))
    )
    found = rows(written(tmp_path, ELM, told, entries) / "traps.csv")
    assert [row["time"] for row in found] == [
        "2026-03-02T07:00:00Z",
        "2026-03-02T07:33:07Z",
        "2026-03-02T08:00:00Z",
        "2026-03-02T08:30:00Z",
    ]
    begun, drained, hour, end = (ml(row) for row in found)
    per_s = drained / 1987.25
    assert begun == 0.0
    assert hour == pytest.approx(per_s * (3600 - 1987.25), rel=1e-4)
    assert end == pytest.approx(per_s * (5400 - 1987.25), rel=1e-4)


def test_readings_of_a_drain_s_own_instant_count_before_it(tmp_path: Path) -> None:
    """The contact opens at the instant of the drain: what ran until then is in its row."""
    told = in_order(
        list(weather(ELM, us("07:00:00"), us("07:40:00"))),
        edges(ELM, ("07:00:00", 1), ("07:20:05", 0)),
    )
    entries = drains(("07:20:05", Drain("tank")))
    _, drained, end = rows(written(tmp_path, ELM, told, entries) / "traps.csv")
    assert drained["time"] == "2026-03-02T07:20:05Z"
    assert ml(drained) > 20.0
    assert ml(end) == 0.0


def test_the_end_has_no_row_for_a_trap_that_was_emptied_just_then(tmp_path: Path) -> None:
    shop = site()
    told = flat(list(working(shop, 31)))
    end_us = told[-1].time_us
    entry = Entry(1, end_us, end_us, Drain("tank"))
    found = rows(written(tmp_path, shop, told, [entry]) / "traps.csv")
    at_end = [row["trap"] for row in found if row["time"] == format_rfc3339(end_us)]
    assert sorted(at_end) == ["bowl", "riser", "tank"]


def test_rows_are_in_order_of_time_with_the_traps_in_line_order(tmp_path: Path) -> None:
    shop = site()
    told = flat(list(working(shop, 800)))
    entries = drains(("08:00:00", Drain("bowl")), ("07:33:00", Drain("riser")))
    entries.sort(key=lambda entry: entry.at_us)
    found = rows(written(tmp_path, shop, told, entries) / "traps.csv")
    times = [row["time"] for row in found]
    assert times == sorted(times)
    hour = [row["trap"] for row in found if row["time"] == "2026-03-02T09:00:00Z"]
    assert hour == ["tank", "riser", "bowl"]
    assert all(time.endswith("Z") and len(time) == 20 for time in times)
    for row in found:
        low, middle, high = (float(row[name]) for name in ("p05_ml", "p50_ml", "p95_ml"))
        assert 0.0 <= low <= middle <= high
        assert 0.0 <= float(row["probability_due"]) <= 1.0


# ---- flow.csv ----


def test_contacts_are_integrated_from_their_own_times_over_full_and_part_hours(
    tmp_path: Path,
) -> None:
    told = in_order(
        list(weather(ELM, us("07:00:03"), us("09:10:03"))),
        edges(ELM, ("07:00:03", 0), ("07:40:01.5", 1), ("08:15:00", 0), ("09:09:33", 1)),
    )
    found = rows(written(tmp_path, ELM, told) / "flow.csv")
    assert [row["time"] for row in found] == [
        "2026-03-02T07:00:03Z",
        "2026-03-02T08:00:00Z",
        "2026-03-02T09:00:00Z",
    ]
    on_s = (1198.5, 900.0, 30.0)
    for row, on, length in zip(found, on_s, (3597.0, 3600.0, 603.0), strict=True):
        assert float(row["duty"]) == pytest.approx(on / length, abs=6e-6)
        # moist air of 20 degC: its dry part alone has (101325 - 0.5 x 2339 x 1.004) Pa, and a
        # reference litre 100000 Pa (saturation over water at 20 degC: 2339 Pa, IAPWS-95)
        dry = (101_325.0 - 0.5 * 2339.3 * 1.004) / 100_000.0
        for percentile in ("p05", "p50", "p95"):
            drawn = float(row[f"drawn_in_reference_l_{percentile}"])
            used = float(row[f"used_reference_l_{percentile}"])
            assert drawn == pytest.approx(on * 2.5 * dry, rel=2e-4, abs=0.002)
            assert used == pytest.approx(drawn, abs=0.002)  # the tank's pressure is stated


def test_a_record_that_ends_on_the_hour_has_no_empty_part_hour(tmp_path: Path) -> None:
    told = list(weather(ELM, us("07:00:00"), us("09:00:00")))
    found = rows(written(tmp_path, ELM, told) / "flow.csv")
    assert [row["time"] for row in found] == ["2026-03-02T07:00:00Z", "2026-03-02T08:00:00Z"]


def test_a_drain_on_the_hour_does_not_divide_the_flow(tmp_path: Path) -> None:
    told = in_order(list(weather(ELM, us("07:00:00"), us("08:30:00"))), edges(ELM, ("07:00:00", 1)))
    found = rows(written(tmp_path, ELM, told, drains(("08:00:00", Drain("tank")))) / "flow.csv")
    assert [(row["time"], float(row["duty"])) for row in found] == [
        ("2026-03-02T07:00:00Z", 1.0),
        ("2026-03-02T08:00:00Z", 1.0),
    ]


# ---- transitions.csv and summary.json ----


def test_alarms_run_in_reading_time(tmp_path: Path) -> None:
    """Raised two minutes after the level was reached, returned by the drain."""
    shop = exact(holds_at_start="59.9 ml", drain_at="60 ml")
    told = in_order(
        list(weather(shop, us("07:00:00"), us("07:30:00"))), edges(shop, ("07:00:00", 1))
    )
    out = written(tmp_path, shop, told, drains(("07:20:00", Drain("tank", by="AM"))))
    found = rows(out / "transitions.csv")
    assert [(row["alarm"], row["from"], row["to"], row["priority"]) for row in found] == [
        ("tank-drain-due", "normal", "unacknowledged", "medium"),
        ("tank-drain-due", "unacknowledged", "acknowledged", "medium"),
        ("tank-drain-due", "acknowledged", "normal", "medium"),
    ]
    times = [row["time"] for row in found]
    assert times == ["2026-03-02T07:02:10Z", "2026-03-02T07:20:00Z", "2026-03-02T07:20:00Z"]
    assert [row["id"] for row in found] == [
        "tank-drain-due/2026-03-02T07:02:10Z/unacknowledged",
        "tank-drain-due/2026-03-02T07:20:00Z/acknowledged",
        "tank-drain-due/2026-03-02T07:20:00Z/normal",
    ]
    assert "its limit is 60 ml" in found[0]["text"]


def test_the_summary_adds_up(tmp_path: Path) -> None:
    told = in_order(
        list(weather(ELM, us("07:00:03"), us("09:10:03"))),
        edges(ELM, ("07:00:03", 1), ("08:40:03", 0)),
    )
    entries = drains(
        ("07:30:00", Drain("tank", volume_kg=0.03)),
        ("08:00:00", Drain("tank")),
        ("08:00:01", Drain("tank", "empty", 0.0)),
    )
    out = written(tmp_path, ELM, told, entries)
    summary = json.loads((out / "summary.json").read_text())
    assert (summary["from"], summary["to"]) == ("2026-03-02T07:00:03Z", "2026-03-02T09:10:03Z")
    assert summary["ticks"] == 781
    flow = rows(out / "flow.csv")
    for name in ("drawn_in_reference_l", "used_reference_l"):
        total = sum(float(row[f"{name}_p50"]) for row in flow)
        assert summary[name]["p50"] == pytest.approx(total, abs=0.01)
    assert summary["duty"]["p50"] == pytest.approx(6000.0 / 7800.0, abs=1e-5)
    shed, drained = summary["shed_ml"]["tank"]["p50"], summary["drained_ml"]["p50"]
    held = ml(rows(out / "traps.csv")[-1])
    assert summary["held_ml"]["tank"]["p50"] == held
    corrected = summary["corrected_by_learning_ml"]["p50"]
    assert shed + corrected == pytest.approx(drained + held, rel=0.005)
    water_in = summary["water_in_ml"]["p50"]
    gone = shed + summary["vapor_out_ml"]["p50"] + summary["liquid_out_ml"]["p50"]
    assert water_in == pytest.approx(gone, rel=1e-6, abs=0.01)
    assert summary["balance_residual"] <= 1e-9
    told_of_tank = summary["measured_drains"]["tank"]
    assert told_of_tank == {"drains": 3, "measured": 2, "volume_ml": 30.0}


def test_nothing_to_replay_is_refused() -> None:
    with pytest.raises(ReplayError, match="nothing to replay"):
        replay(Core(ELM), [], [])


# ---- the command ----


class Bench:
    """A folder with a site file and recorded files, and the command run on them."""

    def __init__(self, folder: Path) -> None:
        self.site, self.readings, self.drains, self.out = (
            folder / name for name in ("elm-row.toml", "readings.csv", "drains.csv", "out")
        )
        self.site.write_text(exact_text())
        self.tell(weather(ELM, us("07:00:00"), us("07:10:00")))

    def tell(self, told: Iterator[Reading]) -> None:
        write_readings(self.readings, ELM, told)

    def run(self, *more: str) -> int:
        return main(["replay", str(self.site), str(self.readings), "--out", str(self.out), *more])


@pytest.fixture
def bench(tmp_path: Path) -> Bench:
    return Bench(tmp_path)


def test_the_command_makes_the_folder_and_says_what_it_wrote(
    bench: Bench, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.out = bench.out / "new" / "folder"
    bench.drains.write_text("time,trap,volume,unit\n2026-03-02T07:05:00Z,tank,20,ml\n")
    assert bench.run("--drains", str(bench.drains)) == 0
    said = capsys.readouterr()
    assert said.err == ""
    assert "2026-03-02T07:00:00Z to 2026-03-02T07:10:00Z, 61 ticks" in said.out
    assert str(bench.out) in said.out
    assert set(FILES) <= {path.name for path in bench.out.iterdir()}
    assert (bench.out / "traps.csv").read_text().splitlines()[0] == (
        "time,trap,p05_ml,p50_ml,p95_ml,probability_due"
    )
    assert (bench.out / "flow.csv").read_text().splitlines()[0] == (
        "time,duty,drawn_in_reference_l_p05,drawn_in_reference_l_p50,drawn_in_reference_l_p95,"
        "used_reference_l_p05,used_reference_l_p50,used_reference_l_p95"
    )
    assert (bench.out / "transitions.csv").read_text().splitlines()[0] == (
        "time,id,alarm,from,to,priority,text"
    )


def test_files_of_an_earlier_run_are_overwritten_and_others_stay(bench: Bench) -> None:
    assert bench.run() == 0
    first = (bench.out / "traps.csv").read_bytes()
    (bench.out / "traps.csv").write_text("old " * 1000)
    (bench.out / "notes.txt").write_text("mine")
    assert bench.run() == 0
    assert (bench.out / "traps.csv").read_bytes() == first
    assert (bench.out / "notes.txt").read_text() == "mine"


def test_a_bad_row_stops_the_command_before_anything_is_written(
    bench: Bench, capsys: pytest.CaptureFixture[str]
) -> None:
    lines = bench.readings.read_text().splitlines()
    lines[40] = lines[40].replace("degC", "C").replace("%", "percent").replace("bara", "bar abs")
    bench.readings.write_text("\n".join(lines))
    assert bench.run() == 2
    said = capsys.readouterr()
    assert said.out == ""
    assert said.err.startswith(f"dripleg: {bench.readings}, line 41, column unit: ")
    assert not bench.out.exists()


def test_bad_rows_are_counted_and_listed_when_they_are_left_out(
    bench: Bench, capsys: pytest.CaptureFixture[str]
) -> None:
    with bench.readings.open("a") as file:
        file.write("2026-03-02T07:09:00Z,intake-air.temperature,20,degC\n,,,\n")
    bench.drains.write_text("time,trap,volume,unit\n2026-03-02T07:05:00Z,tnak,20,ml\n")
    assert bench.run("--skip-bad", "--drains", str(bench.drains)) == 0
    said = capsys.readouterr().out
    assert "3 bad rows left out:" in said
    last = len(bench.readings.read_text().splitlines())
    assert f"{bench.readings}, line {last - 1}, column time: " in said
    assert f"{bench.readings}, line {last}, column time: " in said
    assert f"{bench.drains}, line 2, column trap: " in said
    assert len(rows(bench.out / "traps.csv")) == 2


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (["--members", "1"], "--members 1: give a whole number from"),
        (["--members", "-4"], "--members -4"),
        (["--seed", "-1"], "--seed -1: give a whole number, 0 or more"),
        (["--drains", "no.csv"], "no.csv: there is no such file"),
    ],
)
def test_an_option_that_cannot_be_is_refused_in_words(
    bench: Bench, capsys: pytest.CaptureFixture[str], options: list[str], words: str
) -> None:
    assert bench.run(*options) == 2
    assert words in capsys.readouterr().err
    assert not bench.out.exists()


def test_a_file_in_the_folder_s_place_is_told(
    bench: Bench, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.out.write_text("a file")
    assert bench.run() == 2
    assert f"{bench.out}: cannot be written" in capsys.readouterr().err


def test_a_site_file_with_a_mistake_replays_nothing(
    bench: Bench, capsys: pytest.CaptureFixture[str]
) -> None:
    bench.site.write_text(exact_text(pressure="8 furlongs"))
    assert bench.run() == 2
    assert "1 problem" in capsys.readouterr().err


def test_members_and_seed_come_before_the_site_file_s(tmp_path: Path) -> None:
    bench = Bench(tmp_path)
    shop = site()
    bench.site.write_text(SITE)
    write_readings(bench.readings, shop, flat(list(working(shop, 100))))

    def texts(*options: str) -> tuple[str, int]:
        assert bench.run(*options) == 0
        summary = json.loads((bench.out / "summary.json").read_text())
        return (bench.out / "traps.csv").read_text(), summary["members"]

    one = texts("--members", "16", "--seed", "5")
    assert one[1] == 16
    assert texts("--members", "16", "--seed", "5") == one
    assert texts("--members", "16", "--seed", "6") != one
    assert texts()[1] == 32


@pytest.mark.parametrize("members", ["2", "3"])
@pytest.mark.parametrize("volume", ["20,ml", "1e9,gal", "1e-9,ml", "0,"])
def test_however_few_members_learn_from_whatever_was_measured(
    bench: Bench, members: str, volume: str
) -> None:
    """A volume that cannot be is flagged at most: the record goes on."""
    bench.drains.write_text(
        "time,trap,volume,unit\n"
        f"2026-03-02T07:05:00Z,tank,{volume}\n2026-03-02T07:06:00Z,tank,{volume}\n"
    )
    assert bench.run("--members", members, "--drains", str(bench.drains)) == 0
    for row in rows(bench.out / "traps.csv"):
        assert 0.0 <= ml(row) < 1e4
    assert json.loads((bench.out / "summary.json").read_text())["balance_residual"] <= 1e-9


def test_the_command_as_a_process_of_its_own(bench: Bench) -> None:
    """Exit codes as a shell sees them; nothing beside the three files is needed or left."""
    command = [sys.executable, "-m", "daemon", "replay", str(bench.site), str(bench.readings)]
    command += ["--out", str(bench.out)]
    bad = subprocess.run(
        [*command, "--members", "1"], cwd=ROOT, capture_output=True, text=True, check=False
    )
    assert (bad.returncode, bad.stdout) == (2, "")
    assert bad.stderr.count("\n") == 1
    good = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=False)
    assert (good.returncode, good.stderr) == (0, "")
    names = sorted(path.name for path in bench.site.parent.iterdir())
    assert names == ["elm-row.toml", "out", "readings.csv"]


def test_a_value_that_is_not_told_again_goes_stale_and_costs_certainty(tmp_path: Path) -> None:
    """Three periods after its last reading a channel says nothing any more."""
    shop = site()
    told = [
        each
        for now_us, readings in working(shop, 720)
        for each in readings
        if now_us < BEGUN_US + 20 * MINUTE_US or each.channel != "intake-air.relative_humidity"
    ]
    out = written(tmp_path, shop, told)
    (fault,) = rows(out / "transitions.csv")
    assert fault["alarm"] == "intake-air-sensor-fault"
    assert "intake-air.relative_humidity has said nothing for 3 periods" in fault["text"]
    at = parse_rfc3339(fault["time"]) - (BEGUN_US + 20 * MINUTE_US - PERIOD_US)
    assert 3 * PERIOD_US < at <= 6 * PERIOD_US
    assert HOUR_US > at > 30 * SECOND_US
