"""`dripleg drained`: a drain from a shell, by way of the daemon or straight to the journal."""

from __future__ import annotations

import argparse
import http.client
import json
import urllib.error
import urllib.parse
from pathlib import Path
from typing import Any

from daemon import accept
from daemon.asking import send, wants_key, where
from daemon.clock import SystemClock, format_rfc3339, parse_rfc3339
from daemon.errors import JournalError, StoreError, UnitError
from daemon.journal import Drain
from daemon.moisture.description import WATER_KG_PER_M3
from daemon.payloads import drain_payload
from daemon.shell import GRID_KEY
from daemon.site.types import Site
from daemon.store.store import Store
from daemon.units import parse


def record_drain(site: Site, options: argparse.Namespace, store_path: Path) -> str:
    """Record it; what to say about it. JournalError says what cannot be taken."""
    drain, at_us = _read(options)
    if drain.trap not in site.traps:
        known = ", ".join(site.traps) or "none"
        raise JournalError(f'"{drain.trap}" is not a trap of this site (known: {known})')
    answer = _through_daemon(site, drain, at_us, store_path)
    if answer is None:
        answer = _straight(site, drain, at_us, store_path)
    return (
        f"recorded as no. {answer['seq']}: {answer['trap']} {answer['outcome']} at {answer['at']}"
    )


def _read(options: argparse.Namespace) -> tuple[Drain, int | None]:
    if options.empty and options.partly:
        raise JournalError("--empty and --partly contradict each other: give one of them")
    volume_kg = None
    if options.volume is not None:
        try:
            volume_kg = parse(options.volume, "volume") * WATER_KG_PER_M3
        except UnitError as error:
            raise JournalError(f"--volume: {error}") from error
    at_us = None
    if options.at is not None:
        try:
            at_us = parse_rfc3339(options.at)
        except ValueError as error:
            raise JournalError(f"--at: {error}") from error
    empty = options.empty or (volume_kg == 0.0 and not options.partly)
    outcome: Any = "empty" if empty else "partly" if options.partly else "emptied"
    return Drain(options.trap, outcome, volume_kg, options.by, options.look), at_us


def _through_daemon(
    site: Site, drain: Drain, at_us: int | None, store_path: Path
) -> dict[str, Any] | None:
    """Ask the daemon that serves this site's API; None when nothing listens there."""
    body = {
        "outcome": drain.outcome,
        "volume_ml": None if drain.volume_kg is None else drain.volume_kg * 1000.0,
        "at": None if at_us is None else format_rfc3339(at_us),
        "by": drain.by,
        "look": drain.look,
    }
    said = {name: value for name, value in body.items() if value not in (None, "")}
    theirs = _asked(site, store_path, "site")
    if theirs is None:
        return None
    if theirs.get("id") != site.id:
        raise JournalError(
            f"{site.api.host}:{site.api.port} is served by another dripleg "
            f'("{theirs.get("id")}", not "{site.id}"): stop that one, or give one of them another '
            "port in [api]"
        )
    trap = urllib.parse.quote(drain.trap, safe="")
    return _asked(site, store_path, f"traps/{trap}/drains", json.dumps(said).encode())


def _asked(
    site: Site, store_path: Path, path: str, data: bytes | None = None
) -> dict[str, Any] | None:
    """The daemon's answer to a GET, or to a POST of data; None when nothing listens there."""
    try:
        with send(site, path, data, store_path) as response:
            answer = json.load(response)
    except urllib.error.HTTPError as error:
        if error.code == 401:
            raise StoreError(wants_key(site, store_path)) from error
        failed = StoreError if error.code >= 500 else JournalError
        raise failed(_problem(error)) from error
    except urllib.error.URLError:
        return None
    except (OSError, http.client.HTTPException) as error:
        raise StoreError(
            f"{where(site)} does not answer as it should ({error}): look at the daemon's log, and "
            "whether the drain is recorded, before you repeat it"
        ) from error
    except ValueError:
        answer = None
    if not isinstance(answer, dict):
        raise StoreError(
            f"what answers at {where(site)} is not dripleg: give another port in [api]"
        )
    return answer


def _problem(error: urllib.error.HTTPError) -> str:
    try:
        return str(json.load(error)["detail"])
    except (ValueError, KeyError, TypeError):
        return f"the daemon answered {error.code} {error.reason}"


def _straight(site: Site, drain: Drain, at_us: int | None, path: Path) -> dict[str, Any]:
    """No daemon: write to its journal, which it reads when it starts."""
    if not path.exists():
        raise StoreError(
            f"no daemon answers at {site.api.host}:{site.api.port}, and there is no database at "
            f"{path}: start the daemon first, or name its database with --store"
        )
    now_us = SystemClock().now_us()
    when_us = now_us if at_us is None else at_us
    with Store.open(path, site.channels) as store:
        begun_us = int(store.get_meta(GRID_KEY) or 0)
        accept.check(site, drain, when_us, now_us, begun_us)
        recorded = store.add_entry(drain, when_us, now_us)
    return drain_payload(recorded.entry)
