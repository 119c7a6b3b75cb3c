"""The API's description of itself, and generated requests that hold it against the answers."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import pytest

from api.problems import KINDS, MEDIA_TYPE
from tests.api.client import Client


@pytest.fixture
def described(client: Client) -> dict[str, Any]:
    response = client.get("/api/v1/openapi.json")
    assert response.status_code == 200
    document: dict[str, Any] = response.json()
    return document


def operations(described: dict[str, Any]) -> Iterator[tuple[str, str, dict[str, Any]]]:
    for path, methods in described["paths"].items():
        for method, operation in methods.items():
            yield method, path, operation


def test_every_route_of_the_first_version_is_described(described: dict[str, Any]) -> None:
    assert sorted((method, path) for method, path, _ in operations(described)) == [
        ("get", "/api/v1/alarms"),
        ("get", "/api/v1/dew-points"),
        ("get", "/api/v1/forecasts"),
        ("get", "/api/v1/health"),
        ("get", "/api/v1/outlets"),
        ("get", "/api/v1/outlets/{outlet}/margin"),
        ("get", "/api/v1/pairing"),
        ("get", "/api/v1/plant"),
        ("get", "/api/v1/readings"),
        ("get", "/api/v1/reminders"),
        ("get", "/api/v1/site"),
        ("get", "/api/v1/stations"),
        ("get", "/api/v1/traps"),
        ("get", "/api/v1/traps/{trap}"),
        ("get", "/api/v1/traps/{trap}/drains"),
        ("get", "/api/v1/weekly/{week}"),
        ("get", "/metrics"),
        ("post", "/api/v1/alarms/{alarm}/acknowledge"),
        ("post", "/api/v1/alarms/{alarm}/shelve"),
        ("post", "/api/v1/alarms/{alarm}/unshelve"),
        ("post", "/api/v1/outlets/{outlet}/blotter"),
        ("post", "/api/v1/outlets/{outlet}/gauge"),
        ("post", "/api/v1/pairing"),
        ("post", "/api/v1/pairing/forget"),
        ("post", "/api/v1/sensors/{sensor}/salt-checks"),
        ("post", "/api/v1/stations/{station}/service"),
        ("post", "/api/v1/traps/{trap}/confirm"),
        ("post", "/api/v1/traps/{trap}/drains"),
        ("post", "/api/v1/traps/{trap}/drains/{seq}/undo"),
    ]


def test_every_operation_has_a_summary_and_a_description(described: dict[str, Any]) -> None:
    for method, path, operation in operations(described):
        assert operation["summary"], (method, path)
        assert operation["description"], (method, path)


def test_every_error_is_a_problem_document(described: dict[str, Any]) -> None:
    found = 0
    for method, path, operation in operations(described):
        for status, answer in operation["responses"].items():
            if int(status) < 400 or (path.endswith("/health") and status == "503"):
                continue
            found += 1
            assert list(answer["content"]) == [MEDIA_TYPE], (method, path, status)
            schema = answer["content"][MEDIA_TYPE]["schema"]
            assert schema == {"$ref": "#/components/schemas/ProblemOut"}
            for example in answer["content"][MEDIA_TYPE]["examples"].values():
                assert example["value"]["status"] == int(status)
    assert found > 20
    assert "HTTPValidationError" not in described["components"]["schemas"]


def test_what_can_be_sent_has_examples(described: dict[str, Any]) -> None:
    schemas = described["components"]["schemas"]
    assert {"outcome": "empty"} in schemas["DrainIn"]["examples"]
    assert {"by": "AM"} in schemas["AcknowledgeIn"]["examples"]


@pytest.mark.parametrize("number", [0, 1, 2])
def test_the_examples_are_taken(client: Client, described: dict[str, Any], number: int) -> None:
    example = described["components"]["schemas"]["DrainIn"]["examples"][number]
    assert client.post("/api/v1/traps/tank/drains", json=example).status_code == 201


def test_every_reference_is_defined(described: dict[str, Any]) -> None:
    schemas = described["components"]["schemas"]

    def references(node: object) -> Iterator[str]:
        if isinstance(node, dict):
            if isinstance(node.get("$ref"), str):
                yield node["$ref"]
            for child in node.values():
                yield from references(child)
        elif isinstance(node, list):
            for child in node:
                yield from references(child)

    for reference in set(references(described)):
        prefix, _, name = reference.rpartition("/")
        assert prefix == "#/components/schemas"
        assert name in schemas


def test_every_kind_of_problem_has_an_error_status() -> None:
    assert all(400 <= kind.status < 600 for kind in KINDS.values())


def test_what_stands_before_every_route_is_described_at_every_route(
    described: dict[str, Any],
) -> None:
    for method, path, operation in operations(described):
        expected = {"421", "500"}
        if method == "post":
            expected |= {"400", "403", "411", "413", "415", "422", "503"}
        assert expected <= set(operation["responses"]), (method, path)
