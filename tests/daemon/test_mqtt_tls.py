"""The link over TLS."""

from __future__ import annotations

import json
import ssl
import subprocess
from collections.abc import Iterator
from pathlib import Path

import pytest

from daemon.clock import SystemClock
from daemon.errors import BrokerError
from daemon.journal import Drain
from daemon.mqtt import MqttLink, Timing
from daemon.store.store import Store
from tests.daemon.broker import TIMEOUT_S, Broker, Listener
from tests.daemon.linking import (
    BASE,
    DRAINS,
    REFUSED,
    Journal,
    a_site,
    linked,
    numbers,
    queue,
)
from tests.daemon.played_broker import PlayedBroker


@pytest.fixture(scope="module")
def certificate(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    """A certificate for 127.0.0.1 that signs itself, and its key."""
    folder = tmp_path_factory.mktemp("tls")
    certificate, key = folder / "broker.pem", folder / "broker.key"
    subprocess.run(
        ["openssl", "req", "-x509", "-newkey", "ec", "-pkeyopt", "ec_paramgen_curve:prime256v1",
         "-nodes", "-days", "2", "-subj", "/CN=broker", "-addext", "subjectAltName=IP:127.0.0.1",
         "-keyout", str(key), "-out", str(certificate)],
        check=True,
        capture_output=True,
    )  # fmt: skip
    return certificate, key


@pytest.fixture
def tls_broker(tmp_path: Path, certificate: tuple[Path, Path]) -> Iterator[Broker]:
    extra = "certfile {}\nkeyfile {}".format(*certificate)
    started = Broker(tmp_path, extra=extra).start()
    yield started
    started.stop()


def test_over_tls_events_arrive_and_drains_are_taken_in(
    tls_broker: Broker, certificate: tuple[Path, Path], store: Store, journal: Journal
) -> None:
    queue(store, 0, 500)
    port, ca_file = tls_broker.port, str(certificate[0])
    with (
        Listener(port, f"{BASE}/#", ca_file=ca_file) as listener,
        linked(port, store, journal, tls=True, ca_file=ca_file) as link,
    ):
        listener.wait_for(lambda heard: len(numbers(heard)) == 500)
        for number in range(20):
            listener.say(DRAINS, json.dumps({"trap": "tank", "by": str(number)}))
        listener.say(DRAINS, b"-")
        listener.wait_for(lambda heard: heard[-1].topic == REFUSED)
        assert link.status == "connected"
    assert [entry.body for entry in journal.entries] == [
        Drain("tank", by=str(n)) for n in range(20)
    ]


def test_drains_that_arrive_in_one_piece_over_tls_are_all_taken_in(
    certificate: tuple[Path, Path], store: Store, journal: Journal
) -> None:
    tls = ssl.SSLContext(ssl.PROTOCOL_TLS_SERVER)
    tls.load_cert_chain(*certificate)
    ca_file = str(certificate[0])
    with (
        PlayedBroker(tls) as broker,
        linked(broker.port, store, journal, Timing(keepalive_s=60), tls=True, ca_file=ca_file),
    ):
        broker.accept()
        broker.publish()
        broker.answer_subscribe()
        broker.say(DRAINS, *(json.dumps({"trap": "tank", "by": n}).encode() for n in "abc"), b"-")
        assert broker.publish().topic == REFUSED
        broker.drop()
    assert [entry.body for entry in journal.entries] == [Drain("tank", by=n) for n in "abc"]


def test_a_certificate_of_an_unknown_authority_is_refused(tls_broker: Broker, store: Store) -> None:
    with linked(tls_broker.port, store, tls=True) as link:
        with link._changed:
            assert link._changed.wait_for(lambda: link.problem, TIMEOUT_S)
        assert "certificate verify failed" in link.problem.lower()


def test_a_ca_file_that_cannot_be_read_is_told_at_once(store: Store, tmp_path: Path) -> None:
    site = a_site(1, tls=True, ca_file=str(tmp_path / "nowhere.pem"))
    with pytest.raises(BrokerError, match=r"ca_file .*nowhere\.pem: cannot be used .*No such file"):
        MqttLink(site, store, Journal().record, SystemClock())
