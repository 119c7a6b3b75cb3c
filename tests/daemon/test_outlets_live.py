"""Outlets in the running daemon: gauges and blotters in the journal, messages, kills, replays."""

from __future__ import annotations

import json
import threading
from collections.abc import Iterable, Iterator, Sequence
from pathlib import Path
from typing import cast

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from daemon.advance import Core
from daemon.checkpoint import encode
from daemon.clock import MINUTE_US, SECOND_US
from daemon.errors import JournalError
from daemon.journal import Blotter, Body, Entry, Gauge, body_from_json, body_to_json
from daemon.mqtt import MqttLink
from daemon.outbox import Message, Topics, outlet_message
from daemon.outlet_payloads import outlet_payload
from daemon.replay import replay
from daemon.shell import Shell
from daemon.site.types import Site
from daemon.state import CoreState
from daemon.store.store import Store
from sensors.reading import Reading
from sensors.sampling import HungBus
from tests.daemon.outlet_shops import a_shop, still
from tests.daemon.shops import BEGUN_US, PERIOD_US

SHOP = a_shop()
TOPICS = Topics("dripleg/birch-works")


class HandClock:
    """A clock that a test sets."""

    def __init__(self) -> None:
        self.wall_us = BEGUN_US

    def now_us(self) -> int:
        return self.wall_us

    def monotonic(self) -> float:
        return self.wall_us / 1e6

    def wait(self, seconds: float, stop: threading.Event) -> bool:
        self.wall_us += round(seconds * 1e6)
        return stop.is_set()


class Played:
    """A sampler that plays a record."""

    def __init__(self, record: Sequence[Reading]) -> None:
        self.record: dict[int, list[Reading]] = {}
        for each in record:
            self.record.setdefault(each.time_us, []).append(each)

    def sample(self, now_us: int, deadline_s: float) -> list[Reading]:
        return self.record.get(now_us, [])

    def hung_buses(self) -> tuple[HungBus, ...]:
        return ()


class Link:
    """A link that keeps what it was given."""

    status = "connected"

    def __init__(self) -> None:
        self.states: list[Message] = []

    def publish_states(self, messages: Iterable[Message]) -> None:
        self.states += messages

    def wake(self) -> None: ...

    def outlets(self) -> list[dict[str, object]]:
        """Payloads of what was told of outlets, oldest first."""
        topic = TOPICS.outlet("spray-gun")
        return [json.loads(each.payload) for each in self.states if each.topic == topic]


class Rig:
    """A daemon that can be killed: what is not in its store is gone."""

    def __init__(self, path: Path, record: Sequence[Reading], shop: Site = SHOP) -> None:
        self.path, self.shop, self.sampler, self.link = path, shop, Played(record), Link()
        self.clock = HandClock()
        self.open()

    def open(self) -> None:
        self.store = Store.open(self.path, self.shop.channels)
        self.shell = Shell(self.shop, self.clock, self.sampler, self.store, TOPICS)
        self.shell.link = cast(MqttLink, self.link)
        self.shell.recover()

    def kill(self) -> None:
        self.store.close()
        self.open()

    def tick(self, number: int) -> None:
        self.clock.wall_us = BEGUN_US + number * PERIOD_US
        self.shell.tick(self.clock.wall_us)

    @property
    def state(self) -> CoreState:
        assert self.shell._state is not None
        return self.shell._state


@pytest.fixture
def rig(tmp_path: Path) -> Iterator[Rig]:
    made = Rig(tmp_path / "a.db", list(still(SHOP, 1.0)))
    yield made
    made.store.close()


# ---- bits ----

BODIES = st.one_of(
    st.builds(Gauge, st.just("spray-gun"), st.sampled_from([8.5, 9.5, 40.0]), st.just(900.0)),
    st.builds(Blotter, st.just("spray-gun"), st.sampled_from(["clean", "water", "oil"])),
)


