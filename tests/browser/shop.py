"""A real daemon without threads of its own, behind its real server, for a browser to look at."""

from __future__ import annotations

from functools import lru_cache
from pathlib import Path
from tempfile import TemporaryDirectory

from api.app import create_app
from api.server import ApiServer
from daemon.journal import Entry
from daemon.shell import Shell
from daemon.store.store import Store
from tests.browser.network import Wire
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, site, working
from tests.daemon.test_shell import HandClock, Played

METRIC = (
    SITE.replace('name = "Birch Works"', 'name = "Birch Works"\ntimezone = "Europe/Lisbon"')
    .replace('"08:00-12:00"', '"06:00-12:00"')
    .replace('drain_at = "600 ml"', 'drain_at = "600 ml", holds_at_start = "650 ml"')
    .replace(
        'after = "booth-regulator"\n\n[model]',
        'after = "booth-regulator"\nsurroundings = "intake-air"\nwork = "solvent-borne"\n\n[model]',
    )
)
US = METRIC.replace("[site]\n", '[site]\nunits = "us"\n')
TICKS = 60


@lru_cache(maxsize=4)
def _prepared(text: str) -> bytes:
    """A database with the first ticks in it: made once, since reckoning them takes a while."""
    shop = site(text)
    clock, record = HandClock(BEGUN_US), list(working(shop, TICKS))
    with TemporaryDirectory() as folder:
        path = Path(folder) / "prepared.db"
        with Store.open(path, shop.channels) as store:
            shell = Shell(shop, clock, Played(record), store)
            for now_us, _ in record:
                clock.wall_us = now_us
                shell.tick(now_us)
            shell.checkpoint()
        return path.read_bytes()


class Shop:
    """Birch Works at its 61st tick: the tank is due, the spray gun's surface is not known."""

    def __init__(self, folder: Path, text: str = METRIC) -> None:
        self.site = site(text)
        path = folder / "birch-works.db"
        path.write_bytes(_prepared(text))
        self.clock = HandClock(BEGUN_US + (TICKS - 1) * PERIOD_US)
        self.store = Store.open(path, self.site.channels)
        sampler = Played(list(working(self.site, 400)))
        self.shell = Shell(self.site, self.clock, sampler, self.store)
        self.shell.recover()
        self.number = TICKS
        self.tick()
        self.server = ApiServer(create_app(self.shell), "127.0.0.1", 0)
        self.server.start()
        self.wire = Wire(self.server.port)

    @property
    def url(self) -> str:
        return f"http://127.0.0.1:{self.wire.port}"

    def tick(self, times: int = 1) -> None:
        """Let the daemon make its next ticks."""
        for _ in range(times):
            self.clock.wall_us = max(self.clock.wall_us, BEGUN_US + self.number * PERIOD_US)
            self.shell.tick(BEGUN_US + self.number * PERIOD_US)
            self.number += 1

    def stop_server(self) -> None:
        """The server goes down, the journal stays."""
        self.server.stop()

    def start_server(self) -> None:
        """It comes up again on the same port."""
        self.server = ApiServer(create_app(self.shell), "127.0.0.1", self.server.port)
        self.server.start()

    def entries(self) -> list[Entry]:
        return list(self.store.entries(every=True))

    def close(self) -> None:
        self.wire.close()
        self.server.stop()
        self.store.close()
