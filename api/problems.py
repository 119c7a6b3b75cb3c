"""Problem documents (RFC 9457): every error that the API answers with, in one shape."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass
from http import HTTPStatus
from typing import Any
from urllib.parse import quote

from pydantic import BaseModel, Field
from starlette.responses import Response

MEDIA_TYPE = "application/problem+json"


@dataclass(frozen=True, slots=True)
class Kind:
    """One kind of problem: its status, its title, and what to do, whoever meets it."""

    status: int
    title: str
    advice: str


KINDS: dict[str, Kind] = {
    "unreadable-request": Kind(400, "The request cannot be read", "Send one JSON object in UTF-8."),
    "cross-site-write": Kind(
        403,
        "A page from elsewhere may not write here",
        "Record drains and acknowledgements from this daemon's own pages or from a program "
        "that sends no Origin header.",
    ),
    "keys-needed": Kind(
        401,
        "This needs a key",
        "This API listens on an address that others can reach. On the machine that it runs on "
        "`dripleg key SITE make` makes a key: open its link on a phone, or send it from a program "
        "as Authorization: Bearer <key>.",
    ),
    "key-unknown": Kind(
        401,
        "This key opens nothing",
        "It was revoked, or never made here. On the machine that the API runs on "
        "`dripleg key SITE list` shows those that are good, and make another one.",
    ),
    "key-may-not": Kind(
        403,
        "This key may not do that",
        "Keys are made for what they are needed for. On the machine that the API runs on "
        "`dripleg key SITE make --may` makes one that may do more.",
    ),
    "too-many-tries": Kind(
        429, "Too many wrong keys", "Wait as long as Retry-After says, and look at the key."
    ),
    "not-found": Kind(
        404, "Nothing at this address", "See /api/v1/openapi.json for what there is."
    ),
    "unknown-trap": Kind(404, "No trap of that name", "See /api/v1/traps for the names."),
    "unknown-week": Kind(
        404,
        "No such week",
        "Write an ISO week that has begun, like 2026-W49: it goes from Monday to Sunday.",
    ),
    "unknown-outlet": Kind(404, "No outlet of that name", "See /api/v1/outlets for the names."),
    "unknown-alarm": Kind(404, "No alarm of that name", "See /api/v1/alarms?all=true."),
    "unknown-sensor": Kind(
        404, "No humidity sensor of that name", "See the sensors in /api/v1/site."
    ),
    "unknown-station": Kind(404, "No station of that name", "See the stations in /api/v1/site."),
    "unknown-channel": Kind(404, "No channel of that name", "See the channels in /api/v1/site."),
    "wrong-method": Kind(405, "Not possible at this address", "See the Allow header."),
    "nothing-to-acknowledge": Kind(
        409,
        "The alarm waits for nobody",
        "Only an alarm that is unacknowledged or returned unacknowledged can be acknowledged.",
    ),
    "nothing-to-confirm": Kind(
        409,
        "No volume of this trap waits to be confirmed",
        "Only a measured volume far from what was expected waits; see questioned_ml in the trap.",
    ),
    "cannot-be-undone": Kind(
        409,
        "The drain cannot be taken back",
        "A drain can be taken back for ten minutes after it was recorded, with the same initials.",
    ),
    "key-reused": Kind(
        409,
        "This key was used before, for something else",
        "Give every new entry a key of its own; the same one is for sending the same entry again.",
    ),
    "cannot-be-shelved": Kind(
        409,
        "The alarm cannot be put off",
        "It says nothing as it is: what it watches is switched off or out of use.",
    ),
    "not-shelved": Kind(409, "The alarm is not put off", "There is nothing to end."),
    "no-length": Kind(411, "The length of the body is not said", "Send a Content-Length header."),
    "too-large": Kind(
        413, "The body is too large", "A drain or an acknowledgement is a few lines."
    ),
    "not-json": Kind(415, "The body is not JSON", "Send content-type: application/json."),
    "not-a-form": Kind(
        415, "The body is not a form", "Programs write to /api/v1/, in JSON; pages send forms."
    ),
    "wrong-host": Kind(
        421,
        "Asked under a name that is not this machine's",
        "Use the machine's own name or its address: a name from the internet that points here "
        "may be somebody else's page trying to look in.",
    ),
    "invalid-request": Kind(422, "The request cannot be taken", "Correct it and send it again."),
    "unexpected": Kind(
        500,
        "Something went wrong inside dripleg",
        "The daemon's log has the details. If you were recording something, look whether it "
        "stands there before you send it again.",
    ),
    "log-unavailable": Kind(
        503,
        "The log cannot be read or written",
        "Look at /api/v1/health and at the disk; try again.",
    ),
    "no-estimate-yet": Kind(
        503, "There is no estimate yet", "Ask again after the next sampling period."
    ),
}
# what else may be said wherever a key is asked for
WITH_KEYS = ("key-unknown", "key-may-not", "too-many-tries")
_BY_STATUS = {
    400: "unreadable-request", 404: "not-found", 405: "wrong-method", 413: "too-large"
}  # fmt: skip


@dataclass(frozen=True, slots=True)
class Point:
    """One thing wrong in a request: where, the value found, and what to send instead."""

    where: str  # "body.volume_ml", "query.from"
    value: str
    remedy: str

    def __str__(self) -> str:
        found = f" = {self.value}" if self.value else ""
        return f"{self.where}{found}: {self.remedy}"


class Problem(Exception):
    """Raised by a route; answered as a problem document."""

    def __init__(
        self,
        kind: str,
        detail: str = "",
        points: Sequence[Point] = (),
        headers: Mapping[str, str] | None = None,
    ) -> None:
        self.kind = kind
        self.points = tuple(points)
        self.detail = detail or "; ".join(str(point) for point in points)
        self.headers = dict(headers or {})
        super().__init__(f"{kind}: {self.detail}")


class PointOut(BaseModel):
    """One thing wrong in the request."""

    where: str = Field(examples=["body.volume_ml"])
    value: str = Field(description="as it was sent, shortened", examples=["-5"])
    remedy: str = Field(examples=["a volume is 0 or more"])


class ProblemOut(BaseModel):
    """A problem document, RFC 9457."""

    type: str = Field(
        description="which kind of problem; a page at this address says more",
        json_schema_extra={"format": "uri-reference"},
        examples=["/problems/unknown-trap"],
    )
    title: str = Field(examples=["No trap of that name"])
    status: int = Field(examples=[404])
    detail: str = Field(description="what is wrong here, with the value, and what to do")
    instance: str = Field(
        description="the address that was asked for",
        json_schema_extra={"format": "uri-reference"},
        examples=["/api/v1/traps/attic"],
    )
    errors: list[PointOut] | None = Field(
        default=None, description="each point, where a request has several"
    )


def problem_response(problem: Problem, path: str) -> Response:
    """The problem as an answer to a request for `path`."""
    kind = KINDS[problem.kind]
    document: dict[str, Any] = {
        "type": f"/problems/{problem.kind}",
        "title": kind.title,
        "status": kind.status,
        "detail": f"{problem.detail.rstrip('.')}. {kind.advice}" if problem.detail else kind.advice,
        "instance": quote(path, safe="/:@!$&'()*+,;=~-._", errors="replace"),
    }
    if problem.points:
        document["errors"] = [asdict(point) for point in problem.points]
    # What was sent may hold a lone surrogate, which UTF-8 cannot carry; written as its JSON
    # escape it can.
    body = json.dumps(document, ensure_ascii=False).encode("utf-8", "backslashreplace")
    return Response(body, kind.status, headers=problem.headers, media_type=MEDIA_TYPE)


def problem_of_status(status: int, detail: str, headers: Mapping[str, str] | None) -> Problem:
    """The problem for a bare HTTP status that the framework raised."""
    kind = _BY_STATUS.get(
        status, "unexpected" if status >= HTTPStatus.INTERNAL_SERVER_ERROR else ""
    )
    return Problem(kind or "unreadable-request", detail, headers=headers)


# What whoever writes may be answered, whatever they write.
ON_WRITING = (
    "unreadable-request",
    "cross-site-write",
    "keys-needed",
    "no-length",
    "too-large",
    "not-json",
    "invalid-request",
    "log-unavailable",
)


def answered_by(*kinds: str) -> dict[int | str, dict[str, Any]]:
    """The `responses` of a route that may answer with these kinds of problem, for OpenAPI."""
    answers: dict[int | str, dict[str, Any]] = {}
    if "keys-needed" in kinds:
        kinds += WITH_KEYS
    if "not-json" in kinds:  # it writes
        kinds += ("key-reused",)
    for name in kinds:
        kind = KINDS[name]
        answer = answers.setdefault(
            kind.status,
            {
                "description": "",
                "content": {
                    MEDIA_TYPE: {
                        "schema": {"$ref": "#/components/schemas/ProblemOut"},
                        "examples": {},
                    }
                },
            },
        )
        text = f"{kind.title}. {kind.advice}"
        answer["description"] = f"{answer['description']} {text}".strip()
        answer["content"][MEDIA_TYPE]["examples"][name] = {
            "value": {
                "type": f"/problems/{name}",
                "title": kind.title,
                "status": kind.status,
                "detail": kind.advice,
                "instance": "/api/v1/",
            }
        }
    return answers
