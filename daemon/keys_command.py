"""`dripleg key`: makes, lists and ends the keys that open the API to phones and programs."""

from __future__ import annotations

import argparse
import os
import pwd
import sys
from collections.abc import Iterator, Sequence
from pathlib import Path
from zoneinfo import ZoneInfo

import segno

from daemon.addresses import is_loopback, names_for_others, url_host
from daemon.clock import DAY_US, HOUR_US, MINUTE_US, Clock, to_datetime
from daemon.errors import StoreError
from daemon.keys import MEANING, SCOPES, USED_EVERY_US, ApiKey, KeyRefused, make, name_of, scopes_of
from daemon.keys_store import KeyStore
from daemon.site.types import Site

ACTIONS = ("make", "list", "revoke")
USUAL = "read,record"
_PIXELS = 8  # of an image file, to one square of the code
_WHITE_ON_BLACK, _AS_BEFORE = "\033[97;40m", "\033[0m"  # ECMA-48, SGR
_QUIET = 4  # squares of white around it, as ISO/IEC 18004 asks for


def run_command(site: Site, options: argparse.Namespace, store: Path, clock: Clock) -> str:
    """Do what was asked; what to say about it. KeyRefused says what cannot be done."""
    _refuse_odd(options)
    _refuse_foreign(store)
    if options.action != "make" and not store.exists():
        raise StoreError(f"there is no database at {store}: name the daemon's with --store")
    with KeyStore.open(store, site.channels) as keys:
        if options.action == "make":
            return "\n".join(_make(site, options, keys, clock))
        if options.action == "revoke":
            ended = keys.revoke(options.key, clock.now_us())
            return f'{ended.id}, for "{ended.name}", opens nothing any more.'
        return "\n".join(_list(site, keys.every(), clock.now_us()))


def _refuse_odd(options: argparse.Namespace) -> None:
    """What does not go with the action is a mistake, and not passed over."""
    made = {
        "--for": options.made_for,
        "--may": options.may,
        "--host": options.host,
        "--png": options.png,
        "--svg": options.svg,
    }
    odd = [name for name, value in made.items() if value is not None]
    if options.action != "make" and odd:
        raise KeyRefused(f"{odd[0]} is for make; leave it out of {options.action}")
    if options.action == "make" and options.made_for is None:
        raise KeyRefused('say who or what the key is for: --for "paint booth tablet"')
    if options.action == "revoke" and not options.key:
        raise KeyRefused("say which key, by its id: `dripleg key SITE list` shows them")
    if options.action != "revoke" and options.key:
        raise KeyRefused(f'{options.action} takes no key: leave "{options.key}" out')


def _refuse_foreign(store: Path) -> None:
    """Files that root makes beside another user's database would keep its daemon out."""
    found = store if store.exists() else store.parent
    owner = found.stat().st_uid if found.exists() else 0
    if os.geteuid() == 0 and owner != 0:
        try:
            name = pwd.getpwuid(owner).pw_name
        except KeyError:
            name = f"#{owner}"
        raise KeyRefused(
            f"{found} belongs to the user {name}: run this as that user, with sudo -u '{name}' "
            "before it"
        )


# ---- make ----


def _make(site: Site, options: argparse.Namespace, keys: KeyStore, clock: Clock) -> Iterator[str]:
    name, may = name_of(options.made_for), scopes_of(options.may or USUAL)
    hosts = [options.host] if options.host else names_for_others(site.api.host)
    if not hosts:
        raise KeyRefused(
            "this machine has no address on a network: connect it, or say under what name the "
            "phone finds it: --host NAME"
        )
    key, digest, text = make(name, may, clock.now_us())
    links = [link(host, site.api.port, text) for host in hosts]
    code = segno.make_qr(links[0], error="m")
    _write(code, options)
    keys.add(key, digest)
    yield f'{key.id}: a key for "{name}", which may {" and ".join(_words(may))}.'
    yield "It is shown this once and kept nowhere:"
    yield ""
    yield f"  {text}"
    yield ""
    yield "On a phone, open this link, or look at the code below with its camera:"
    yield ""
    yield from (f"  {each}" for each in links[:1])
    yield from (f"  or {each}" for each in links[1:])
    yield ""
    yield from _drawn(code)
    yield "A program sends it as a header: Authorization: Bearer <key>"
    yield f"It ends with: dripleg key {site.path} revoke {key.id}"
    yield from _warnings(site, options)


