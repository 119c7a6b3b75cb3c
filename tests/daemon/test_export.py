"""`dripleg export`, and back through `dripleg replay`. All values are invented."""

from __future__ import annotations

import csv
import io
import json
import math
from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from daemon.__main__ import main
from daemon.alarms import Transition
from daemon.clock import DAY_US, HOUR_US, SECOND_US, format_rfc3339
from daemon.errors import ReplayError
from daemon.export_rows import ChannelText, _ml, by_time
from daemon.journal import Acknowledge, Drain
from daemon.moisture.description import WATER_KG_PER_M3
from daemon.progress import Progress
from daemon.recorded import read_readings
from daemon.recorded_faults import read_faults
from daemon.store.store import Store
from daemon.units import to_si
from sensors.reading import Channel, Reading, in_steps
from tests.daemon.sealed import seal_all
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, working
from tests.daemon.test_shell import SHOP, Rig

Row = list[str]


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A folder with the site file; its database is made beside it."""
    (tmp_path / "shop.toml").write_text(SITE, encoding="utf-8")
    return tmp_path


@pytest.fixture
def rig(folder: Path) -> Iterator[Rig]:
    made = Rig(folder / "birch-works.db", list(working(SHOP, 800)))
    yield made
    made.store.close()


def run(folder: Path, *arguments: str) -> int:
    site, out = str(folder / "shop.toml"), str(folder / "out")
    return main(["export", site, "--out", out, *arguments])


def read(folder: Path, name: str) -> list[Row]:
    """A file's rows, header first."""
    with (folder / "out" / name).open(encoding="utf-8", newline="") as file:
        return list(csv.reader(file))


def replayed(folder: Path, *arguments: str) -> dict[str, str]:
    """The files that a replay of the export writes."""
    out = folder / "out"
    code = main(
        [
            "replay",
            *(str(each) for each in (folder / "shop.toml", out / "readings.csv")),
            *("--drains", str(out / "drains.csv"), *arguments, "--out", str(folder / "results")),
        ]
    )
    assert code == 0
    return {each.name: each.read_text() for each in (folder / "results").iterdir()}


def fail_for_a_while(record: list[tuple[int, list[Reading]]], ticks: range) -> None:
    """The tank's gauge gives no answer, the humidity sensor one that cannot be."""
    for number in ticks:
        now_us, readings = record[number]
        for place, one in enumerate(readings):
            if one.channel == "tank-gauge.pressure":
                readings[place] = Reading(one.channel, math.nan, now_us, "no answer")


def test_an_export_replays_to_the_live_figures(folder: Path, rig: Rig) -> None:
    """Drains in between, one of them late; hours packed; the daemon goes on meanwhile."""
    for number, (now_us, _) in enumerate(rig.sampler.record.items()):
        if number in (300, 500):
            rig.clock.wall_us = now_us - SECOND_US
            late_us = 0 if number == 300 else 1000 * SECOND_US
            drain = Drain("tank", volume_kg=0.1234567, by="AM")
            rig.shell.record(drain, now_us - late_us - SECOND_US)
        if number == 600:
            rig.shell.record(Drain("riser", "empty", 0.0))
        rig.tick(now_us)
        seal_all(rig.store)
    live = {view.trap: (view.p05_kg, view.p50_kg, view.p95_kg) for view in rig.shell.traps()}
    assert run(folder) == 0
    files = replayed(folder)
    last = {row[1]: row[2:5] for row in csv.reader(files["traps.csv"].splitlines())}
    assert {name: last[name] for name in live} == {
        name: [f"{kg * 1e3:.3f}" for kg in values] for name, values in live.items()
    }
    told = {
        (row[2], row[3], row[4], row[0])
        for row in csv.reader(files["transitions.csv"].splitlines())
    }
    assert {(r[2], r[3], r[4], r[0]) for r in read(folder, "transitions.csv")} == told


def test_faults_replay_to_the_live_figures(folder: Path) -> None:
    record = list(working(SHOP, 500))
    fail_for_a_while(record, range(100, 180))
    rig = Rig(folder / "birch-works.db", record)
    for now_us, _ in record:
        rig.tick(now_us)
    live = {view.trap: (view.p05_kg, view.p50_kg, view.p95_kg) for view in rig.shell.traps()}
    rig.store.close()
    assert run(folder) == 0
    assert len(read(folder, "faults.csv")) == 1 + 80
    files = replayed(folder, "--faults", str(folder / "out" / "faults.csv"))
    last = {row[1]: row[2:5] for row in csv.reader(files["traps.csv"].splitlines())}
    assert {name: last[name] for name in live} == {
        name: [f"{kg * 1e3:.3f}" for kg in values] for name, values in live.items()
    }
    told = {row[2] for row in csv.reader(files["transitions.csv"].splitlines())}
    assert {row[2] for row in read(folder, "transitions.csv")} == told
    assert "tank-gauge-sensor-fault" in told


