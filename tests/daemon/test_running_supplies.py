"""What the running daemon tells of supplies and plant is what a replay of the same day sums up."""

from __future__ import annotations

from pathlib import Path

from api.app import create_app
from daemon.advance import Core
from daemon.replay import replay, summarise
from daemon.shell import Shell
from daemon.store.store import Store
from tests.api.client import Client
from tests.daemon.shops import BEGUN_US, SITE, flat, site, working
from tests.daemon.test_hours_left import BOWL
from tests.daemon.test_shell import HandClock, Played

CARTRIDGE = 'kind = "desiccant"\nafter = "riser"\nmass = "1.5 kg"'


def test_the_api_and_a_replay_agree_on_how_long_a_cartridge_lasts(tmp_path: Path) -> None:
    shop = site(SITE.replace(BOWL, CARTRIDGE))
    record = list(working(shop, 360))
    clock = HandClock(BEGUN_US)
    with Store.open(tmp_path / "shop.db", shop.channels) as store:
        shell = Shell(shop, clock, Played(record), store)
        for now_us, _ in record:
            clock.wall_us = now_us
            shell.tick(now_us)
        client = Client(create_app(shell))
        stations = {each["station"]: each for each in client.get("/api/v1/stations").json()}
        plant = client.get("/api/v1/plant").json()
        reminders = client.get("/api/v1/reminders").json()
        assert client.get("/api/v1/forecasts").json() == []
    core = Core(shop)
    summary = summarise(core, replay(core, flat(record), []), [])
    assert stations["bowl"]["hours_left"] == summary["lasts_h"]["bowl"]
    assert summary["lasts_h"]["bowl"]["p50"] is not None
    assert stations["tank"]["hours_left"] is None
    assert stations["bowl"]["used_up"] is not None
    assert plant["leak"] is None  # nothing was closed in that hour
    assert reminders == []
