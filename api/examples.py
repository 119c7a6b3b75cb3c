"""Examples for the API's description: answers that were really given (`api/examples.json`)."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

_FILE = Path(__file__).with_suffix(".json")
_METRICS = """\
# TYPE dripleg_trap_content_litres gauge
# UNIT dripleg_trap_content_litres litres
# HELP dripleg_trap_content_litres Water in the trap.
dripleg_trap_content_litres{trap="tank",bound="p05"} 0.3
dripleg_trap_content_litres{trap="tank",bound="p50"} 0.41
dripleg_trap_content_litres{trap="tank",bound="p95"} 0.56
# EOF
"""
_PARAMETERS: dict[str, Any] = {
    "trap": "tank",
    "seq": 41,
    "outlet": "spray-gun",
    "alarm": "tank-drain-due",
    "station": "riser",
    "sensor": "intake-air",
    "all": True,
    "units": "site",
}


def put_in(described: dict[str, Any]) -> None:
    """Give every answer and every parameter of a description its example."""
    answers = json.loads(_FILE.read_text(encoding="utf-8"))
    for path, methods in described["paths"].items():
        for method, operation in methods.items():
            for parameter in operation.get("parameters", ()):
                name = parameter["name"]
                if name in _PARAMETERS and "examples" not in parameter["schema"]:
                    parameter.setdefault("example", _PARAMETERS[name])
            for status, answer in operation["responses"].items():
                example = answers.get(f"{method} {path} {status}")
                for kind, content in answer.get("content", {}).items():
                    if kind == "application/json" and example is not None:
                        content["example"] = example
                    elif path == "/metrics" and kind.startswith("application/openmetrics"):
                        content["example"] = _METRICS
