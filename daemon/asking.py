"""Asks the daemon that serves a site, from another process on the same machine."""

from __future__ import annotations

import http.client
import json
import urllib.error
import urllib.request
from pathlib import Path
from typing import Any

from daemon.addresses import is_loopback
from daemon.errors import StoreError
from daemon.keys_local import key_file, read_key, usual_store
from daemon.site.types import Site

TIMEOUT_S = 10.0


def key_header(site: Site, store_path: Path | None = None) -> dict[str, str]:
    """What shows the daemon that a command comes from its own machine and user.

    `store_path` is its database, where that is not beside the site file. StoreError when there is
    a key that this user may not read.
    """
    if is_loopback(site.api.host):
        return {}  # none is asked
    key = read_key(usual_store(site) if store_path is None else store_path)
    return {"Authorization": f"Bearer {key}"} if key else {}


def ask(
    site: Site, path: str, body: dict[str, Any] | None = None, store_path: Path | None = None
) -> tuple[int, Any] | None:
    """Status and JSON of a GET under /api/v1/, or of a POST of `body`; None: nobody listens there.

    StoreError when something listens that does not answer as dripleg does.
    """
    data = None if body is None else json.dumps(body).encode()
    try:
        with send(site, path, data, store_path) as response:
            return response.status, json.load(response)
    except urllib.error.HTTPError as error:
        with error:
            return error.code, _body(error)
    except urllib.error.URLError:
        return None
    except (OSError, http.client.HTTPException, ValueError) as error:
        raise StoreError(f"{where(site)} does not answer as dripleg does ({error})") from error


def where(site: Site) -> str:
    """Host and port at which a program on this machine finds the site's API."""
    host = {"0.0.0.0": "127.0.0.1", "::": "::1"}.get(site.api.host, site.api.host)
    return f"[{host}]:{site.api.port}" if ":" in host else f"{host}:{site.api.port}"


def send(
    site: Site, path: str, data: bytes | None, store_path: Path | None
) -> http.client.HTTPResponse:
    """The answer to a GET under /api/v1/, or to a POST of data, with this machine's key.

    urllib's errors when there is none, or when it says that something is wrong.
    """
    request = urllib.request.Request(
        f"http://{where(site)}/api/v1/{path}",
        data,
        {"Content-Type": "application/json", **key_header(site, store_path)},
    )
    opener = urllib.request.build_opener(urllib.request.ProxyHandler({}))
    response: http.client.HTTPResponse = opener.open(request, timeout=TIMEOUT_S)
    return response


def serves(site: Site, store_path: Path | None = None) -> bool:
    """Whether a daemon of this very site runs here; whatever else listens there is not one.

    StoreError when one listens that wants a key which cannot be read here.
    """
    key_header(site, store_path)  # so that a key that may not be read is told
    try:
        answer = ask(site, "site", store_path=store_path)
    except StoreError:
        return False
    if answer is None or not isinstance(answer[1], dict):
        return False
    if answer[0] == 401:
        raise StoreError(wants_key(site, store_path))
    return answer[0] == 200 and answer[1].get("id") == site.id


def wants_key(site: Site, store_path: Path | None = None) -> str:
    """What to say when a daemon does not know this machine's key."""
    path = key_file(usual_store(site) if store_path is None else store_path)
    return (
        f"the daemon at {site.api.host}:{site.api.port} asks for a key, and the one for commands "
        f"on this machine is not in {path}: name the daemon's own database with --store"
    )


def _body(error: urllib.error.HTTPError) -> Any:
    try:
        return json.load(error)
    except ValueError:
        return {}
