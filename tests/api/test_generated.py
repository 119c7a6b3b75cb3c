"""Requests generated from the API's own description, valid and broken, over a real socket."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import pytest
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st

from api.app import create_app
from api.server import ApiServer
from tests.api.fake import FakeRunning

schemathesis = pytest.importorskip("schemathesis")

CHECKS = (
    "not_a_server_error",
    "status_code_conformance",
    "content_type_conformance",
    "response_schema_conformance",
    "negative_data_rejection",
)
# names that exist, so that not every generated request ends at 404
KNOWN = {
    "trap": ["tank", "riser"],
    "alarm": ["riser-drain-due", "tank-drain-due"],
    "outlet": ["spray-gun"],
}
CHANNELS = ["tank-gauge.pressure", "motor.contact"]


@pytest.fixture(scope="module")
def described() -> Iterator[Any]:
    server = ApiServer(create_app(FakeRunning()), "127.0.0.1", 0)
    server.start()
    yield schemathesis.openapi.from_url(server.url + "api/v1/openapi.json")
    server.stop()


# nothing can be sent wrongly to these: any text is a trap's name, known or not
WITHOUT_BROKEN = [
    ("/api/v1/health", "GET"),
    ("/api/v1/site", "GET"),
    ("/api/v1/traps", "GET"),
    ("/api/v1/traps/{trap}", "GET"),
    ("/api/v1/outlets", "GET"),
]
OPERATIONS = [
    ("/api/v1/traps/{trap}/drains", "GET"),
    ("/api/v1/traps/{trap}/drains", "POST"),
    ("/api/v1/outlets/{outlet}/margin", "GET"),
    ("/api/v1/outlets/{outlet}/blotter", "POST"),
    ("/api/v1/outlets/{outlet}/gauge", "POST"),
    ("/api/v1/alarms", "GET"),
    ("/api/v1/alarms/{alarm}/acknowledge", "POST"),
    ("/api/v1/readings", "GET"),
]


@pytest.mark.parametrize(
    ("path", "method", "mode"),
    [(*operation, "POSITIVE") for operation in WITHOUT_BROKEN + OPERATIONS]
    + [(*operation, "NEGATIVE") for operation in OPERATIONS],
)
def test_no_generated_request_finds_a_server_error_or_an_undocumented_answer(
    described: Any, path: str, method: str, mode: str
) -> None:
    checks = [getattr(schemathesis.checks, name) for name in CHECKS]
    operation = described[path][method]
    cases = operation.as_strategy(generation_mode=schemathesis.GenerationMode[mode])

    @settings(
        max_examples=40,
        deadline=None,
        derandomize=True,
        database=None,
        phases=[Phase.explicit, Phase.generate],
        suppress_health_check=list(HealthCheck),
    )
    @given(case=cases, data=st.data())
    def ask(case: Any, data: st.DataObject) -> None:
        if mode == "POSITIVE":
            for name in case.path_parameters or {}:
                case.path_parameters[name] = data.draw(st.sampled_from(KNOWN[name]))
            if "channel" in (case.query or {}):
                case.query["channel"] = data.draw(st.sampled_from(CHANNELS))
        case.call_and_validate(checks=checks, timeout=10)

    ask()
