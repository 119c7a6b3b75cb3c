"""Brokers for tests: a private mosquitto, one that the test plays itself; a listener, a site."""

from __future__ import annotations

import getpass
import json
import os
import shutil
import signal
import socket
import ssl
import subprocess
import threading
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Self

from paho.mqtt.client import Client, MQTTMessage
from paho.mqtt.enums import CallbackAPIVersion

from daemon.moisture.description import Compressor, Fixed, Line
from daemon.site.types import Api, Cup, Hours, Mqtt, Site

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


def a_site(port: int, **mqtt: Any) -> Site:
    """An invented site without sensors, whose broker listens on that port."""
    nothing = Fixed(0.0, 0.0)
    return Site(
        path="alder-yard.toml",
        id="alder-yard",
        name="Alder Yard Finishing",
        timezone="Europe/Lisbon",
        units="metric",
        sample_every_us=10_000_000,
        hours=Hours(((),) * 7, frozenset(), always_open=True),
        cup=Cup(),
        sensors=(),
        channels={},
        line=Line((), (), Compressor(nothing, None, nothing, nothing, True), 10.0),
        outlets=(),
        mqtt=Mqtt("127.0.0.1", port, **mqtt),
        api=Api(),
    )


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


# MQTT 3.1.1, section 2.2.1: types of control packets
CONNECT, PUBLISH, SUBSCRIBE, PINGREQ = 1, 3, 8, 12


@dataclass(frozen=True)
class Packet:
    """A control packet: its type and what follows the fixed header."""

    type: int
    content: bytes

    @property
    def topic(self) -> str:
        """Of a PUBLISH."""
        length = int.from_bytes(self.content[:2], "big")
        return self.content[2 : 2 + length].decode()

    @property
    def number(self) -> bytes:
        """The packet identifier of a PUBLISH at QoS 1."""
        start = 2 + int.from_bytes(self.content[:2], "big")
        return self.content[start : start + 2]

    @property
    def payload(self) -> bytes:
        """Of a PUBLISH at QoS 1."""
        return self.content[4 + int.from_bytes(self.content[:2], "big") :]


class PlayedBroker:
    """A broker that answers only what the test makes it answer."""

    def __init__(self, tls: ssl.SSLContext | None = None) -> None:
        self._tls = tls
        self._listening = socket.create_server(("127.0.0.1", 0))
        self._listening.settimeout(TIMEOUT_S)
        self.port = int(self._listening.getsockname()[1])
        self._connection: socket.socket | None = None

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.drop()
        self._listening.close()

    def accept(self) -> None:
        """Wait for a connection and let it in."""
        connection, _ = self._listening.accept()
        connection.settimeout(TIMEOUT_S)
        if self._tls is not None:
            connection = self._tls.wrap_socket(connection, server_side=True)
        self._connection = connection
        assert self.packet().type == CONNECT
        self._connection.sendall(bytes([0x20, 2, 0, 0]))  # CONNACK, accepted

    def turn_away(self) -> None:
        """Wait for a connection and close it."""
        connection, _ = self._listening.accept()
        connection.close()

    def acknowledge(self, packet: Packet) -> None:
        assert self._connection is not None
        self._connection.sendall(bytes([0x40, 2]) + packet.number)  # PUBACK

    def answer_subscribe(self) -> None:
        """The next packet must be a SUBSCRIBE to one topic; it is granted."""
        self.answer_subscription(self.packet(), granted=True)

    def answer_subscription(self, packet: Packet, granted: bool) -> None:
        assert self._connection is not None
        assert packet.type == SUBSCRIBE
        answer = 1 if granted else 0x80
        self._connection.sendall(bytes([0x90, 3]) + packet.content[:2] + bytes([answer]))  # SUBACK

    def say(self, topic: str, *payloads: bytes) -> None:
        """Send short messages, QoS 0, all in one write."""
        assert self._connection is not None
        head = len(topic).to_bytes(2, "big") + topic.encode()
        packets = [bytes([0x30, len(head + payload)]) + head + payload for payload in payloads]
        self._connection.sendall(b"".join(packets))

    def answer_ping(self) -> None:
        """The next packet must be a PINGREQ, which a client sends when it has nothing to say."""
        assert self._connection is not None
        assert self.packet().type == PINGREQ
        self._connection.sendall(bytes([0xD0, 0]))  # PINGRESP

    def drop(self) -> None:
        """Close the connection without a word."""
        if self._connection is not None:
            self._connection.close()
            self._connection = None

    def packet(self) -> Packet:
        """The next packet that the client sends."""
        (first,) = self._exactly(1)
        length, shift = 0, 0
        while True:
            (byte,) = self._exactly(1)
            length |= (byte & 0x7F) << shift
            shift += 7
            if not byte & 0x80:
                return Packet(first >> 4, self._exactly(length))

    def publish(self) -> Packet:
        """The next PUBLISH; what else comes in between is passed over."""
        while True:
            packet = self.packet()
            if packet.type == PUBLISH:
                return packet

    def _exactly(self, number: int) -> bytes:
        assert self._connection is not None
        found = b""
        while len(found) < number:
            part = self._connection.recv(number - len(found))
            assert part, "the client closed the connection"
            found += part
        return found
