"""README and DEVELOPERS name only what exists, and their tables are those of the code.

`python -m tests.test_documents` writes README's table of defaults anew.
"""

from __future__ import annotations

import argparse
import json
import re
import shlex
import tomllib
from collections.abc import Iterator
from pathlib import Path

import pytest

import sensors.drivers  # noqa: F401  # fills the registry
from api.app import create_app
from api.models import AcknowledgeIn, DrainIn
from daemon.__main__ import parser
from daemon.outbox import Topics
from daemon.payloads import read_drain
from daemon.replay import FLOW_HEADER, OUTLETS_HEADER, TRANSITIONS_HEADER, TRAPS_HEADER
from daemon.site.default_tables import defaults_table
from daemon.site.reader import parse_site
from tests.api.fake import FakeRunning
from tests.tree import ROOT

DOCUMENTS = ("README.md", "DEVELOPERS.md")
TEXTS = {name: (ROOT / name).read_text(encoding="utf-8") for name in DOCUMENTS}
README = TEXTS["README.md"]
DEFAULTS = re.compile(r"(<!-- defaults -->\n)(.*?)(<!-- /defaults -->)", re.DOTALL)
PATH = re.compile(r"(?<![\w./<-])(?:(?:api|daemon|deploy|sensors|tests)/|\.ci/)(?:[\w./-]*[\w/])?")


def paths_in(text: str) -> Iterator[str]:
    """The project's own paths in a document."""
    yield from PATH.findall(text)
    yield from re.findall(r"\]\((?!https?:|#)([^)#]+)", text)


def section(title: str) -> str:
    """What stands under a heading of README."""
    return README.split(f"\n## {title}\n")[1].split("\n## ")[0]


def rows(text: str) -> Iterator[list[str]]:
    """The rows of a Markdown table, without its head."""
    lines = [line for line in text.splitlines() if line.startswith("|")]
    for line in lines[2:]:
        yield [cell.strip() for cell in line.strip("|").split("|")]


def commands_in(text: str) -> Iterator[list[str]]:
    """The shell commands of a document's indented blocks, continued lines joined."""
    joined = re.sub(r"\\\n\s*", "", text)
    for line in joined.splitlines():
        if line.startswith("    "):
            yield shlex.split(re.split(r" {3,}", line.strip())[0], comments=True)


# ---- files ----


@pytest.mark.parametrize("name", DOCUMENTS)
def test_files_named_in_the_documents_exist(name: str) -> None:
    found = set(paths_in(TEXTS[name]))
    assert len(found) > 4
    assert not [path for path in sorted(found) if not (ROOT / path).exists()]


def test_a_path_that_is_not_there_would_be_found() -> None:
    text = "see `daemon/nowhere.py`, tests/none and [that](deploy/gone.md), not `/dev/api/x`"
    assert set(paths_in(text)) == {"daemon/nowhere.py", "tests/none", "deploy/gone.md"}


def test_every_package_has_its_place_in_developers() -> None:
    places = set(paths_in(TEXTS["DEVELOPERS.md"]))
    for folder in ("daemon/moisture", "daemon/site", "daemon/store", "sensors", "api", "deploy"):
        assert f"{folder}/" in places


# ---- commands ----


def subparsers() -> dict[str, argparse.ArgumentParser]:
    """The commands of the real command line."""
    for action in parser()._actions:
        if isinstance(action, argparse._SubParsersAction):
            return dict(action.choices)
    raise AssertionError("the command line has no commands")


def spelled(name: str, command: argparse.ArgumentParser) -> str:
    """A command with its positional arguments, as README writes it."""
    given = [str(action.metavar) for action in command._actions if not action.option_strings]
    return " ".join(["dripleg", name, *given])


def options(command: argparse.ArgumentParser) -> set[str]:
    found = {each for action in command._actions for each in action.option_strings}
    return found - {"-h", "--help"}


def test_the_table_of_commands_is_the_command_line_s() -> None:
    told = {}
    for command, _, given in rows(section("Commands")):
        told[command.strip("`")] = set(re.findall(r"--[\w-]+", given))
    assert told == {spelled(name, each): options(each) for name, each in subparsers().items()}


@pytest.mark.parametrize("name", DOCUMENTS)
def test_dripleg_commands_in_the_documents_can_be_given(name: str) -> None:
    known = subparsers()
    for command in re.findall(r"`(?:[\w./]*/)?dripleg ([a-z]+)", TEXTS[name]):
        assert command in known
    for words in commands_in(TEXTS[name]):
        if words and Path(words[0]).name == "dripleg":
            parser().parse_args(words[1:])


