"""The examples in the API's description are answers that were really given.

`python -m tests.api.test_examples` writes `api/examples.json` anew.
"""

from __future__ import annotations

import json
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from api.app import create_app
from daemon.clock import HOUR_US, MINUTE_US, SECOND_US
from daemon.foresight import Score
from daemon.keys import ApiKey, digest
from daemon.views import DewPointView, SeriesOfReadings
from tests.api.client import Client, client_of
from tests.api.fake import NOW_US, FakeRunning, a_site
from tests.api.test_stations import INTAKE
from tests.tree import ROOT

FILE = ROOT / "api" / "examples.json"
KEY = "k7f3q2mz.0mG1i7mXo0c0JY3Q2n1zq3o2kq8c9b4r"
CHANNEL = "tank-gauge.pressure"
DRAINS = "/traps/{trap}/drains"
# what is asked in turn: the operation, its parts of the address, and the query or the body
ASKED: list[tuple[str, str, str, Any]] = [
    ("get", "/pairing", "", None),
    ("post", "/pairing", "", {"key": KEY}),
    ("get", "/health", "", None),
    ("get", "/site", "", None),
    ("get", "/traps", "", None),
    ("get", "/traps/{trap}", "tank", None),
    ("post", DRAINS, "tank", {"volume_ml": 380, "by": "AM", "look": "clear", "key": "a1"}),
    ("post", DRAINS, "tank", {"volume_ml": 380, "by": "AM", "look": "clear", "key": "a1"}),
    ("get", DRAINS, "tank", None),
    ("post", f"{DRAINS}/{{seq}}/undo", "tank 1", {"by": "AM"}),
    ("post", f"{DRAINS}/{{seq}}/undo", "tank 1", {"by": "AM"}),
    ("post", "/traps/{trap}/confirm", "riser", {"by": "AM"}),
    ("get", "/outlets", "", None),
    ("get", "/outlets/{outlet}/margin", "spray-gun", "surface_c=18.5"),
    ("post", "/outlets/{outlet}/blotter", "spray-gun", {"result": "clean", "key": "b1"}),
    ("post", "/outlets/{outlet}/blotter", "spray-gun", {"result": "clean", "key": "b1"}),
    ("post", "/outlets/{outlet}/gauge", "spray-gun", {"spread_k": 4.2, "key": "g1"}),
    ("post", "/outlets/{outlet}/gauge", "spray-gun", {"spread_k": 4.2, "key": "g1"}),
    ("get", "/dew-points", "", None),
    ("get", "/alarms", "", None),
    ("post", "/alarms/{alarm}/acknowledge", "riser-drain-due", {"by": "AM"}),
    ("post", "/alarms/{alarm}/shelve", "riser-drain-due", {"for": "2 h", "by": "AM", "key": "s1"}),
    ("post", "/alarms/{alarm}/shelve", "riser-drain-due", {"for": "2 h", "by": "AM", "key": "s1"}),
    ("post", "/alarms/{alarm}/unshelve", "riser-drain-due", {"by": "AM", "key": "u1"}),
    ("post", "/alarms/{alarm}/unshelve", "riser-drain-due", {"by": "AM", "key": "u1"}),
    ("post", "/stations/{station}/service", "intake", {"what": "compressor serviced", "key": "v1"}),
    ("post", "/stations/{station}/service", "intake", {"what": "compressor serviced", "key": "v1"}),
    (
        "post",
        "/sensors/{sensor}/salt-checks",
        "intake-air",
        {"reads_percent": 77.1, "true_percent": 75.4},
    ),
    ("get", "/plant", "", None),
    ("get", "/reminders", "", None),
    ("get", "/forecasts", "", None),
    ("get", "/readings", "", f"channel={CHANNEL}"),
    ("get", "/stations", "", None),
    ("get", "/weekly/{week}", "2026-W48", None),
]


