"""The FastAPI application, built on a running daemon."""

from __future__ import annotations

import logging
from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from typing import Any

import anyio.to_thread
from fastapi import APIRouter, FastAPI, Request
from fastapi.exceptions import RequestValidationError
from fastapi.openapi.utils import get_openapi
from starlette.exceptions import HTTPException
from starlette.responses import Response
from starlette.routing import Match

from api import examples
from api.guard import Guard
from api.heads import Heads
from api.keys import Door
from api.pages import assets, line, pair, round, spray, week
from api.pages.problem_page import problem_page, wants_page
from api.problems import (
    Problem,
    ProblemOut,
    answered_by,
    problem_of_status,
    problem_response,
)
from api.routes import (
    alarms,
    dew_points,
    health,
    home,
    metrics,
    outlets,
    pairing,
    parts,
    plant,
    readings,
    stations,
    traps,
    weekly,
)
from api.validation import points_of
from daemon.errors import JournalError, KeyReusedError, StoreError
from daemon.views import Running

PREFIX = "/api/v1"
# Threads that run the handlers: each may wait for the store, and a Pi has little memory.
MOST_THREADS = 8

DESCRIPTION = """\
What gathers in the traps of a shop's air line, and how sure that is. Estimates advise; they never
replace opening the drain.

A number's unit is in its name, or in `unit` beside it. Times are RFC 3339 in UTC. An estimate is a
median (`p50`) with its 5 to 95 % interval. Errors are problem documents (RFC 9457).

While the API is bound to this machine's own address it asks nobody for a key. On any other address
writing needs one, and so does reading unless the site file opens it: `dripleg key` makes keys. Send
yours as `Authorization: Bearer <key>`. A write must say `content-type: application/json` and must
not come from a page of another origin; a request must name this machine in its Host header. No
answer grants another origin access.
"""
log = logging.getLogger(__name__)


def create_app(running: Running) -> FastAPI:
    """The application. It asks `running` for everything and keeps no state of its own."""
    app = FastAPI(
        title="dripleg",
        summary="Keeps watch over the water in a shop's compressed air",
        description=DESCRIPTION,
        version="1",
        openapi_url=f"{PREFIX}/openapi.json",
        # the framework's own documentation pages load scripts from other hosts
        docs_url=None,
        redoc_url=None,
        redirect_slashes=False,
        lifespan=_few_threads,
    )
    app.state.running = running
    app.state.door = Door(running)
    app.add_middleware(Guard, bound_to=running.site.api.host, door=app.state.door)
    app.add_middleware(Heads)  # the last that is added is the outermost
    app.add_exception_handler(Problem, _answer_problem)
    app.add_exception_handler(RequestValidationError, _answer_invalid)
    app.add_exception_handler(HTTPException, _answer_status)
    app.add_exception_handler(JournalError, _answer_journal)
    app.add_exception_handler(StoreError, _answer_store)
    everywhere = APIRouter(
        prefix=PREFIX, responses=answered_by("keys-needed", "wrong-host", "unexpected")
    )
    for module in (
        pairing,
        health,
        traps,
        outlets,
        dew_points,
        alarms,
        parts,
        plant,
        readings,
        stations,
        weekly,
    ):
        everywhere.include_router(module.router)
    app.include_router(everywhere)
    app.include_router(metrics.router)
    for shown in (home, round, spray, week, line, assets, pair):  # the pages for people
        app.include_router(shown.router)
    app.openapi = lambda: _openapi(app)  # type: ignore[method-assign]  # FastAPI's own way
    return app


@asynccontextmanager
async def _few_threads(_: FastAPI) -> AsyncIterator[None]:
    anyio.to_thread.current_default_thread_limiter().total_tokens = MOST_THREADS
    yield


def _openapi(app: FastAPI) -> dict[str, Any]:
    """The framework's description, with the problem document in place of its own error shape."""
    if not app.openapi_schema:
        described = get_openapi(
            title=app.title,
            version=app.version,
            summary=app.summary,
            description=app.description,
            routes=app.routes,
        )
        schemas = described.setdefault("components", {}).setdefault("schemas", {})
        problem = ProblemOut.model_json_schema(ref_template="#/components/schemas/{model}")
        schemas.update(problem.pop("$defs"))
        schemas["ProblemOut"] = problem
        described["components"]["securitySchemes"] = {
            "key": {
                "type": "http",
                "scheme": "bearer",
                "description": "a key that `dripleg key` made; on a loopback address none is asked",
            }
        }
        examples.put_in(described)
        described["security"] = [{}, {"key": []}]
        app.openapi_schema = described
    return app.openapi_schema


async def _answer_problem(request: Request, error: Exception) -> Response:
    assert isinstance(error, Problem)
    return _answer(request, error)


def _answer(request: Request, problem: Problem) -> Response:
    if wants_page(request):
        return problem_page(request, problem)
    return problem_response(problem, request.url.path)


async def _answer_invalid(request: Request, error: Exception) -> Response:
    assert isinstance(error, RequestValidationError)
    problem = Problem("invalid-request", points=points_of(error.errors()))
    return _answer(request, problem)


async def _answer_status(request: Request, error: Exception) -> Response:
    assert isinstance(error, HTTPException)
    path, detail, headers = request.url.path, str(error.detail), error.headers
    if error.status_code == 404:
        detail = f"nothing is at {path[:80]}"
    elif error.status_code == 405:
        detail = f"{request.method} is not possible here"
        headers = {"allow": ", ".join(_possible_methods(request))}
    return _answer(request, problem_of_status(error.status_code, detail, headers))


def _possible_methods(request: Request) -> list[str]:
    """What the address can do over all its routes; the router names the first route's only."""
    found = [
        method
        for method in ("GET", "POST")
        if any(
            route.matches({**request.scope, "method": method})[0] is Match.FULL
            for route in request.app.router.routes
        )
    ]
    return ["GET", "HEAD", *found[1:]] if "GET" in found else found


async def _answer_journal(request: Request, error: Exception) -> Response:
    kind = "key-reused" if isinstance(error, KeyReusedError) else "invalid-request"
    return _answer(request, Problem(kind, str(error)))


async def _answer_store(request: Request, error: Exception) -> Response:
    log.error("%s %r: %s", request.method, request.url.path, error)
    return _answer(request, Problem("log-unavailable", str(error)))
