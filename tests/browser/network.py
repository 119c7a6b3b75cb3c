"""A wire between a browser and a server that a test can cut, or let lose answers."""

from __future__ import annotations

import contextlib
import selectors
import socket
import threading
from typing import Literal

Fate = Literal["carries", "is cut", "loses answers"]


class Wire:
    """Carries connections to a port of this machine. `lost` counts the answers that it lost."""

    def __init__(self, to_port: int) -> None:
        self._to_port = to_port
        self.fate: Fate = "carries"
        self.lost = 0
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.port: int = self._listener.getsockname()[1]
        self._open: set[socket.socket] = set()
        self._thread = threading.Thread(target=self._listen, daemon=True)
        self._thread.start()

    def cut(self) -> None:
        """From now on nothing goes through, nor on connections that are open."""
        self.fate = "is cut"
        for each in list(self._open):
            _shut(each)

    def close(self) -> None:
        """Stop listening."""
        self.cut()
        _shut(self._listener)
        self._listener.close()
        self._thread.join(5.0)

    def _listen(self) -> None:
        while True:
            try:
                near, _ = self._listener.accept()
            except OSError:
                return
            threading.Thread(target=self._carry, args=(near,), daemon=True).start()

    def _carry(self, near: socket.socket) -> None:
        with near:
            if self.fate == "is cut":
                return
            with socket.create_connection(("127.0.0.1", self._to_port)) as far:
                self._open |= {near, far}
                try:
                    self._exchange(near, far)
                except OSError:
                    pass
                finally:
                    self._open -= {near, far}

    def _exchange(self, near: socket.socket, far: socket.socket) -> None:
        with selectors.DefaultSelector() as waiting:
            waiting.register(near, selectors.EVENT_READ, far)
            waiting.register(far, selectors.EVENT_READ, near)
            posting = False
            while True:
                for key, _ in waiting.select():
                    source, sink = key.fileobj, key.data
                    assert isinstance(source, socket.socket)
                    data = source.recv(65536)
                    if not data:
                        return
                    if source is near:
                        posting = data.startswith(b"POST ")
                    elif posting and self.fate == "loses answers":
                        self.lost += 1
                        return
                    sink.sendall(data)


def _shut(one: socket.socket) -> None:
    with contextlib.suppress(OSError):
        one.shutdown(socket.SHUT_RDWR)