def test_options_of_the_demo_are_those_of_deploy_demo() -> None:
    for option in re.findall(r"`(?:deploy/demo )?(--[\w-]+)", section("Two commands")):
        assert option in options(subparsers()["demo"])


# ---- the site file ----


def test_five_lines_are_a_site() -> None:
    (block,) = re.findall(r"```toml\n(.*?)```", README, re.DOTALL)
    assert len(block.splitlines()) == 5
    assert len(tomllib.loads(block)["sensor"]) == 2
    site = parse_site(block, "shop.toml")
    assert site.id == "shop"  # README names the database and the topics after it
    assert site.traps == ("tank",)
    assert site.line.compressor.running == "motor.contact"


def test_the_table_of_defaults_is_the_reader_s() -> None:
    found = DEFAULTS.search(README)
    assert found is not None
    assert found[2] == defaults_table(), "write it anew: python -m tests.test_documents"


# ---- API and MQTT ----


def test_the_table_of_the_api_is_the_api_s() -> None:
    described = create_app(FakeRunning()).openapi()
    real = {
        f"{method.upper()} {path}" for path, each in described["paths"].items() for method in each
    }
    told = {row[0].strip("`") for row in rows(section("The API"))}
    assert told == real | {"GET /"}


def test_query_parameters_named_for_readings_are_the_route_s() -> None:
    described = create_app(FakeRunning()).openapi()
    real = {each["name"] for each in described["paths"]["/api/v1/readings"]["get"]["parameters"]}
    (row,) = (row for row in rows(section("The API")) if "readings" in row[0])
    assert set(re.findall(r"[?&](\w+)=", row[1])) == real


def test_what_curl_sends_is_taken() -> None:
    sent = 0
    for words in commands_in(README):
        if not words or words[0] != "curl" or "-d" not in words:
            continue
        sent += 1
        model = DrainIn if any("/drains" in word for word in words) else AcknowledgeIn
        model.model_validate_json(words[words.index("-d") + 1])
        assert "content-type: application/json" in words
    assert sent == 2


def test_the_table_of_topics_is_the_outbox_s() -> None:
    topics = Topics("x")
    real = [topics.service, topics.trap("<trap>"), topics.outlet("<outlet>")]
    real += [topics.alarm("<alarm>"), topics.events, topics.weekly]
    real += [topics.drains, topics.refused_drains]
    told = [f"x/{row[0].strip('`')}" for row in rows(section("MQTT"))]
    assert told == real


def test_what_mosquitto_pub_sends_is_taken() -> None:
    (words,) = (words for words in commands_in(README) if words[:1] == ["mosquitto_pub"])
    message = words[words.index("-m") + 1]
    drain, _, key = read_drain(message.encode())
    assert drain.trap == "tank"
    assert key == json.loads(message)["key"]


# ---- recorded data ----


def test_the_columns_of_a_replay_are_those_written() -> None:
    told = {row[0].split(",")[0].strip("`"): row[1] for row in rows(section("Recorded data"))}
    assert f"`{TRAPS_HEADER}`" in told["traps.csv"]
    assert f"`{OUTLETS_HEADER}`" in told["outlets.csv"]
    assert f"`{FLOW_HEADER}`" in told["flow.csv"]
    assert f"`{TRANSITIONS_HEADER}`" in told["transitions.csv"]


# ---- cautions ----


def test_the_cautions_come_before_anything_is_installed() -> None:
    assert README.index("## Read this first") < README.index("## Two commands")
    words = " ".join(section("Read this first").split())
    for caution in (
        "unless rated for that zone",
        "isolate and lock it before touching",
        "put no valve between it and its safety valve",
        "rated above the safety valve's setting",
        "Crack a drain valve slowly",
        "Vent before unscrewing a bowl",
        "an isolated auxiliary contact, fitted by an electrician",
        "never to the drain",
        "Not for breathing air",
        "Estimates advise",
    ):
        assert caution in words


def write_defaults() -> None:
    """Put the table of defaults into README."""
    table = defaults_table()
    text = DEFAULTS.sub(lambda found: f"{found[1]}{table}{found[3]}", README)
    (ROOT / "README.md").write_text(text, encoding="utf-8")


if __name__ == "__main__":
    write_defaults()
