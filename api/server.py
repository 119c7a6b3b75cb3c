"""The HTTP server: uvicorn in a thread of its own, started and stopped by the daemon."""

from __future__ import annotations

import errno
import logging
import socket
import threading

import uvicorn
from fastapi import FastAPI

from daemon.errors import DriplegError

START_WITHIN_S = 20.0
FINISH_WITHIN_S = 3  # for answers on their way when the server stops
JOIN_WITHIN_S = 2.0  # for its thread after that
log = logging.getLogger(__name__)


class ServerError(DriplegError):
    """The API cannot listen, or does not start or stop."""


class _Uvicorn(uvicorn.Server):
    """Says when it has begun to listen."""

    def __init__(self, config: uvicorn.Config) -> None:
        super().__init__(config)
        self.settled = threading.Event()  # it listens, or never will

    async def startup(self, sockets: list[socket.socket] | None = None) -> None:
        await super().startup(sockets)
        self.settled.set()


class ApiServer:
    """Serves an application on host and port; port 0 takes a free one."""

    def __init__(self, app: FastAPI, host: str, port: int) -> None:
        self._host = host
        self._port = port
        # log_config=None: uvicorn's few messages go through the daemon's own logging. Forwarded
        # headers are not believed: nothing stands before this server.
        config = uvicorn.Config(
            app,
            http="h11",
            ws="none",
            loop="asyncio",
            log_config=None,
            log_level="warning",
            access_log=False,
            proxy_headers=False,
            server_header=False,
            timeout_graceful_shutdown=FINISH_WITHIN_S,
        )
        self._uvicorn = _Uvicorn(config)
        self._thread: threading.Thread | None = None

    @property
    def port(self) -> int:
        """The port that is listened on; the one asked for until started."""
        return self._port

    @property
    def url(self) -> str:
        """Where a browser on this machine finds it."""
        host = {"0.0.0.0": "127.0.0.1", "::": "::1", "": "127.0.0.1"}.get(self._host, self._host)
        return f"http://{f'[{host}]' if ':' in host else host}:{self._port}/"

    def start(self) -> None:
        """Listen, and return once requests are answered. ServerError says why it cannot."""
        if self._thread is not None:
            raise ServerError("the API server was started before; make a new one")
        listener = _listen(self._host, self._port)
        self._port = listener.getsockname()[1]
        # daemon=True: if the daemon dies of an error, this thread must not keep the process alive
        self._thread = threading.Thread(
            target=self._serve, args=(listener,), name="api", daemon=True
        )
        self._thread.start()
        self._uvicorn.settled.wait(START_WITHIN_S)
        if not self._uvicorn.started:
            self.stop()
            raise ServerError(f"the API did not start on {self.url}; the log says why")
        log.debug("API and page on %s", self.url)

    def _serve(self, listener: socket.socket) -> None:
        try:
            self._uvicorn.run(sockets=[listener])
        except SystemExit:
            log.error("the API server could not start")  # uvicorn has logged why
        except Exception:
            log.exception("the API server stopped by itself")
        finally:
            listener.close()
            self._uvicorn.settled.set()

    def stop(self) -> None:
        """Finish the answers on their way, then stop and join. May be called twice."""
        if self._thread is None:
            return
        self._uvicorn.should_exit = True
        self._thread.join(FINISH_WITHIN_S + JOIN_WITHIN_S)
        if self._thread.is_alive():
            self._uvicorn.force_exit = True
            self._thread.join(JOIN_WITHIN_S)
        if self._thread.is_alive():
            raise ServerError("the API server did not stop; a request does not come to an end")


def _listen(host: str, port: int) -> socket.socket:
    try:
        family, kind, proto, _, address = socket.getaddrinfo(
            host or "0.0.0.0", port, type=socket.SOCK_STREAM, flags=socket.AI_PASSIVE
        )[0]
    except socket.gaierror as error:
        raise ServerError(
            f'[api] host = "{host}": no such address ({error.strerror}); write an address of '
            "this machine, like 127.0.0.1"
        ) from error
    listener = socket.socket(family, kind, proto)
    try:
        # so that a restart need not wait for the last connections to time out
        listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        listener.bind(address)
        listener.listen(128)
    except OSError as error:
        listener.close()
        raise ServerError(_why_not(host, port, error)) from error
    return listener


def _why_not(host: str, port: int, error: OSError) -> str:
    if error.errno == errno.EADDRINUSE:
        return (
            f"the API cannot listen on {host} port {port}: another program does already, perhaps "
            f"a second dripleg. `ss -ltnp sport = :{port}` names it; stop it, or give another "
            "port in [api]"
        )
    if error.errno == errno.EADDRNOTAVAIL:
        return (
            f'[api] host = "{host}" is not an address of this machine; write one of its own '
            "(`ip address` lists them), or 127.0.0.1"
        )
    if error.errno == errno.EACCES:
        return (
            f"the API may not listen on {host} port {port}: ports below 1024 are for root; give "
            "another port in [api], like 8080"
        )
    return f"the API cannot listen on {host} port {port}: {error.strerror}"