def link(host: str, port: int, key: str) -> str:
    """What a phone opens. The key stands in the fragment, which no browser sends anywhere."""
    return f"http://{url_host(host)}:{port}/pair#{key}"


def _words(may: frozenset[str]) -> list[str]:
    return [f"{scope} ({MEANING[scope]})" for scope in SCOPES if scope in may]


def _write(code: segno.QRCode, options: argparse.Namespace) -> None:
    """Image files, which only their owner can read: whoever sees one has the key."""
    for path, kind in ((options.png, "png"), (options.svg, "svg")):
        if path is None:
            continue
        try:
            descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_TRUNC, 0o600)
            with open(descriptor, "wb") as file:
                code.save(file, kind=kind, scale=_PIXELS, border=_QUIET, light="#fff")
        except OSError as error:
            raise StoreError(f"{path}: the code cannot be written ({error.strerror})") from error


def _drawn(code: segno.QRCode) -> Iterator[str]:
    """Two rows of squares to a line of text, the light ones drawn: white on black, whatever the
    terminal's own colours are, since not every camera reads a code with the two exchanged."""
    encoding = getattr(sys.stdout, "encoding", None) or "ascii"
    try:
        "\N{FULL BLOCK}\N{UPPER HALF BLOCK}\N{LOWER HALF BLOCK}".encode(encoding)
    except (UnicodeEncodeError, LookupError):
        yield "(This terminal cannot draw the code: use the link, or --png FILE.)"
        yield ""
        return
    rows = [list(row) for row in code.matrix_iter(border=_QUIET)]
    rows += [[0] * len(rows[0])] * (len(rows) % 2)
    signs = {(0, 0): "\N{FULL BLOCK}", (0, 1): "\N{UPPER HALF BLOCK}"}
    signs |= {(1, 0): "\N{LOWER HALF BLOCK}", (1, 1): " "}
    begin, end = (_WHITE_ON_BLACK, _AS_BEFORE) if sys.stdout.isatty() else ("", "")
    for upper, lower in zip(rows[::2], rows[1::2], strict=True):
        drawn = "".join(signs[bool(a), bool(b)] for a, b in zip(upper, lower, strict=True))
        yield f"{begin}{drawn}{end}"
    yield ""


def _warnings(site: Site, options: argparse.Namespace) -> Iterator[str]:
    if is_loopback(site.api.host):
        yield ""
        yield (
            f'BUT: the API listens on this machine only ([api] host = "{site.api.host}"), and no '
            'phone can reach it. Say host = "0.0.0.0" there, start the daemon anew, and make '
            + ("the phone open the link then." if options.host else "a key with its link then.")
        )


# ---- list ----


def _list(site: Site, keys: Sequence[ApiKey], now_us: int) -> Iterator[str]:
    if not keys:
        yield "There are no keys. `dripleg key SITE make` makes one."
        return
    rows = [("id", "for", "may", "when"), *(_row(site, key, now_us) for key in keys)]
    widths = [max(len(row[column]) for row in rows) for column in range(len(rows[0]))]
    for row in rows:
        yield "  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip()


def _row(site: Site, key: ApiKey, now_us: int) -> tuple[str, ...]:
    may = ",".join(scope for scope in SCOPES if scope in key.may)
    when = f"made {ago(site, key.made_us, now_us)}, {_used(site, key, now_us)}"
    if key.revoked_us is not None:
        when += f"; revoked {ago(site, key.revoked_us, now_us)}, opens nothing"
    return key.id, key.name, may, when


def _used(site: Site, key: ApiKey, now_us: int) -> str:
    """Its last use, of which the hour is noted."""
    if key.used_us is None:
        return "never used"
    if key.used_us <= now_us < key.used_us + USED_EVERY_US:
        return "last used within the hour"
    return f"last used {ago(site, key.used_us + USED_EVERY_US // 2, now_us)}"


def ago(site: Site, at_us: int, now_us: int) -> str:
    """How long ago, as one says it; from a fortnight on, and ahead of now, the shop's date."""
    gone_us = now_us - at_us
    if 0 <= gone_us < MINUTE_US:
        return "just now"
    if MINUTE_US <= gone_us < 14 * DAY_US:
        sizes = (("day", DAY_US), ("hour", HOUR_US), ("minute", MINUTE_US))
        name, size_us = next(each for each in sizes if gone_us >= each[1])
        count = gone_us // size_us
        return f"{count} {name}{'s' if count > 1 else ''} ago"
    local = to_datetime(at_us).astimezone(ZoneInfo(site.timezone))
    return f"on {local.day} {local:%b %Y}"
