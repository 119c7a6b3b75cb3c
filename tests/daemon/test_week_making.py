"""Weeks are made once they are over: files, and word over MQTT; and by hand from a shell."""

from __future__ import annotations

import csv
import io
import json
import threading
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest
from pypdf import PdfReader

from daemon.__main__ import EXIT_BAD_INPUT, EXIT_OK, main
from daemon.clock import DAY_US, HOUR_US, MINUTE_US, parse_rfc3339
from daemon.hour_figures import Noted
from daemon.journal import Drain
from daemon.outbox import Topics
from daemon.shell import GRID_KEY
from daemon.site.types import Site
from daemon.store.store import Store
from daemon.weekly import command
from daemon.weekly.making import MADE_KEY, WeekMaker
from daemon.weekly.weeks import Week
from tests.daemon.shops import SITE, site
from tests.daemon.test_shell import HandClock
from tests.daemon.week_rows import rows_of

SHOP = site()
TOPICS = Topics("dripleg/birch-works")
WEEK = Week(2026, 10)
FROM_US, TO_US = WEEK.bounds_us("UTC")


class Made:
    """A store that was lived in for a while, and what makes its weeks."""

    def __init__(self, path: Path, shop: Site = SHOP) -> None:
        self.path, self.shop = path, shop
        self.clock = HandClock(FROM_US)
        self.store = Store.open(path, shop.channels)
        self.store.set_meta(GRID_KEY, str(FROM_US))

    def live(self, from_us: int, to_us: int) -> None:
        """Every hour between two times, committed by a tick at its end."""
        rows = rows_of(self.shop, from_us, to_us)
        self.store.commit_tick(to_us, [], noted=Noted(tuple(rows.hours), tuple(rows.days)))
        self.clock.wall_us = to_us

    def maker(self, topics: Topics | None = TOPICS) -> WeekMaker:
        return WeekMaker(self.shop, self.store, self.path, self.clock, topics)

    @property
    def files(self) -> list[str]:
        folder = self.path.with_name("birch-works.weekly")
        return sorted(each.name for each in folder.iterdir()) if folder.exists() else []

    def told(self) -> list[dict[str, object]]:
        """What waits for the broker on the topic, in order."""
        waiting = [each.message for each in self.store.pending(100)]
        assert all(each.topic == "dripleg/birch-works/weekly" for each in waiting)
        assert all(each.retain for each in waiting)
        return [json.loads(each.payload) for each in waiting]


@pytest.fixture
def made(tmp_path: Path) -> Iterator[Made]:
    found = Made(tmp_path / "birch-works.db")
    yield found
    found.store.close()


# ---- by itself ----


def test_a_week_is_made_once_it_is_over_and_only_once(made: Made) -> None:
    made.live(FROM_US, TO_US - HOUR_US)
    assert made.maker().make() == 0
    made.live(TO_US - HOUR_US, TO_US)
    assert made.maker().make() == 1
    assert made.files == ["birch-works-2026-W10.csv", "birch-works-2026-W10.pdf"]
    assert made.maker().make() == 0
    assert [each["week"] for each in made.told()] == ["2026-W10"]


def test_the_last_hour_must_be_committed_before_a_week_is_made(made: Made) -> None:
    made.live(FROM_US, TO_US - HOUR_US)
    made.clock.wall_us = TO_US + 5 * MINUTE_US  # its last tick was at 23:00
    assert made.maker().make() == 0
    made.live(TO_US - HOUR_US, TO_US)
    assert made.maker().make() == 1


def test_a_week_that_ended_while_the_daemon_stood_still_is_made_up_for(made: Made) -> None:
    made.live(FROM_US, TO_US)
    made.live(TO_US, TO_US + 17 * DAY_US)
    assert made.maker().make() == 3
    assert [each["week"] for each in made.told()] == ["2026-W10", "2026-W11", "2026-W12"]
    assert len(made.files) == 6


def test_a_week_of_which_nothing_is_known_makes_no_files_and_no_noise(made: Made) -> None:
    made.store.commit_tick(TO_US + DAY_US, [])
    made.clock.wall_us = TO_US + DAY_US
    assert made.maker().make() == 0
    assert made.files == []
    assert made.told() == []
    assert made.store.get_meta(MADE_KEY) == "2026-W10"


def test_a_shop_without_a_broker_gets_its_files(made: Made) -> None:
    made.live(FROM_US, TO_US)
    assert made.maker(topics=None).make() == 1
    assert len(made.files) == 2
    assert made.told() == []


def test_a_kill_before_the_announcement_makes_the_week_again(
    made: Made, monkeypatch: pytest.MonkeyPatch
) -> None:
    made.live(FROM_US, TO_US)

    def killed(*_: object) -> None:
        raise KeyboardInterrupt

    with monkeypatch.context() as patch:
        patch.setattr(made.store, "announce", killed)
        with pytest.raises(KeyboardInterrupt):
            made.maker().make()
    assert made.told() == []
    assert made.maker().make() == 1
    assert len(made.told()) == 1


def test_a_folder_that_cannot_be_written_is_tried_again(
    made: Made, caplog: pytest.LogCaptureFixture
) -> None:
    made.live(FROM_US, TO_US)
    folder = made.path.with_name("birch-works.weekly")
    folder.write_text("in the way")
    assert made.maker().make() == 0
    assert "the week's files cannot be written" in caplog.text
    folder.unlink()
    assert made.maker().make() == 1


