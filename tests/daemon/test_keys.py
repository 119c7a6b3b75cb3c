"""Keys as they are made and kept. What leaves no trace of the secret is looked for in the bytes of
the database itself."""

from __future__ import annotations

import argparse
import hashlib
import math
from pathlib import Path

import pytest

from daemon import addresses
from daemon.clock import HOUR_US, MINUTE_US, SECOND_US
from daemon.errors import StoreError
from daemon.keys import ID_LENGTH, ID_LETTERS, KeyRefused, KeyRing, make, name_of, scopes_of
from daemon.keys_command import ago, run_command
from daemon.keys_local import key_file, read_key, remove_key, write_key
from daemon.keys_store import KeyStore
from daemon.store.store import Store
from tests.api.fake import MemoryKeys, StillClock
from tests.daemon.shops import site

NOW_US = 1_772_434_800_000_000
SHOP = site()


# ---- made ----


def test_a_secret_has_more_than_128_bits_of_chance() -> None:
    key, digest, text = make("tablet", ["read"], NOW_US)
    key_id, _, secret = text.partition(".")
    assert key.id == key_id
    assert len(secret) * math.log2(64) == 192  # base64 by RFC 4648: 6 bits a sign
    assert digest == hashlib.sha256(secret.encode()).digest()
    assert set(key_id) <= set(ID_LETTERS)
    assert len(key_id) == ID_LENGTH


def test_no_two_keys_are_alike() -> None:
    assert len({make("a", ["read"], NOW_US)[2] for _ in range(1000)}) == 1000


@pytest.mark.parametrize(
    ("text", "scopes"),
    [
        ("read", {"read"}),
        ("record, read", {"read", "record"}),
        ("service,read,record", {"read", "record", "service"}),
    ],
)
def test_scopes_are_read_from_a_list(text: str, scopes: set[str]) -> None:
    assert scopes_of(text) == scopes


@pytest.mark.parametrize("text", ["", " , ", "drain", "read,write", "READ"])
def test_an_unknown_scope_is_told_with_those_there_are(text: str) -> None:
    with pytest.raises(KeyRefused, match="read, record, service"):
        scopes_of(text)


@pytest.mark.parametrize("text", ["", "   ", "x" * 61, "two\nlines", "bell\a"])
def test_a_name_must_fit_a_list(text: str) -> None:
    with pytest.raises(KeyRefused, match="--for"):
        name_of(text)


# ---- kept ----


def test_the_database_holds_no_secret(tmp_path: Path) -> None:
    path = tmp_path / "shop.db"
    key, digest, text = make("booth tablet", ["read", "record"], NOW_US)
    with KeyStore.open(path, SHOP.channels) as keys:
        keys.add(key, digest)
    written = b"".join(each.read_bytes() for each in tmp_path.iterdir())
    assert b"booth tablet" in written
    assert text.partition(".")[2].encode() not in written
    with Store.open(path, SHOP.channels) as store:
        assert store.find_key(key.id) == (key, digest)
        assert store.find_key("nobody") is None


def test_a_key_made_and_ended_by_another_process_counts_at_once(tmp_path: Path) -> None:
    path = tmp_path / "shop.db"
    key, digest, text = make("tablet", ["read"], NOW_US)
    with Store.open(path, SHOP.channels) as store:
        ring = KeyRing(store, StillClock(NOW_US + 5 * HOUR_US + 1))
        assert ring.find(text) is None
        with KeyStore.open(path, SHOP.channels) as keys:
            keys.add(key, digest)
            found = ring.find(text)
            assert found is not None
            assert found.used_us == NOW_US + 5 * HOUR_US
            assert keys.every()[0].used_us == NOW_US + 5 * HOUR_US
            keys.revoke(key.id, NOW_US + 6 * HOUR_US)
            ended = ring.find(text)
            assert ended is not None
            assert ended.revoked_us == NOW_US + 6 * HOUR_US


def test_a_key_is_ended_by_its_id_or_by_a_name_that_only_one_has(tmp_path: Path) -> None:
    with KeyStore.open(tmp_path / "shop.db", SHOP.channels) as keys:
        made = [make(name, ["read"], NOW_US + n) for n, name in enumerate(("a b", "c", "c"))]
        for key, digest, _ in made:
            keys.add(key, digest)
        assert keys.revoke("a b", NOW_US).id == made[0][0].id
        with pytest.raises(KeyRefused, match="2 keys are for"):
            keys.revoke("c", NOW_US)
        assert keys.revoke(made[2][0].id, NOW_US).id == made[2][0].id
        assert keys.revoke("c", NOW_US).id == made[1][0].id
        with pytest.raises(KeyRefused, match="was revoked before"):
            keys.revoke("c", NOW_US)
        with pytest.raises(KeyRefused, match=r'no key "d".*: none'):
            keys.revoke("d", NOW_US)