def a_daemon() -> FakeRunning:
    """One of everything."""
    running = FakeRunning(site=a_site("0.0.0.0"))
    may = frozenset({"read", "record", "service"})
    made = ApiKey("k7f3q2mz", "paint booth tablet", may, NOW_US - 48 * HOUR_US)  # type: ignore[arg-type]  # scopes
    running.kept_keys.keys[made.id] = (made, digest(KEY.partition(".")[2]))
    running.views[1] = replace(running.views[1], questioned_kg=0.26)
    running.shown_stations = [INTAKE]
    running.shown_dew_points = [
        DewPointView("riser", "cell", NOW_US, 8e5, 271.15, 276.35, 285.0, "")
    ]
    running.shown_scores = [
        Score("tank", NOW_US - 40 * HOUR_US, NOW_US - 6 * HOUR_US, NOW_US, NOW_US + HOUR_US, NOW_US)
    ]
    times = NOW_US - 30 * SECOND_US + 10 * SECOND_US * np.arange(3)
    running.recorded[CHANNEL] = SeriesOfReadings(
        CHANNEL, times, np.array([7.2e5, np.nan, 7.1e5]), ("", "no answer", "")
    )
    running.said = "tank: you measured 380 ml, expected 410 ml (300 to 560 ml)."
    return running


def recorded() -> dict[str, Any]:
    """Every answer, by operation and status."""
    running = a_daemon()
    client = client_of(running, "192.168.1.20:8080")
    found: dict[str, Any] = {}
    for method, template, parts, sent in ASKED:
        answer = _answer(client, method, template, parts.split(), sent)
        found[f"{method} /api/v1{template} {answer.status_code}"] = answer.json()
        if template.endswith("/shelve"):
            running.tick()
            running.clock.time_us += MINUTE_US
    running.problems = ("tank-gauge.pressure: no answer",)
    answer = _answer(client, "get", "/health", [], None)
    found[f"get /api/v1/health {answer.status_code}"] = answer.json()
    return found


def _answer(client: Client, method: str, template: str, parts: list[str], sent: Any) -> Any:
    path = "/api/v1"
    for step in template.split("/")[1:]:
        path += f"/{parts.pop(0) if step.startswith('{') else step}"
    headers = {"authorization": f"Bearer {KEY}"}
    if method == "get":
        return client.get(f"{path}?{sent}" if sent else path, headers=headers)
    return client.post(path, json=sent, headers=headers)


@pytest.fixture(scope="module")
def described() -> Any:
    return create_app(FakeRunning()).openapi()


def test_the_examples_are_answers_as_they_are_given() -> None:
    written = json.loads(FILE.read_text(encoding="utf-8"))
    assert written == recorded(), "write them anew: python -m tests.api.test_examples"


def test_every_answer_and_every_parameter_has_an_example(described: Any) -> None:
    for path, methods in described["paths"].items():
        for method, operation in methods.items():
            for parameter in operation.get("parameters", ()):
                assert _has_example(described, parameter), (method, path, parameter["name"])
            for status, answer in operation["responses"].items():
                for content in answer.get("content", {}).values():
                    assert "example" in content or "examples" in content, (method, path, status)


def test_every_body_has_an_example(described: Any) -> None:
    for path, methods in described["paths"].items():
        for method, operation in methods.items():
            if "requestBody" in operation:
                schema = operation["requestBody"]["content"]["application/json"]["schema"]
                choices = [schema, *schema.get("anyOf", ())]
                names = [each["$ref"].rpartition("/")[2] for each in choices if "$ref" in each]
                (name,) = names
                assert described["components"]["schemas"][name]["examples"], (method, path)


def _has_example(described: Any, parameter: Any) -> bool:
    schema = parameter["schema"]
    return any(key in each for each in (parameter, schema) for key in ("example", "examples"))


def write() -> None:
    """Put what is answered now into the file."""
    text = json.dumps(recorded(), indent=1, ensure_ascii=False)
    FILE.write_text(f"{text}\n", encoding="utf-8")


if __name__ == "__main__":
    write()
