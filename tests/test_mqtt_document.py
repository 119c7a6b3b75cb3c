"""`deploy/mqtt.md` lists every topic and field with its type, and nothing else.

Its tables are read as a schema. Payloads that the code makes of views with everything, and with
nothing, known are held against it both ways; then all that a real daemon publishes in two hours.
"""

from __future__ import annotations

import json
import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import pytest

from daemon import outbox, payloads
from daemon.alarms import Alarm
from daemon.clock import MINUTE_US, parse_rfc3339
from daemon.errors import JournalError
from daemon.journal import Drain, Shelve
from daemon.outbox import Message, Topics
from daemon.shell import Shell
from daemon.store.store import Store
from daemon.views import Interval, Judgement, OutletView
from daemon.weekly.announce import week_message
from daemon.weekly.weeks import Week
from tests.api.fake import FakeRunning, some_reminder
from tests.api.outlet_views import gun_view
from tests.daemon.shops import BEGUN_US, PERIOD_US, SITE, site, working
from tests.daemon.test_outbox import AT_US, TRANSITION, VIEW
from tests.daemon.test_shell import HandClock, Played
from tests.tree import ROOT

TEXT = (ROOT / "deploy" / "mqtt.md").read_text(encoding="utf-8")
TOPICS = Topics("dripleg/alder-yard")


@dataclass(frozen=True)
class Table:
    """The fields of one payload: their types, and which may be left out."""

    fields: dict[str, set[str]]
    units: dict[str, str]


@dataclass(frozen=True)
class Topic:
    """One topic as it is described."""

    name: str
    retained: bool
    qos: str
    tables: tuple[Table, ...]


def documented() -> dict[str, Topic]:
    found = {}
    for part in TEXT.split("\n## `")[1:]:
        name = part.split("`")[0]
        said = re.search(r"Retained: (yes|no)\. QoS: ([^.]*)\.", part)
        assert said is not None, name
        tables = tuple(_table(each) for each in re.findall(r"(?:^\|.*\n)+", part, re.MULTILINE))
        found[name] = Topic(name, said[1] == "yes", said[2], tables)
    return found


def _table(text: str) -> Table:
    fields, units = {}, {}
    for line in text.splitlines()[2:]:
        name, types, unit, meaning = (cell.strip() for cell in line.strip("|").split("|", 3))
        assert meaning, line
        fields[name.strip("`")] = set(types.split(" or "))
        units[name.strip("`")] = unit
    return Table(fields, units)


