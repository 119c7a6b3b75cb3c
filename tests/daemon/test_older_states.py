"""Checkpoints that earlier versions wrote are still read: an upgrade forgets nothing.

Each of `kept_states` was written by the version of its day, from the record below. Whoever changes
what a checkpoint holds keeps one of the version before (`encode` as it was), under the next number.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from daemon.advance import Core
from daemon.checkpoint import decode, encode
from daemon.clock import MINUTE_US
from daemon.journal import Drain, Entry
from daemon.recovery import Recovery
from daemon.replay import replay
from daemon.site_parts import fingerprint, same_line
from daemon.state import CoreState, Inputs
from daemon.store.store import Store
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, flat, site, working

KEPT = sorted((Path(__file__).parent / "kept_states").glob("*.state"))
SHOP = site(SITE.replace("members = 32", "members = 16"))
CORE = Core(SHOP)
RECORD = list(working(SHOP, 3300, humidity=0.9))
AT_US = BEGUN_US + 1500 * PERIOD_US + 5
ENTRIES = [
    Entry(1, AT_US, AT_US, Drain("tank", volume_kg=0.08, by="AM")),
    Entry(2, AT_US + 9, AT_US + 9, Drain("riser")),
]


@pytest.fixture(scope="module")
def now() -> CoreState:
    """The same record, reckoned by this version."""
    return replay(CORE, flat(RECORD), ENTRIES).state


@pytest.fixture(params=KEPT, ids=lambda path: path.name)
def blob(request: pytest.FixtureRequest) -> bytes:
    path: Path = request.param
    return path.read_bytes()


def test_there_are_some() -> None:
    assert [path.name for path in KEPT] == [f"{n}.state" for n in range(1, len(KEPT) + 1)]
    assert KEPT


def test_it_belongs_to_the_same_line_and_tells_what_this_version_would(
    blob: bytes, now: CoreState
) -> None:
    """To a percent: how things are reckoned may have changed a little since. The ratio lags by an
    hour, as it did not at first."""
    state, before = decode(blob)
    assert same_line(before, fingerprint(SHOP, CORE.model.plan))
    assert state.time_us == now.time_us
    for old, new in zip(CORE.views(state), CORE.views(now), strict=True):
        assert (old.trap, old.since, old.last_drain_us) == (new.trap, new.since, new.last_drain_us)
        assert old.p50_kg == pytest.approx(new.p50_kg, rel=0.01)
    standing = {name: record.state for name, record in state.alarms.items()}
    assert standing["bowl-drain-due"] == "unacknowledged"
    assert standing.items() <= {name: each.state for name, each in now.alarms.items()}.items()
    np.testing.assert_allclose(
        state.model.air.ratio, now.model.air.ratio, rtol=0.1
    )  # it lags by an hour now


def test_it_goes_on(blob: bytes, now: CoreState) -> None:
    """Ticks follow, and what they leave is read again."""
    state = CORE.fitted(decode(blob)[0])
    for number in range(1, 400):
        now_us = state.time_us + PERIOD_US
        later = [reading for _, tick in RECORD[number : number + 1] for reading in tick]
        moved = [replace(reading, time_us=now_us) for reading in later]
        state, estimate, _ = CORE.advance(state, now_us, Inputs(moved))
        assert not estimate.problems
    assert decode(encode(state, "x"))[0].time_us == now.time_us + 399 * PERIOD_US
    assert np.isfinite(CORE.model.contents(state.model)).all()


def test_a_daemon_comes_back_to_it(blob: bytes, tmp_path: Path) -> None:
    state, _ = decode(blob)
    with Store.open(tmp_path / "store.db", SHOP.channels) as store:
        store.commit_tick(state.time_us, RECORD[-1][1], checkpoint=blob)
        back = Recovery(CORE, store).come_back(BEGUN_US, state.time_us + MINUTE_US)
    assert back is not None
    assert back.state.traps == state.traps
    assert set(back.state.alarms) == set(CORE.definitions)
