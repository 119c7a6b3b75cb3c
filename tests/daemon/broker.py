"""A private mosquitto for tests, and a subscriber that listens to it."""

from __future__ import annotations

import getpass
import json
import os
import shutil
import signal
import socket
import subprocess
import threading
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Self

from paho.mqtt.client import Client, MQTTMessage
from paho.mqtt.enums import CallbackAPIVersion

TIMEOUT_S = 30.0  # no test waits so long unless something is broken

_CONFIG = """
listener {port} 127.0.0.1
user {user}
allow_anonymous {anonymous}
persistence true
persistence_location {folder}/
max_queued_messages 0
log_dest stderr
log_type all
{extra}
"""


def free_port() -> int:
    """A loopback port that nobody listens on now."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


class Broker:
    """A mosquitto of the test's own; the same port and folder through stops and starts."""

    def __init__(self, folder: Path, extra: str = "", anonymous: bool = True) -> None:
        self.port = free_port()
        self._folder = folder
        self._config = folder / "mosquitto.conf"
        self._config.write_text(
            _CONFIG.format(
                port=self.port,
                user=getpass.getuser(),
                folder=folder,
                anonymous=str(anonymous).lower(),
                extra=extra,
            )
        )
        self._process: subprocess.Popen[str] | None = None
        self._lines: list[str] = []
        self._said = threading.Condition()

    def start(self) -> Self:
        """Start, and wait until it listens."""
        path = os.pathsep.join([os.environ.get("PATH", ""), "/usr/sbin", "/usr/local/sbin"])
        program = shutil.which("mosquitto", path=path)
        assert program is not None, "these tests need mosquitto: apt-get install mosquitto"
        self._lines.clear()
        process = self._process = subprocess.Popen(
            [program, "-c", str(self._config)], stderr=subprocess.PIPE, text=True
        )
        self._reader = threading.Thread(target=self._read, args=(process,), daemon=True)
        self._reader.start()
        self.wait_for_line("running")
        return self

    def wait_for_line(self, text: str, since: int = 0) -> None:
        """Wait until a line of its log, from number `since` on, holds the text."""
        with self._said:
            told = self._said.wait_for(
                lambda: any(text in line for line in self._lines[since:]), TIMEOUT_S
            )
        assert told, f"mosquitto never said {text!r}:\n" + "\n".join(self._lines)

    @property
    def lines(self) -> int:
        """How many lines of log there are."""
        return len(self._lines)

    def freeze(self) -> None:
        """It answers no more, and its connections stay."""
        self._signal(signal.SIGSTOP)

    def thaw(self) -> None:
        self._signal(signal.SIGCONT)

    def kill(self) -> None:
        """As a power cut would end it."""
        self._end(signal.SIGKILL)

    def stop(self) -> None:
        """May be called twice."""
        if self._process is not None:
            self.thaw()
            self._end(signal.SIGTERM)

    def save(self) -> None:
        """Make it write its sessions and retained messages to disk, and wait for that."""
        since = self.lines
        self._signal(signal.SIGUSR1)
        self.wait_for_line("Saving in-memory database", since)
        with Listener(self.port, "nothing/at/all"):
            pass  # it serves a client only when the saving is over

    def forget(self) -> None:
        """While it does not run: lose what it had written."""
        (self._folder / "mosquitto.db").unlink(missing_ok=True)

    def _signal(self, number: int) -> None:
        assert self._process is not None
        self._process.send_signal(number)

    def _end(self, number: int) -> None:
        process, self._process = self._process, None
        assert process is not None
        process.send_signal(number)
        process.wait(TIMEOUT_S)
        self._reader.join(TIMEOUT_S)

    def _read(self, process: subprocess.Popen[str]) -> None:
        assert process.stderr is not None
        with process.stderr:
            for line in process.stderr:
                with self._said:
                    self._lines.append(line.rstrip())
                    self._said.notify_all()


@dataclass(frozen=True)
class Heard:
    """A message as a subscriber got it."""

    topic: str
    payload: bytes
    retained: bool

    @property
    def body(self) -> Any:
        return json.loads(self.payload)


class Listener:
    """A subscriber. With a name its session outlives its connection, at the broker."""

    def __init__(self, port: int, topic: str, name: str = "", ca_file: str = "") -> None:
        self.heard: list[Heard] = []
        self._news = threading.Condition()
        self._subscribed = 0
        self._topic = topic
        self._client = Client(
            CallbackAPIVersion.VERSION2, client_id=name or None, clean_session=not name
        )
        if ca_file:
            self._client.tls_set(ca_certs=ca_file)
        self._client.reconnect_delay_set(1, 1)
        self._client.on_connect = self._on_connect
        self._client.on_subscribe = self._on_subscribe
        self._client.on_message = self._on_message
        self._client.connect(port=port, host="127.0.0.1")

    def __enter__(self) -> Self:
        self._client.loop_start()
        with self._news:
            assert self._news.wait_for(lambda: self._subscribed, TIMEOUT_S), "never subscribed"
        return self

    def __exit__(self, *_: object) -> None:
        self._client.disconnect()
        self._client.loop_stop()

    def wait_for(self, what: Callable[[list[Heard]], object]) -> None:
        """Wait until what was heard fulfils the condition."""
        with self._news:
            fulfilled = self._news.wait_for(lambda: what(self.heard), TIMEOUT_S)
        assert fulfilled, f"heard only {self.heard[-5:]} ({len(self.heard)} messages)"

    def wait_for_number(self, number: int) -> list[Heard]:
        """Wait until so many messages were heard; they are returned."""
        self.wait_for(lambda heard: len(heard) >= number)
        return self.heard

    def say(self, topic: str, payload: bytes | str, retain: bool = False) -> None:
        """Publish at QoS 1, and wait until the broker has it."""
        self._client.publish(topic, payload, 1, retain).wait_for_publish(TIMEOUT_S)

    def _on_connect(self, client: Client, *_: Any) -> None:
        client.subscribe(self._topic, 1)

    def _on_subscribe(self, *_: Any) -> None:
        with self._news:
            self._subscribed += 1
            self._news.notify_all()

    def _on_message(self, client: Client, data: Any, message: MQTTMessage) -> None:
        with self._news:
            self.heard.append(Heard(message.topic, bytes(message.payload), message.retain))
            self._news.notify_all()