DOCUMENT = documented()
TIME = re.compile(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d(\.\d+)?Z")


def flat(payload: Any, at: str = "") -> Iterator[tuple[str, str]]:
    """(field, type) of all that a payload holds."""
    if isinstance(payload, dict) and not _is_interval(payload):
        for name, value in payload.items():
            yield from flat(value, f"{at}.{name}" if at else name)
    elif isinstance(payload, list) and any(isinstance(each, dict) for each in payload):
        for each in payload:
            yield from flat(each, f"{at}[]")
    else:
        yield at, _type(payload)


def _is_interval(value: dict[str, Any]) -> bool:
    numbers = all(isinstance(each, int | float) for each in value.values())
    return set(value) == {"p05", "p50", "p95"} and numbers


def _type(value: Any) -> str:
    if isinstance(value, str):
        return "time" if TIME.fullmatch(value) else "text"
    if isinstance(value, list):
        assert all(isinstance(each, str) for each in value), value
        return "list of text"
    names = {type(None): "null", bool: "true or false", int: "whole number", float: "number"}
    return "interval" if isinstance(value, dict) else names[type(value)]


def fits(found: str, types: set[str]) -> bool:
    return found in types or (found == "whole number" and "number" in types)


def wrong(table: Table, payload: Any) -> list[str]:
    """What of a payload is not as it is described."""
    problems = []
    seen = dict(flat(payload))
    for name, found in seen.items():
        # an empty list of objects has nothing in it that could be described
        if found == "list of text" and any(each.startswith(f"{name}[]") for each in table.fields):
            continue
        if name not in table.fields:
            problems.append(f"{name}: {found}, but it is not described")
        elif not fits(found, table.fields[name]):
            problems.append(f"{name}: {found}, but described as {table.fields[name]}")
    for name, types in table.fields.items():
        parent = name.rpartition(".")[0].removesuffix("[]")
        there = name in seen or parent in seen or "left out" in types
        if not there and not any(each.startswith(f"{name}.") for each in seen):
            problems.append(f"{name}: described, but not there")
    return problems


def table_for(message: Message) -> tuple[Topic, Table]:
    rest = message.topic.removeprefix(f"{TOPICS.base}/")
    name = {"traps": "traps/<trap>", "outlets": "outlets/<outlet>", "alarms": "alarms/<alarm>"}.get(
        rest.partition("/")[0], rest
    )
    topic = DOCUMENT[name]
    payload = json.loads(message.payload)
    number = 1 if len(topic.tables) > 1 and "alarm" not in payload else 0
    return topic, topic.tables[number]


def checked(message: Message) -> None:
    topic, table = table_for(message)
    assert wrong(table, json.loads(message.payload)) == [], message.topic
    assert message.retain is topic.retained
    assert str(message.qos) == topic.qos


# ---- what the code makes ----


def nothing_known() -> OutletView:
    view = gun_view()
    nothing: dict[str, Any] = dict.fromkeys(
        ("pressure_pa", "atmosphere_pa", "pressure_dew_point_k", "atmospheric_dew_point_k",
         "line_margin_k", "after_expansion_k", "carried_kg_per_m3", "humidity_class")
    )  # fmt: skip
    neither: dict[str, Any] = dict.fromkeys(
        ("air_k", "relative_humidity", "dew_point_k", "surface_k", "surface_margin_k",
         "humidity_at_surface", "by_gauge_until_us")
    )  # fmt: skip
    return replace(
        view,
        work="",
        air=replace(view.air, coldest="", **nothing),
        surface=replace(view.surface, ahead=(), **neither),
        blotter=None,
        blotter_us=None,
    )


def all_known() -> OutletView:
    view = gun_view(291.15)
    surface = replace(view.surface, humidity_at_surface=view.surface.relative_humidity)
    return replace(view, surface=surface, holding=Judgement("care", ("Cold nights.",), ()))


def alarms() -> Iterator[Alarm]:
    plain = Alarm("tank-drain-due", "drain-due", "tank", "unacknowledged", "medium", AT_US, "Due.")
    yield plain
    yield replace(plain, state="shelved", shelved_until_us=AT_US)


def weeks() -> Iterator[Message]:
    """A week of which nothing is known, and one with a measured drain."""
    running = FakeRunning()
    log = running.week(Week.read("2026-W48"))
    yield week_message(TOPICS, running.site, log)
    water = Interval(0.9, 1.2, 1.6)
    traps = [replace(each, shed_kg=water, measured_kg=0.38, measured=1) for each in log.traps]
    yield week_message(TOPICS, running.site, replace(log, water_in_kg=water, traps=tuple(traps)))


def made() -> dict[str, list[Message]]:
    """Messages of every topic that the daemon sends, everything and nothing known."""
    refused = payloads.refusal_payload("trap is missing", b"{}", AT_US)
    unknown = replace(
        VIEW,
        due_p05_us=None,
        due_p50_us=None,
        due_p95_us=None,
        because=None,
        chance_stuck=0.1,
        counted_from_us=AT_US,
        questioned_kg=0.2,
    )
    return {
        "service": [
            outbox.service_message(TOPICS, "running", AT_US, AT_US),
            outbox.service_message(TOPICS, "gone", AT_US, None),
        ],
        "traps/<trap>": [outbox.trap_message(TOPICS, each) for each in (VIEW, unknown)],
        "outlets/<outlet>": [
            outbox.outlet_message(TOPICS, each) for each in (all_known(), nothing_known())
        ],
        "alarms/<alarm>": [outbox.alarm_message(TOPICS, each) for each in alarms()],
        "events": [
            outbox.event_message(TOPICS, TRANSITION),
            outbox.reminder_message(TOPICS, some_reminder()),
        ],
        "weekly": list(weeks()),
        "drains/refused": [Message(TOPICS.refused_drains, outbox.encode(refused))],
    }


MADE = made()


def test_every_topic_is_described_and_no_other() -> None:
    of_one = [name for name, each in vars(Topics).items() if isinstance(each, property)]
    real = {getattr(TOPICS, name) for name in of_one}
    real |= {TOPICS.trap("<trap>"), TOPICS.outlet("<outlet>"), TOPICS.alarm("<alarm>")}
    assert {name.removeprefix(f"{TOPICS.base}/") for name in real} == set(DOCUMENT)


@pytest.mark.parametrize("name", sorted(set(DOCUMENT) - {"drains"}))
def test_payloads_are_as_they_are_described(name: str) -> None:
    assert MADE[name]
    for message in MADE[name]:
        checked(message)


@pytest.mark.parametrize("name", sorted(set(DOCUMENT) - {"drains"}))
def test_every_type_that_is_described_comes_to_pass(name: str) -> None:
    """A description that allows more than there is would be out of date."""
    seen: set[tuple[int, str, str]] = set()
    for message in MADE[name]:
        topic, table = table_for(message)
        payload = json.loads(message.payload)
        seen |= {(topic.tables.index(table), *each) for each in flat(payload)}
        left = set(table.fields) - {each for each, _ in flat(payload)}
        seen |= {(topic.tables.index(table), each, "left out") for each in left}
    for number, table in enumerate(DOCUMENT[name].tables):
        for field, types in table.fields.items():
            for each in types:
                assert (number, field, each) in seen or (
                    each == "number" and (number, field, "whole number") in seen
                ), (field, each)


UNITS = {
    "_ml": "ml",
    "_c": "degC",
    "_k": "K",
    "_percent": "%",
    "_bar": "bar",
    "_g_m3": "g/m3",
    "_h": "h",
    "probability_due": "1",
    "chance_stuck": "1",
}


COUNTS = {"traps[].drains", "traps[].late"}


def test_every_number_has_the_unit_that_its_name_says() -> None:
    for topic in DOCUMENT.values():
        for table in topic.tables:
            for field, types in table.fields.items():
                if field in COUNTS:
                    assert table.units[field] == ""
                elif types & {"number", "whole number", "interval"}:
                    ends = [unit for end, unit in UNITS.items() if field.endswith(end)]
                    assert table.units[field] in ends, (topic.name, field)
                else:
                    assert table.units[field] == "", (topic.name, field)


# ---- what is taken in ----


def test_an_inbound_drain_may_hold_what_is_described_and_nothing_else() -> None:
    (table,) = DOCUMENT["drains"].tables
    whole = {
        "trap": "tank",
        "outcome": "partly",
        "volume_ml": 380.5,
        "at": "2026-12-01T09:00:00Z",
        "by": "AM",
        "look": "clear",
        "key": "b7",
    }
    assert set(whole) == set(table.fields)
    for name, found in flat(whole):
        assert fits(found, table.fields[name]), name
    drain, at_us, key = payloads.read_drain(json.dumps(whole).encode())
    assert drain == Drain("tank", "partly", 0.3805, "AM", "clear")
    assert (at_us, key) == (parse_rfc3339("2026-12-01T09:00:00Z"), "b7")
    for name in set(table.fields) - {"trap"}:
        less = {each: value for each, value in whole.items() if each != name}
        payloads.read_drain(json.dumps(less).encode())
        payloads.read_drain(json.dumps({**whole, name: None}).encode())
    with pytest.raises(JournalError, match="unknown key 'colour'"):
        payloads.read_drain(json.dumps({**whole, "colour": "red"}).encode())


@pytest.mark.parametrize("name", ["trap", "outcome", "volume_ml", "at", "by", "look", "key"])
def test_an_inbound_field_of_another_type_is_refused(name: str) -> None:
    odds: list[object] = [[], {}, True]
    for odd in odds:
        with pytest.raises(JournalError):
            payloads.read_drain(json.dumps({"trap": "tank", name: odd}).encode())


# ---- what a real daemon publishes ----


class Heard:
    """Stands where the link to the broker is."""

    def __init__(self) -> None:
        self.messages: list[Message] = []

    def publish_states(self, messages: Iterable[Message]) -> None:
        self.messages += messages

    def wake(self) -> None:
        pass


def test_all_that_a_daemon_publishes_in_two_hours_is_as_it_is_described(tmp_path: Path) -> None:
    text = SITE.replace('drain_at = "600 ml"', 'drain_at = "600 ml", holds_at_start = "650 ml"')
    # a flooded bowl: else a reminder waits until nobody draws air
    shop = site(text.replace('drain_at = "60 ml"', 'drain_at = "60 ml", holds_at_start = "120 ml"'))
    record = list(working(shop, 720, BEGUN_US + 50 * MINUTE_US))
    heard, clock = Heard(), HandClock(record[0][0])
    with Store.open(tmp_path / "shop.db", shop.channels) as store:
        shell = Shell(shop, clock, Played(record), store, TOPICS)
        shell.link = heard  # type: ignore[assignment]  # all that the shell asks of a link
        for number, (now_us, _) in enumerate(record):
            clock.wall_us = now_us
            shell.tick(now_us)
            if number == 60:
                shell.record(Shelve("riser-drain-due", 600.0, "AM"))
            if number == 90:
                shell.record(Drain("tank", volume_kg=0.6, by="AM"))
        messages = heard.messages + [each.message for each in store.pending(10_000)]
    assert record[1][0] - record[0][0] == PERIOD_US
    topics = {each.topic.removeprefix(f"{TOPICS.base}/").partition("/")[0] for each in messages}
    assert topics == {"traps", "outlets", "alarms", "events"}
    kinds = {json.loads(each.payload)["kind"] for each in messages if each.topic == TOPICS.events}
    assert {"drain-due", "opening-up"} <= kinds
    for message in messages:
        checked(message)
