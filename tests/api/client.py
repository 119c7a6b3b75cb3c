"""A plain client for an application: no server, no sockets, a request at a time."""

from __future__ import annotations

import asyncio
from typing import Any

import httpx
from fastapi import FastAPI

from api.app import create_app
from tests.api.fake import FakeRunning

MEDIA_TYPE = "application/problem+json"


class Client:
    """Asks an application. Errors inside it come back as answers, as they do over a socket."""

    def __init__(self, app: FastAPI, host: str = "127.0.0.1:8080") -> None:
        self._app = app
        self._base = f"http://{host}"

    def request(self, method: str, path: str, **options: Any) -> httpx.Response:
        async def ask() -> httpx.Response:
            transport = httpx.ASGITransport(self._app, raise_app_exceptions=False)
            async with httpx.AsyncClient(transport=transport, base_url=self._base) as client:
                return await client.request(method, path, **options)

        return asyncio.run(ask())

    def get(self, path: str, **options: Any) -> httpx.Response:
        return self.request("GET", path, **options)

    def post(self, path: str, **options: Any) -> httpx.Response:
        return self.request("POST", path, **options)


def client_of(running: FakeRunning, host: str = "127.0.0.1:8080") -> Client:
    return Client(create_app(running), host)


def problem_of(response: httpx.Response, status: int, kind: str) -> dict[str, Any]:
    """The problem document of an answer, checked for its form (RFC 9457, section 3.1)."""
    assert response.status_code == status, response.text
    assert response.headers["content-type"] == MEDIA_TYPE
    document: dict[str, Any] = response.json()
    assert document["type"] == f"/problems/{kind}"
    assert document["status"] == status
    assert document["title"]
    assert document["detail"]
    assert document["instance"] == response.request.url.raw_path.decode().partition("?")[0]
    return document