def a_store(folder: Path, ticks: int = 400, **entries: Drain) -> Store:
    store = Store.open(folder / "birch-works.db", SHOP.channels)
    for now_us, readings in working(SHOP, ticks):
        store.commit_tick(now_us, readings)
    return store


def test_values_come_back_to_the_bit_with_their_units(folder: Path) -> None:
    with a_store(folder) as store:
        seal_all(store)
        expected = [r for _, readings in store.ticks(0, 2**61) for r in readings]
    assert run(folder) == 0
    assert read_readings(SHOP, folder / "out" / "readings.csv").readings == expected
    rows = read(folder, "readings.csv")
    assert rows[0] == ["time", "channel", "value", "unit"]
    assert {row[1]: row[3] for row in rows[1:]} == {
        "intake-air.temperature": "degC",
        "intake-air.relative_humidity": "%",
        "intake-air.pressure": "bara",
        "tank-gauge.pressure": "barg",
        "pipe-end.temperature": "degC",
        "motor.contact": "",
    }
    assert rows[1] == [format_rfc3339(BEGUN_US), "intake-air.temperature", "20", "degC"]


@pytest.mark.parametrize(
    ("quantity", "step", "gauge"),
    [
        ("temperature", 0.01, False),
        ("temperature", 0.0625, False),
        ("relative_humidity", 0.0001, False),
        ("pressure", 1.0, False),
        ("pressure", 10.0, True),
        ("free_air_flow", 1e-6, False),
        ("dew_point", 0.1, False),
    ],
)
@given(count=st.integers(1, 2_000_000))
def test_a_value_in_steps_survives_being_written(
    quantity: str, step: float, gauge: bool, count: int
) -> None:
    channel = Channel("x.y", quantity, step, -1e9, 1e9, 0.1, gauge=gauge)  # type: ignore[arg-type] # one of them
    value = in_steps(count * step, step)
    text = ChannelText(channel)
    kind = {"relative_humidity": "fraction", "free_air_flow": "flow", "dew_point": "temperature"}
    unit = text.unit[:3] if quantity == "pressure" else text.unit
    found = to_si(float(text.of(value)), unit, kind.get(quantity, quantity))  # type: ignore[arg-type] # as above
    assert in_steps(found, step) == value


@given(st.floats(0.0, 60.0))
def test_a_drained_volume_survives_being_written(volume_kg: float) -> None:
    """A volume that somebody typed in ml to the last bit, any other to its last digits."""
    typed = to_si(round(volume_kg * 1e3), "ml", "volume") * WATER_KG_PER_M3
    assert to_si(float(_ml(typed)), "ml", "volume") * WATER_KG_PER_M3 == typed
    found = to_si(float(_ml(volume_kg)), "ml", "volume") * WATER_KG_PER_M3
    assert found == pytest.approx(volume_kg, rel=1e-15)


def test_readings_are_put_in_order_of_their_own_times() -> None:
    ticks = [
        (at * SECOND_US, [Reading("a", float(at), at * SECOND_US - back)])
        for at in range(1, 12_000)
        for back in [(at * 7919 % 5) * SECOND_US]
    ]
    found = [one for _, some in by_time(ticks, 5 * SECOND_US) for one in some]
    assert found == sorted((one for _, some in ticks for one in some), key=lambda one: one.time_us)