def test_what_is_announced_is_the_week_in_short(made: Made) -> None:
    made.live(FROM_US, TO_US)
    made.maker().make()
    (payload,) = made.told()
    assert payload.pop("text") == (
        "8.4 L (6.89 to 9.91 L) of water came in with the air; 0 drains, none late; 10.2 h unfit "
        "to spray."
    )
    traps = payload.pop("traps")
    assert isinstance(traps, list)
    assert traps[0] == {
        "trap": "tank",
        "shed_ml": {"p05": 1378, "p50": 1680, "p95": 1982},
        "measured_ml": None,
        "drains": 0,
        "late": 0,
    }
    assert payload == {
        "week": "2026-W10",
        "begins": "2026-03-02T00:00:00Z",
        "ends": "2026-03-09T00:00:00Z",
        "recorded_h": 168.0,
        "watched_h": 168.0,
        "water_in_ml": {"p05": 6888, "p50": 8400, "p95": 9912},
        "outlets": [{"outlet": "spray-gun", "unfit_h": 10.2, "not_known_h": 0.0}],
        "page": "/week/2026-W10",
    }


# ---- by hand ----


@pytest.fixture
def site_file(made: Made) -> Path:
    path = made.path.with_name("birch-works.toml")
    path.write_text(SITE)
    return path


def test_the_command_prints_a_week_and_writes_its_files(
    made: Made, site_file: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    made.live(FROM_US, TO_US)
    made.store.add_entry(Drain("tank", "emptied", 0.5, "AM"), FROM_US + HOUR_US, FROM_US + HOUR_US)
    made.store.close()
    out = made.path.parent / "logs"
    assert main(["weekly", str(site_file), "2026-W10", "--out", str(out)]) == EXIT_OK
    said = capsys.readouterr().out
    assert "Week 10 of 2026" in said
    assert "8.4 L (6.89 to 9.91 L) of water came in" in said
    assert f"Written: {out / 'birch-works-2026-W10.pdf'}" in said
    pages = PdfReader(out / "birch-works-2026-W10.pdf").pages
    assert "Birch Works" in pages[0].extract_text()
    head, *rows = csv.reader(io.StringIO((out / "birch-works-2026-W10.csv").read_text()))
    assert head[:3] == ["section", "item", "quantity"]
    assert ["traps", "tank", "measured", "", "500", "", "ml"] in rows


def test_the_command_works_beside_a_running_daemon(
    made: Made, site_file: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """The store is open, and locked, while the command reads."""
    made.live(FROM_US, TO_US)
    assert main(["weekly", str(site_file), "2026-W10"]) == EXIT_OK
    assert "All 168 h were watched." in capsys.readouterr().out
    made.store.set_meta("still", "written")


def test_without_a_week_the_command_shows_the_last_full_one(
    made: Made, site_file: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """Whatever that is: the command asks the machine's own clock."""
    assert main(["weekly", str(site_file)]) == EXIT_OK
    said = capsys.readouterr().out
    assert "Birch Works: moisture log" in said
    assert "This week is not over" not in said


@pytest.mark.parametrize(
    ("week", "said"),
    [
        ("2026-10", '"2026-10" is not a week: write it like 2026-W49'),
        ("2025-W53", "there is no week 53 in 2025"),
        ("9998-W01", "9998-W01 has not begun: this is "),
    ],
)
def test_a_week_that_cannot_be_is_refused(
    made: Made, site_file: Path, capsys: pytest.CaptureFixture[str], week: str, said: str
) -> None:
    assert main(["weekly", str(site_file), week]) == EXIT_BAD_INPUT
    assert said in capsys.readouterr().err


def test_without_a_database_the_command_says_what_to_do(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "birch-works.toml"
    path.write_text(SITE)
    assert main(["weekly", str(path)]) != EXIT_OK
    said = capsys.readouterr().err
    assert f"there is no database at {tmp_path / 'birch-works.db'}" in said
    assert "start the daemon first" in said


def test_a_shop_far_east_gets_its_week_by_its_own_clock(tmp_path: Path) -> None:
    """Auckland's Monday begins at 11:00 UTC on Sunday, with summer time."""
    shop = replace(SHOP, timezone="Pacific/Auckland")
    made = Made(tmp_path / "birch-works.db", shop)
    from_us, to_us = WEEK.bounds_us(shop.timezone)
    assert from_us == parse_rfc3339("2026-03-01T11:00:00Z")
    made.store.set_meta(GRID_KEY, str(from_us))
    made.live(from_us, to_us - HOUR_US)
    assert made.maker().make() == 0
    made.live(to_us - HOUR_US, to_us)
    assert made.maker().make() == 1
    (told,) = made.told()
    assert told["watched_h"] == 168.0
    made.store.close()


def test_what_takes_long_is_said(monkeypatch: pytest.MonkeyPatch) -> None:
    said: list[str] = []
    heard = threading.Event()

    def say(text: str) -> None:
        said.append(text)
        heard.set()

    monkeypatch.setattr(command, "PATIENCE_S", 0.0)
    with command.patience(say, "reading birch-works.db"):
        assert heard.wait(10.0)
    assert said == ["dripleg: reading birch-works.db ..."]
    monkeypatch.setattr(command, "PATIENCE_S", 60.0)
    with command.patience(say, "reading it again"):
        pass
    assert len(said) == 1
