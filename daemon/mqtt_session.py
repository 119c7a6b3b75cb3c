"""One connection to an MQTT broker, from its first byte to its last, driven by one thread.

paho-mqtt speaks the protocol; its loop is driven from here, so that sending, acknowledging and
waiting happen in one thread and in an order that can be read. A session is never revived: paho
would send again what it had queued, beside what its caller sends again.
"""

from __future__ import annotations

import selectors
import socket
import ssl
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Literal

from paho.mqtt.client import Client, MQTTMessage
from paho.mqtt.enums import CallbackAPIVersion, MQTTProtocolVersion

from daemon.errors import BrokerError
from daemon.outbox import AT_LEAST_ONCE, Message
from daemon.site.password import broker_password
from daemon.site.types import Mqtt

CONNECT_S = 5.0  # how long a broker may take to accept the connection


def tls_context(mqtt: Mqtt) -> ssl.SSLContext | None:
    """What the broker's certificate is checked against; None without TLS.

    BrokerError when `ca_file` cannot be read.
    """
    if not mqtt.tls:
        return None
    try:
        context = ssl.create_default_context(cafile=mqtt.ca_file or None)
    except OSError as error:
        raise BrokerError(
            f"[mqtt] ca_file {mqtt.ca_file}: cannot be used ({error}): give the PEM file of the "
            "authority that signed the broker's certificate"
        ) from error
    context.sslsocket_class = _TidySocket
    return context


class _TidySocket(ssl.SSLSocket):
    """Closes itself when the broker's certificate is refused, which paho does not."""

    def do_handshake(self, block: bool = False) -> None:
        try:
            super().do_handshake(block)
        except BaseException:
            self.close()
            raise


@dataclass(frozen=True, slots=True)
class Arrived:
    """A message that somebody published. `number` is the broker's for this delivery."""

    topic: str
    payload: bytes
    retained: bool
    number: int  # 0 at quality of service 0
    again: bool  # the broker does not know whether an earlier delivery came through


class Session:
    """A connection. `accepted` once the broker let us in; `ended` says why it is over, or ""."""

    def __init__(
        self,
        mqtt: Mqtt,
        client_id: str,
        tls: ssl.SSLContext | None,
        keepalive_s: int,
        will: Message | None,
        take: Callable[[Arrived], None],
        kept: bool = True,
    ) -> None:
        """`take` is given what arrives; it must not raise.

        While a `kept` session's owner is away, the broker keeps for it what is published at least
        once on the topics that it had subscribed to.
        """
        self.accepted = False
        self.ended = ""
        self.listening: Literal["", "granted", "refused"] = ""  # what the first `subscribe` got
        self.refused_topics: list[str] = []  # of the further ones, for the caller to take out
        self._asked: dict[int, str] = {}  # subscriptions that the broker has not answered
        self._acknowledged: list[int] = []
        self._take = take
        self._mqtt = mqtt
        self._keepalive_s = keepalive_s
        self._client = client = Client(
            CallbackAPIVersion.VERSION2,
            client_id=client_id,
            clean_session=not kept,
            protocol=MQTTProtocolVersion.MQTTv311,
            reconnect_on_failure=False,
        )
        client.connect_timeout = CONNECT_S
        client.max_inflight_messages_set(0)  # no limit of paho's: the caller keeps its own
        if tls is not None:
            client.tls_set_context(tls)
        if will is not None:
            client.will_set(will.topic, will.payload, will.qos, will.retain)
        client.on_connect = self._on_connect
        client.on_disconnect = self._on_disconnect
        client.on_publish = self._on_publish
        client.on_subscribe = self._on_subscribe
        client.on_message = self._on_message

    def open(self) -> None:
        """Connect and ask to be let in; the answer comes in a `step`. Sets `ended` on failure."""
        try:
            if self._mqtt.user:
                self._client.username_pw_set(self._mqtt.user, broker_password(self._mqtt))
            self._client.connect(self._mqtt.host, self._mqtt.port, self._keepalive_s)
        except (BrokerError, OSError, ValueError) as error:
            self.ended = _words(error)

    def subscribe(self, topic: str, quality: int = AT_LEAST_ONCE) -> None:
        """Ask for what is published under this topic.

        At least once, the broker also keeps it while we are away; with quality 0 it does not.
        """
        _, number = self._client.subscribe(topic, quality)
        if number is not None:
            self._asked[number] = topic

    def send(self, message: Message) -> int:
        """Send a message; the number that `acknowledged` will name it by."""
        return self._client.publish(message.topic, message.payload, message.qos, message.retain).mid

    def acknowledged(self) -> list[int]:
        """The numbers acknowledged since the last call."""
        numbers, self._acknowledged = self._acknowledged, []
        return numbers

    def step(self, waker: socket.socket, wait_s: float) -> None:
        """Wait for the network or for a byte from `waker`, no longer than that, and do the work."""
        sock = self._client.socket()
        if not isinstance(sock, socket.socket):
            self.ended = self.ended or "the connection was closed"
            return
        # what TLS has decrypted already makes no socket readable
        decrypted = isinstance(sock, ssl.SSLSocket) and sock.pending() > 0
        wanted = selectors.EVENT_READ
        if self._client.want_write():
            wanted |= selectors.EVENT_WRITE
        with selectors.PollSelector() as selector:
            selector.register(sock, wanted)
            selector.register(waker, selectors.EVENT_READ)
            ready = {key.fileobj: mask for key, mask in selector.select(0 if decrypted else wait_s)}
        mask = ready.get(sock, 0)
        if mask & selectors.EVENT_READ or decrypted:
            self._client.loop_read()
        if mask & selectors.EVENT_WRITE:
            self._client.loop_write()
        self._client.loop_misc()

    def goodbye(self) -> None:
        """End on purpose: the broker forgets the last will."""
        self._client.disconnect()
        self.ended = self.ended or "ended on purpose"

    def close(self) -> None:
        """Let go of the socket. Without a goodbye before, the broker publishes the last will."""
        sock = self._client.socket()
        if isinstance(sock, socket.socket):
            sock.close()

    def _on_connect(
        self, client: Client, data: Any, flags: Any, reason: Any, properties: Any
    ) -> None:
        if reason.is_failure:
            self.ended = f"the broker refused: {str(reason).lower()}"
        else:
            self.accepted = True

    def _on_disconnect(
        self, client: Client, data: Any, flags: Any, reason: Any, properties: Any
    ) -> None:
        self.ended = self.ended or f"the connection was lost: {str(reason).lower()}"

    def _on_publish(
        self, client: Client, data: Any, number: int, reason: Any, properties: Any
    ) -> None:
        self._acknowledged.append(number)

    def _on_subscribe(
        self, client: Client, data: Any, number: int, reasons: Any, properties: Any
    ) -> None:
        refused = any(reason.is_failure for reason in reasons)
        topic = self._asked.pop(number, "")
        if not self.listening:
            self.listening = "refused" if refused else "granted"
        elif refused:
            self.refused_topics.append(topic)

    def _on_message(self, client: Client, data: Any, message: MQTTMessage) -> None:
        self._take(
            Arrived(message.topic, bytes(message.payload), message.retain, message.mid, message.dup)
        )


def _words(error: Exception) -> str:
    if isinstance(error, OSError) and error.strerror:
        return error.strerror.lower()
    return str(error) or type(error).__name__