def test_what_a_replay_has_no_word_for_stands_in_the_journal(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    with a_store(folder) as store:
        at_us = BEGUN_US + HOUR_US
        store.add_entry(Drain("tank", volume_kg=0.38, by="AM"), at_us, at_us)
        store.add_entry(Drain("bowl"), at_us + 1, at_us + 1)
        store.add_entry(Drain("tank", "partly", 0.1), at_us, at_us)
        store.add_entry(Drain("gone"), at_us, at_us)
        store.add_entry(Drain("tank"), BEGUN_US - 1, BEGUN_US - 1)
        store.add_entry(Drain("tank"), at_us, at_us + 8 * DAY_US)
        store.add_entry(Acknowledge("tank-drain-due", "AM"), at_us, at_us)
    assert run(folder) == 0
    assert read(folder, "drains.csv") == [
        ["time", "trap", "volume", "unit"],
        ["2026-03-02T08:00:00Z", "tank", "380", "ml"],
        ["2026-03-02T08:00:00.000001Z", "bowl", "", ""],
    ]
    journal = read(folder, "journal.csv")
    assert journal[0] == ["number", "time", "written", "counts", "body"]
    assert [json.loads(row[4])["kind"] for row in journal[1:]] == ["drain"] * 6 + ["acknowledge"]
    told = capsys.readouterr().out
    for why in (
        "left some in the trap",
        "of traps that the site file does not have",
        "before the first reading",
        "reported more than a week late",
    ):
        assert f"drains that stand in journal.csv alone: 1, {why}" in told


def test_transitions_are_written_in_a_replay_s_columns(folder: Path) -> None:
    one = Transition(
        "tank-drain-due/1",
        BEGUN_US,
        "tank-drain-due",
        "drain-due",
        "tank",
        "normal",
        "unacknowledged",
        "medium",
        'drain it, "now"',
    )
    with a_store(folder, 2) as store:
        store.commit_tick(BEGUN_US + 2 * PERIOD_US, [], [one])
    assert run(folder) == 0
    assert read(folder, "transitions.csv") == [
        ["time", "id", "alarm", "from", "to", "priority", "text"],
        [
            *("2026-03-02T07:00:00Z", "tank-drain-due/1", "tank-drain-due"),
            *("normal", "unacknowledged", "medium", 'drain it, "now"'),
        ],
    ]


def test_a_span_and_channels_can_be_chosen(folder: Path) -> None:
    with a_store(folder) as store:
        seal_all(store)
        store.add_entry(Drain("tank"), BEGUN_US + 1, BEGUN_US + 1)
    begin, end = "2026-03-02T08:00:00+00:30", "2026-03-02T07:40:00Z"
    chosen = ["--channel", "motor.contact", "--channel", "tank-gauge.pressure"]
    assert run(folder, "--from", begin, "--to", end, *chosen) == 0
    rows = read(folder, "readings.csv")[1:]
    assert [rows[0][0], rows[-1][0]] == ["2026-03-02T07:30:00Z", "2026-03-02T07:39:50Z"]
    assert {row[1] for row in rows} == {"motor.contact", "tank-gauge.pressure"}
    assert len(rows) == 2 * 60
    assert read(folder, "drains.csv")[1:] == read(folder, "journal.csv")[1:] == []


def test_a_date_begins_at_midnight_in_the_shop_s_zone(folder: Path) -> None:
    zone = SITE.replace('name = "Birch Works"', 'name = "x"\ntimezone = "Pacific/Auckland"')
    (folder / "shop.toml").write_text(zone, encoding="utf-8")
    with Store.open(folder / "birch-works.db", SHOP.channels) as store:
        for now_us, readings in working(SHOP, 800, BEGUN_US + 3 * HOUR_US):
            store.commit_tick(now_us, readings)
    assert run(folder, "--from", "2026-03-03") == 0  # in March 13 h ahead of UTC
    assert read(folder, "readings.csv")[1][0] == "2026-03-02T11:00:00Z"


def test_channels_that_the_site_file_lost_are_not_lost(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    a_store(folder, 5).close()
    without = SITE.replace('temperature = "pipe-end.temperature"\n', "").replace(
        '[[sensor]]\nid = "pipe-end"\ndriver = "ds18b20"\nserial = "28-00000a1b2c3d"\n', ""
    )
    (folder / "shop.toml").write_text(without, encoding="utf-8")
    assert run(folder) == 0
    rows = read(folder, "other-channels.csv")
    assert rows[0] == ["time", "channel", "value_si", "reason"]
    assert [row[1] for row in rows[1:]] == ["pipe-end.temperature"] * 5
    assert float(rows[1][2]) == pytest.approx(290.15, abs=0.05)
    assert "other-channels.csv" in capsys.readouterr().out
    (folder / "shop.toml").write_text(SITE, encoding="utf-8")
    assert run(folder) == 0
    assert not (folder / "out" / "other-channels.csv").exists()  # it was of another export


def test_a_reading_that_was_judged_bad_is_judged_again(folder: Path) -> None:
    """Its value stands among the readings, its reason among the faults."""
    with a_store(folder, 2) as store:
        at_us = BEGUN_US + 2 * PERIOD_US
        gauge = "tank-gauge.pressure"
        store.commit_tick(
            at_us,
            [
                Reading(gauge, 7.1e5, at_us - 2, "frozen"),
                Reading(gauge, math.nan, at_us - 1, "no answer"),
                Reading(gauge, 9e9, at_us, "out of range"),
            ],
        )
    assert run(folder) == 0
    time = "2026-03-02T07:00:19.99999"
    assert read(folder, "readings.csv")[-1] == [f"{time}8Z", gauge, "7.1", "barg"]
    assert read(folder, "faults.csv")[1:] == [
        [f"{time}8Z", gauge, "frozen", "7.1", "barg"],
        [f"{time}9Z", gauge, "no answer", "", ""],
        ["2026-03-02T07:00:20Z", gauge, "out of range", "", ""],
    ]


def test_an_export_that_fails_leaves_what_was_there(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    a_store(folder, 5).close()
    assert run(folder) == 0
    before = {each.name: each.read_bytes() for each in (folder / "out").iterdir()}
    assert run(folder, "--from", "2027-01-01") == 2
    assert "the database has those of 2026-03-02T07:00:00Z to" in capsys.readouterr().err
    (folder / "out" / "journal.csv.part").mkdir()
    assert run(folder) == 2
    assert "name another folder with --out" in capsys.readouterr().err
    (folder / "out" / "journal.csv.part").rmdir()
    assert {each.name: each.read_bytes() for each in (folder / "out").iterdir()} == before


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--channel", "attic.temperature"], "there is no such channel (known: intake-air."),
        (["--from", "yesterday"], "write a date like 2026-03-02, which begins at midnight in UTC"),
        (["--to", "2026-13-01"], '--to "2026-13-01"'),
        (["--from", "2026-03-03", "--to", "2026-03-02"], "no readings from"),
        (["--store", "nowhere.db"], "nowhere.db: there is no database: name it with --store"),
    ],
)
def test_what_cannot_be_exported_is_told(
    folder: Path, capsys: pytest.CaptureFixture[str], arguments: list[str], words: str
) -> None:
    a_store(folder, 5).close()
    assert run(folder, *arguments) in (1, 2)
    assert words in capsys.readouterr().err


def test_an_empty_database_and_one_of_another_version_are_told(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = folder / "birch-works.db"
    Store.open(path, SHOP.channels).close()
    assert run(folder) == 2
    assert "holds no readings yet" in capsys.readouterr().err
    path.unlink()
    path.touch()
    assert run(folder) == 1
    assert "start the daemon once with this same dripleg" in capsys.readouterr().err
    path.write_text("no database at all, but long enough to be looked at as one" * 9)
    assert run(folder) == 1
    assert "this is not a dripleg database" in capsys.readouterr().err


def test_progress_is_shown_on_a_terminal_after_a_second() -> None:
    class Terminal(io.StringIO):
        def isatty(self) -> bool:
            return True

    class Ticking:
        seconds = 0.0

        def now_us(self) -> int:
            return 0

        def monotonic(self) -> float:
            self.seconds += 0.4
            return self.seconds

        def wait(self, seconds: float, stop: object) -> bool:
            return False

    shown, hidden = Terminal(), io.StringIO()
    for stream in (shown, hidden):
        progress = Progress(stream, Ticking(), "readings")
        for done in range(5):
            progress.at(done / 10)
        progress.end()
    assert shown.getvalue().startswith("\rreadings:  20%\rreadings:  30%")
    assert shown.getvalue().endswith("\r")
    assert hidden.getvalue() == ""


def test_nothing_of_the_site_s_own_is_changed(folder: Path) -> None:
    """An export beside a daemon writes nothing into its database."""
    with a_store(folder, 50) as store:
        before = (folder / "birch-works.db-wal").read_bytes()
        assert run(folder) == 0
        assert (folder / "birch-works.db-wal").read_bytes() == before
        store.commit_tick(BEGUN_US + DAY_US, [])


# --- faults as a replay reads them


def faults(folder: Path, *rows: str) -> Path:
    path = folder / "faults.csv"
    path.write_text("\n".join(["time,channel,reason,value,unit", *rows, ""]), encoding="utf-8")
    return path


def test_faults_with_a_value_are_left_to_be_judged_again(folder: Path) -> None:
    path = faults(
        folder,
        '2026-03-02T07:00:10Z,tank-gauge.pressure,"no answer, at all",,',
        "2026-03-02T07:00:05Z,tank-gauge.pressure,frozen,7.1,barg",
        "2026-03-02T07:00:00Z,motor.contact,off,,",
    )
    found, bad = read_faults(SHOP, path)
    assert [(one.channel, one.time_us - BEGUN_US, one.fault) for one in found] == [
        ("motor.contact", 0, "off"),
        ("tank-gauge.pressure", 10 * SECOND_US, "no answer, at all"),
    ]
    assert all(math.isnan(one.value) for one in found)
    assert bad == []


@pytest.mark.parametrize(
    ("row", "words"),
    [
        ("monday,motor.contact,off,,", "line 2, column time"),
        ("2026-03-02T07:00:00Z,attic.contact,off,,", 'column channel: "attic.contact" is not a'),
        ("2026-03-02T07:00:00Z,motor.contact,,,", "column reason: is empty; say why"),
        ("2026-03-02T07:00:00Z,motor.contact,off", "has 3 columns; expected 5"),
    ],
)
def test_a_bad_row_of_faults_is_named(folder: Path, row: str, words: str) -> None:
    with pytest.raises(ReplayError) as error:
        read_faults(SHOP, faults(folder, row))
    assert words in str(error.value)
    found, bad = read_faults(SHOP, faults(folder, row), skip_bad=True)
    assert (found, len(bad)) == ([], 1)
