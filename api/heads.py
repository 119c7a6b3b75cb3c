"""HEAD, wherever there is a GET: the same answer, checks and headers, without its body.

Monitoring tools ask with HEAD. RFC 9110, section 9.3.2, asks for the header fields that a GET would
have been answered with, so that the answer is made in full (its length is among them) and only its
bytes are kept back.
"""

from __future__ import annotations

from starlette.types import ASGIApp, Message, Receive, Scope, Send


class Heads:
    """ASGI middleware around everything else, keys and refusals among it."""

    def __init__(self, app: ASGIApp) -> None:
        self._app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] != "http" or scope["method"] != "HEAD":
            await self._app(scope, receive, send)
            return

        async def send_without_body(message: Message) -> None:
            if message["type"] == "http.response.body":
                message = {**message, "body": b""}
            await send(message)

        # a copy: the server goes by its own scope in what it puts on the wire
        await self._app({**scope, "method": "GET"}, receive, send_without_body)