def test_a_key_of_this_process_is_nowhere_in_the_database() -> None:
    rows = MemoryKeys()
    ring = KeyRing(rows, StillClock())
    text = ring.own("commands on this machine", ["read", "record"])
    found = ring.find(text)
    assert found is not None
    assert found.may == {"read", "record"}
    assert rows.keys == {}
    assert rows.writes == 0
    assert KeyRing(rows, StillClock()).find(text) is None


def test_a_disk_that_is_full_keeps_nobody_out(caplog: pytest.LogCaptureFixture) -> None:
    class Full(MemoryKeys):
        def key_used(self, key_id: str, at_us: int) -> None:
            raise StoreError("no space left for the database")

    rows = Full()
    key, digest, text = make("tablet", ["read"], NOW_US)
    rows.keys[key.id] = (key, digest)
    assert KeyRing(rows, StillClock()).find(text) == key
    assert "could not be noted: no space left" in caplog.text


# ---- as a list ----

MINUTES, HOURS, DAYS = MINUTE_US, HOUR_US, 24 * HOUR_US


@pytest.mark.parametrize(
    ("gone_us", "words"),
    [
        (0, "just now"),
        (59 * SECOND_US, "just now"),
        (1 * MINUTES, "1 minute ago"),
        (59 * MINUTES, "59 minutes ago"),
        (11 * HOURS, "11 hours ago"),
        (24 * HOURS - 1, "23 hours ago"),
        (24 * HOURS, "1 day ago"),
        (13 * DAYS, "13 days ago"),
        (14 * DAYS, "on 16 Feb 2026"),
        (-1 * DAYS, "on 3 Mar 2026"),  # the clock was ahead then
    ],
)
def test_how_long_ago_is_said_in_words(gone_us: int, words: str) -> None:
    assert ago(SHOP, NOW_US - gone_us, NOW_US) == words


@pytest.mark.parametrize(
    ("used_ago_us", "words"),
    [
        (None, "made 11 hours ago, never used"),
        # 07:00: the hour that has just begun
        (0, "made 11 hours ago, last used within the hour"),
        # between 04:00 and 05:00
        (3 * HOURS, "made 11 hours ago, last used 2 hours ago"),
    ],
)
def test_the_list_says_when_a_key_was_made_and_last_used(
    tmp_path: Path, used_ago_us: int | None, words: str
) -> None:
    path = tmp_path / "shop.db"
    key, digest, _ = make("paint booth tablet", ["read", "record"], NOW_US - 11 * HOURS)
    with KeyStore.open(path, SHOP.channels) as keys:
        keys.add(key, digest)
    if used_ago_us is not None:
        with Store.open(path, SHOP.channels) as store:
            store.key_used(key.id, NOW_US - used_ago_us)
    options = argparse.Namespace(
        action="list", key=None, made_for=None, may=None, host=None, png=None, svg=None
    )
    head, row = run_command(SHOP, options, path, StillClock(NOW_US)).splitlines()
    assert head.split() == ["id", "for", "may", "when"]
    assert row == f"{key.id}  paint booth tablet  read,record  {words}"


# ---- the machine's own ----


def test_only_its_own_user_can_read_the_machine_s_key(tmp_path: Path) -> None:
    store = tmp_path / "shop.db"
    key_file(store).write_text("old\n")
    key_file(store).chmod(0o644)
    write_key(store, "abc.def")
    assert key_file(store).stat().st_mode & 0o777 == 0o600
    assert read_key(store) == "abc.def"
    remove_key(store)
    remove_key(store)
    assert read_key(store) == ""


def test_a_key_that_cannot_be_read_or_written_is_told(tmp_path: Path) -> None:
    store = tmp_path / "shop.db"
    key_file(store).mkdir()  # root may read every file, so a mode would not do
    with pytest.raises(StoreError, match=r"cannot be read .*as the user that runs the daemon"):
        read_key(store)
    with pytest.raises(StoreError, match="cannot be written"):
        write_key(store, "abc.def")


# ---- addresses ----


def test_a_name_that_is_listened_on_is_the_one_for_others() -> None:
    assert addresses.names_for_others("192.168.1.20") == ["192.168.1.20"]
    assert addresses.names_for_others("shop-pi") == ["shop-pi"]


def test_on_every_address_others_find_this_machine_by_its_own() -> None:
    for name in addresses.names_for_others("0.0.0.0"):
        assert name.endswith(".local") or not addresses.is_loopback(name)
