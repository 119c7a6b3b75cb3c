"""How a route reaches the running daemon."""

from __future__ import annotations

from typing import Annotated

from fastapi import Depends, Request

from daemon.views import Running


async def _running(request: Request) -> Running:
    running: Running = request.app.state.running
    return running


# A coroutine, so that reaching it costs no hop to a worker thread.
TheDaemon = Annotated[Running, Depends(_running)]
