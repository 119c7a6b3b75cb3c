"""Keys that open the API to a phone or a program: made, hashed, and recognised.

A key is `<id>.<secret>`: the id is shown in lists and names the key when it is to be revoked, the
secret is 192 bits from the system's own source of chance. Only a SHA-256 digest of the secret is
kept. A slow hash is for passwords that people choose, which can be guessed by the million; 192 bits
of chance cannot be guessed however quickly a guess is tried.
"""

from __future__ import annotations

import hashlib
import hmac
import logging
import secrets
import threading
from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Literal, Protocol, get_args

from daemon.clock import HOUR_US, Clock
from daemon.errors import DriplegError, StoreError

log = logging.getLogger("dripleg")

Scope = Literal["read", "record", "service"]
SCOPES: tuple[Scope, ...] = get_args(Scope)
MEANING: dict[Scope, str] = {
    "read": "see traps, outlets, alarms, readings and the weekly log",
    "record": "record drains, blotter tests and gauge readings; acknowledge and put off alarms",
    "service": "record changed parts and salt checks",
}
SECRET_BYTES = 24
ID_LETTERS = "abcdefghjkmnpqrstuvwxyz23456789"  # none that look alike
ID_LENGTH = 8
LONGEST_KEY = 100
LONGEST_NAME = 60
USED_EVERY_US = HOUR_US  # how finely the last use is kept: not a write for every request


class KeyRefused(DriplegError, ValueError):
    """What was asked of keys cannot be done: an unknown scope, an unknown key."""


@dataclass(frozen=True, slots=True)
class ApiKey:
    """A key as it is known here: everything but its secret."""

    id: str
    name: str  # who or what it was made for
    may: frozenset[Scope]
    made_us: int
    used_us: int | None = None  # to the hour
    revoked_us: int | None = None


class KeyRows(Protocol):
    """Where keys are kept."""

    def find_key(self, key_id: str) -> tuple[ApiKey, bytes] | None:
        """The key of that id with its secret's digest, revoked ones too."""
        ...

    def key_used(self, key_id: str, at_us: int) -> None: ...


def make(name: str, may: Iterable[Scope], now_us: int) -> tuple[ApiKey, bytes, str]:
    """A new key: what is kept of it, its digest, and the key itself, which is kept nowhere."""
    key_id = "".join(secrets.choice(ID_LETTERS) for _ in range(ID_LENGTH))
    secret = secrets.token_urlsafe(SECRET_BYTES)
    return ApiKey(key_id, name, frozenset(may), now_us), digest(secret), f"{key_id}.{secret}"


def digest(secret: str) -> bytes:
    """What is kept of a secret."""
    return hashlib.sha256(secret.encode()).digest()


def scopes_of(text: str) -> frozenset[Scope]:
    """ "read,record" as scopes; KeyRefused names the known ones."""
    words = [word.strip() for word in text.split(",") if word.strip()]
    odd = [word for word in words if word not in SCOPES]
    if odd or not words:
        known = "; ".join(f"{scope}: {MEANING[scope]}" for scope in SCOPES)
        said = f'"{odd[0]}" is nothing that a key may do' if odd else "a key that may do nothing"
        raise KeyRefused(f"{said}; write one or more of {', '.join(SCOPES)} ({known})")
    return frozenset(scope for scope in SCOPES if scope in words)


def name_of(text: str) -> str:
    """Who or what a key is for, fit for a list; KeyRefused otherwise."""
    name = text.strip()
    if not name or len(name) > LONGEST_NAME or not name.isprintable():
        raise KeyRefused(
            f'--for "{text[:80]}": say in a few words who or what the key is for, at most '
            f'{LONGEST_NAME} characters, like "paint booth tablet"'
        )
    return name


class KeyRing:
    """Recognises keys. Safe to call from any thread.

    A key made or revoked by another process counts from the next request on: every one is looked
    up.
    """

    def __init__(self, rows: KeyRows, clock: Clock) -> None:
        self._rows, self._clock = rows, clock
        self._lock = threading.Lock()
        self._own: dict[str, tuple[ApiKey, bytes]] = {}

    def find(self, text: str) -> ApiKey | None:
        """The key, also a revoked one; None when nobody made it. The use is noted."""
        key_id, dot, secret = text.partition(".")
        if not dot or len(text) > LONGEST_KEY or not text.isascii() or "\0" in text:
            return None
        found = self._own.get(key_id) or self._rows.find_key(key_id)
        # an unknown id costs a comparison too
        key, kept = found if found is not None else (None, bytes(32))
        right = hmac.compare_digest(kept, digest(secret))
        if key is None or not right:
            return None
        if key.revoked_us is None and key_id not in self._own:
            key = self._noted(key)
        return key

    def own(self, name: str, may: Iterable[Scope]) -> str:
        """A key of this process alone, kept in memory: gone when the process is."""
        key, kept, text = make(name, may, self._clock.now_us())
        self._own[key.id] = (key, kept)
        return text

    def _noted(self, key: ApiKey) -> ApiKey:
        hour_us = self._clock.now_us() // USED_EVERY_US * USED_EVERY_US
        with self._lock:
            if key.used_us is not None and key.used_us >= hour_us:
                return key
            try:
                self._rows.key_used(key.id, hour_us)
            except StoreError as error:  # a full disk must not keep people from reading
                log.warning("the use of key %s could not be noted: %s", key.id, error)
                return key
        return replace(key, used_us=hour_us)