@settings(
    max_examples=10, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(
    st.integers(20, 200),
    st.sets(st.integers(1, 199), max_size=3),
    st.lists(st.tuples(st.integers(2, 199), st.integers(0, 100), BODIES), max_size=4),
)
def test_replay_equals_live_to_the_bit_with_gauges_and_blotters(
    tmp_path_factory: pytest.TempPathFactory,
    length: int,
    kills: set[int],
    told: list[tuple[int, int, Body]],
) -> None:
    """Kills at any tick, and entries reported late, leave the bits of a replay."""
    record = list(still(SHOP, length * 10 / 3600))
    rig = Rig(tmp_path_factory.mktemp("rig") / "a.db", record)
    entries = []
    for number in range(length + 1):
        for at_tick, late, body in told:
            if at_tick == number:
                now_us = BEGUN_US + number * PERIOD_US
                rig.clock.wall_us = now_us - SECOND_US
                at_us = max(BEGUN_US + 1, now_us - late * PERIOD_US - 3 * SECOND_US)
                entries.append(rig.shell.record(body, at_us).entry)
        if number in kills:
            rig.kill()
        rig.tick(number)
    entries.sort(key=lambda each: (each.at_us, each.seq))
    replayed = replay(Core(SHOP), record, entries)
    live = rig.state
    rig.store.close()
    assert encode(live, "") == encode(replayed.state, "")


# ---- what is shown ----


def test_a_blotter_shows_at_once_to_whoever_looks(rig: Rig) -> None:
    assert rig.shell.outlets() == ()
    for number in range(30):
        rig.tick(number)
    assert rig.shell.outlets()[0].verdict == "dry enough"
    rig.clock.wall_us += SECOND_US
    rig.shell.record(Blotter("spray-gun", "water", "AM"))
    assert rig.shell.outlets()[0].verdict == "wait"
    rig.kill()
    rig.tick(30)
    assert rig.shell.outlets()[0].blotter == "water"


def test_a_typed_surface_is_judged_and_not_kept(rig: Rig) -> None:
    assert rig.shell.margin("spray-gun", 284.15) is None  # before the first tick
    for number in range(30):
        rig.tick(number)
    before = rig.shell.outlets()[0]
    cold = rig.shell.margin("spray-gun", 284.15)
    assert cold is not None
    assert (before.verdict, cold.verdict) == ("dry enough", "wait")
    assert rig.shell.outlets()[0] == before


def test_outlets_are_told_once_a_minute_and_after_an_entry(rig: Rig) -> None:
    for number in range(13):  # 07:00:00 to 07:02:00
        rig.tick(number)
    assert [each["at"] for each in rig.link.outlets()] == [
        "2026-03-02T07:00:00Z",
        "2026-03-02T07:01:00Z",
        "2026-03-02T07:02:00Z",
    ]
    rig.clock.wall_us += SECOND_US
    rig.shell.record(Blotter("spray-gun", "oil"))
    rig.tick(13)
    last = rig.link.outlets()[-1]
    assert (last["at"], last["verdict"]) == ("2026-03-02T07:02:10Z", "wait")


def test_an_outlet_is_retained_under_its_name_with_every_key(rig: Rig) -> None:
    for number in range(30):
        rig.tick(number)
    (view,) = rig.shell.outlets()
    message = outlet_message(TOPICS, view)
    assert message.topic == "dripleg/birch-works/outlets/spray-gun"
    assert (message.qos, message.retain, message.id) == (1, True, "")
    found = json.loads(message.payload)
    assert found == json.loads(json.dumps(outlet_payload(view)))
    # the documented keys, in their order
    assert list(found) == [
        "outlet", "at", "work", "verdict", "speaks_of", "air", "surface", "holding_blast",
        "blotter",
    ]  # fmt: skip
    assert list(found["air"]) == [
        "verdict", "reasons", "would_change", "pressure_gauge_bar", "pressure_dew_point_c",
        "atmospheric_dew_point_c", "line_margin_k", "line_margin_wanted_k", "coldest",
        "after_expansion_c", "carried_liquid_g_m3", "iso_8573_1_humidity",
    ]  # fmt: skip
    assert list(found["surface"]) == [
        "verdict", "reasons", "would_change", "air_c", "relative_humidity_percent", "dew_point_c",
        "surface_c", "surface_margin_k", "surface_margin_wanted_k",
        "surface_relative_humidity_percent", "by_gauge_until", "ahead",
    ]  # fmt: skip
    assert found["speaks_of"].startswith("water only")


def test_a_stain_stands_when_the_site_file_changes(rig: Rig) -> None:
    for number in range(30):
        rig.tick(number)
    rig.clock.wall_us += SECOND_US
    rig.shell.record(Blotter("spray-gun", "water"))
    rig.tick(30)
    rig.shell.checkpoint()
    rig.shop = a_shop(set_bar=1.5)
    rig.kill()
    rig.tick(31)
    assert rig.shell.outlets()[0].blotter == "water"
    assert rig.shell.outlets()[0].verdict == "wait"


# ---- entries ----


@pytest.mark.parametrize(
    "body", [Gauge("spray-gun", 4.25, 600.0, "AM"), Blotter("spray-gun", "oil", "AM")]
)
def test_an_entry_survives_the_journal(body: Body) -> None:
    assert body_from_json(body_to_json(body)) == body


@pytest.mark.parametrize(
    ("body", "words"),
    [
        (Gauge("attic", 4.0), '"attic" is not an outlet of this site (known: spray-gun)'),
        (Blotter("attic", "clean"), '"attic" is not an outlet of this site'),
        (Gauge("spray-gun", float("nan")), "a spread of nan K cannot be"),
        (Gauge("spray-gun", 61.0), "a spread of 61 K cannot be"),
        (Gauge("spray-gun", 4.0, 10.0), "speaks for 10 s: say from 1 min to 8 h"),
        (Gauge("spray-gun", 4.0, 36_000.0), "speaks for 36000 s"),
        (Gauge("spray-gun", 4.0, by="x" * 41), "at most 40"),
        (Blotter("spray-gun", "damp"), '"damp" is no blotter\'s result'),  # type: ignore[arg-type]
        (Blotter("spray-gun", "clean", "x" * 41), "at most 40"),
    ],
)
def test_what_cannot_be_is_refused_in_words(rig: Rig, body: Body, words: str) -> None:
    rig.tick(0)
    with pytest.raises(JournalError) as refused:
        rig.shell.record(body)
    assert words in str(refused.value)


def test_an_entry_of_an_outlet_that_is_gone_changes_nothing() -> None:
    core = Core(SHOP)
    state = replay(core, list(still(SHOP, 0.1)), []).state
    entries = [
        Entry(1, state.time_us, state.time_us, Gauge("attic", 4.0)),
        Entry(2, state.time_us, state.time_us, Blotter("attic", "oil")),
    ]
    assert core.take(state, entries)[0] == state


def test_a_gauge_read_while_the_sensors_are_silent_tells_the_margin_itself() -> None:
    core = Core(SHOP)
    record = [
        each
        for each in still(SHOP, 0.5)
        if not each.channel.startswith("booth-air") or each.time_us < BEGUN_US + 10 * MINUTE_US
    ]
    told = Entry(1, BEGUN_US + 20 * MINUTE_US, BEGUN_US, Gauge("spray-gun", 6.0))
    state = replay(core, record, [told]).state
    gauge = state.outlets["spray-gun"].gauge
    assert gauge is not None
    assert gauge.tells == "margin"
    # while the air around is not known, neither is whether it is fit for the work
    assert core.outlet_views.all(state)[0].surface.judgement.verdict == "unknown"
