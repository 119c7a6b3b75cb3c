"""A broker that a test plays itself, packet by packet."""

from __future__ import annotations

import socket
import ssl
from dataclasses import dataclass
from typing import Self

from tests.daemon.broker import TIMEOUT_S

# MQTT 3.1.1, section 2.2.1: types of control packets
CONNECT, PUBLISH, PUBACK, SUBSCRIBE, PINGREQ = 1, 3, 4, 8, 12


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

    def say_once(self, topic: str, payload: bytes, number: int, again: bool = False) -> None:
        """Send a short message, QoS 1, with that packet identifier and perhaps the DUP flag."""
        assert self._connection is not None
        head = len(topic).to_bytes(2, "big") + topic.encode() + number.to_bytes(2, "big")
        first = 0x32 | (0x08 if again else 0)
        self._connection.sendall(bytes([first, len(head + payload)]) + head + payload)

    def acknowledgement(self) -> int:
        """Of the next message that the client acknowledges: its packet identifier."""
        while (packet := self.packet()).type != PUBACK:
            pass
        return int.from_bytes(packet.content[:2], "big")

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
